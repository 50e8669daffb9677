"""A commented recipe to fill in, for a molecule or a data set that the caller knows more or less about."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass

from opacity.errors import InputError, printable, problem
from opacity.recipe.model import BandStrength
from opacity.recipe.sections import FORMULA

_WIDTH = 38
"""Where the comments behind values start."""


@dataclass(frozen=True)
class MoleculeFacts:
    """What is known of a molecule: its name, (formula, terrestrial abundance) in order of local number, and HITRAN's
    number of it.
    """

    name: str | None = None
    isotopologues: tuple[tuple[str, float], ...] = ()
    number: int | None = None


@dataclass(frozen=True)
class DataSetFacts:
    """What the files of a data set in ExoMol format tell: their names from the recipe's folder, and what is in them.

    `mass` (g/mol) is that of the definition; `gamma` (cm-1/bar) and `exponent` its default widths.
    """

    name: str
    isotopologue: str
    files: tuple[str, ...]
    has_partition: bool = False
    broadeners: tuple[str, ...] = ()
    mass: float | None = None
    gamma: float | None = None
    exponent: float | None = None
    max_temperature: float | None = None
    max_wavenumber: float | None = None
    notes: tuple[str, ...] = ()


def recipe_template(
    formula: str,
    facts: MoleculeFacts | None,
    bands: Sequence[BandStrength] = (),
    data_set: DataSetFacts | None = None,
) -> str:
    """A recipe (TOML) for `formula` in which ``# DECIDE:`` marks what only the user can know.

    With `facts` None the molecule is one without known masses and isotopologues, and the recipe asks for them, unless
    a data set tells.  `bands` are published strengths to check.  Raises InputError for text that is no formula.
    """
    if not FORMULA.fullmatch(formula):
        found = f'"{printable(formula)}"'
        raise InputError(problem("formula", "impossible formula", expected="one such as CO or H2O", found=found))
    parts = (
        _HEAD.format(formula=formula),
        _molecule(formula, facts, data_set),
        _line_list(formula, facts) if data_set is None else _data_set(data_set),
        _isotopologues(facts) if data_set is None else _ONE_ISOTOPOLOGUE,
        _partition_function(facts, data_set),
        _broadening(data_set),
        _PROFILE,
        _grid(data_set),
        _tables(bands),
    )
    return "\n".join(parts)


def _molecule(formula: str, facts: MoleculeFacts | None, data_set: DataSetFacts | None) -> str:
    name = _quoted(facts.name if facts and facts.name else formula)
    section = f'[molecule]\nname = {name}\nformula = "{formula}"\n'
    if facts is None and data_set is not None and data_set.mass is not None:
        return section + _commented(f"mass = {data_set.mass:.10g}", "g/mol, of the definition (.def)")
    if facts is None:
        section += _commented("# mass = 28.01", "DECIDE: g/mol; this molecule's mass is not known here")
    return section


def _line_list(formula: str, facts: MoleculeFacts | None) -> str:
    number = facts.number if facts is not None and facts.number is not None else 5
    section = _LINE_LIST.format(formula=formula, files=f'["lines/{formula}*.par"]', number=number)
    if facts is None:
        words = "DECIDE: a name for the one isotopologue that the list holds"
        section += _commented(f'# isotopologue = "{formula}"', words)
    elif facts.isotopologues:
        name = f'# isotopologue = "{facts.isotopologues[0][0]}"'
        section += _commented(name, "the list's own; from a list of several, this alone")
    return section


def _data_set(data_set: DataSetFacts) -> str:
    lines = [f"# Data set {data_set.name}, as its files were found.", *(f"# {note}" for note in data_set.notes)]
    lines += ["[[line_list]]", 'format = "exomol"', "files = ["]
    lines += [f"    {_quoted(name)}," for name in data_set.files]
    lines += ["]", f"isotopologue = {_quoted(data_set.isotopologue)}"]
    words = "DECIDE: the publication to cite for this list; goes into the table"
    return "\n".join(lines) + "\n" + _commented('reference = ""', words) + _BAD_RECORDS


def _isotopologues(facts: MoleculeFacts | None) -> str:
    if facts is None:
        return _ONE_ISOTOPOLOGUE
    section = _ISOTOPOLOGUES
    if facts.isotopologues:
        section += "# Known here, by local number, with terrestrial abundance:\n"
        rows = enumerate(facts.isotopologues, start=1)
        section += "".join(f"#   {number:<3} {name:<24} {share:.6g}\n" for number, (name, share) in rows)
    return section


def _partition_function(facts: MoleculeFacts | None, data_set: DataSetFacts | None) -> str:
    if data_set is not None:
        return _PARTITION_FUNCTION_BESIDE if data_set.has_partition else _PARTITION_FUNCTION_STATES
    if facts is None:
        return _PARTITION_FUNCTION_FILE
    return _PARTITION_FUNCTION_TIPS


def _broadening(data_set: DataSetFacts | None) -> str:
    if data_set is None:
        return _BROADENING.format(mixture=_mixture(("H2", "He")), where=_IN_RECORDS)
    found = data_set.broadeners
    where = f"# Widths by {', '.join(found)} are in the .broad files.\n" if found else "# No .broad file was found.\n"
    if data_set.gamma is not None and data_set.exponent is not None:
        where += (
            f"# The definition's default serves where nothing else does: {data_set.gamma:g} cm-1/bar,"
            f" exponent {data_set.exponent:g}.\n"
        )
    return _BROADENING.format(mixture=_mixture(found or ("H2", "He")), where=where)


def _mixture(names: Sequence[str]) -> str:
    """A mixture of these gases: hydrogen and helium as in the Sun, else the first alone."""
    fractions = {"H2": 0.85, "He": 0.15} if {"H2", "He"} <= set(names) else {names[0]: 1.0}
    mixture = f"mixture = {{ {', '.join(f'{name} = {value}' for name, value in fractions.items())} }}"
    return _commented(mixture, "DECIDE: the gas around it, mole fractions that add up to 1")


def _grid(data_set: DataSetFacts | None) -> str:
    if data_set is None:
        head = "# A list made for 296 K misses hot lines: above about 700 K take another."
        reach, hottest = 2000.0, 700.0
    else:
        reach, hottest = data_set.max_wavenumber or 2000.0, data_set.max_temperature or 2000.0
        head = "# Temperatures must lie in the range of the partition function; `opacity check` and `plan` tell."
        if data_set.max_wavenumber and data_set.max_temperature:
            head += f"\n# By its definition the list reaches {reach:g} cm-1 and is made for up to {hottest:g} K."
    stop = min(reach, 2000.0)
    rows = [
        (f"wavenumber = {{ start = {0.5 * stop}, stop = {stop}, step = 0.01 }}", "which wavenumbers, cm-1"),
        (f'temperature = {{ start = 150.0, stop = {hottest}, count = 9, spacing = "log" }}', "which temperatures, K"),
        ('pressure = { start = 1e-6, stop = 100.0, count = 9, spacing = "log" }', "which pressures, bar"),
    ]
    return _GRID.format(axes="\n".join([head, *(f"{text:<74} # DECIDE: {unit}" for text, unit in rows)]))


def _tables(bands: Sequence[BandStrength]) -> str:
    if not bands:
        return _TABLES + _NO_BANDS
    return _TABLES + "".join(f"\n{_band(one)}" for one in bands)


def _band(one: BandStrength) -> str:
    uncertainty = '"unknown"' if one.uncertainty is None else f"{one.uncertainty:g}"
    of = [f"isotopologue = {_quoted(one.isotopologue)}"] if one.isotopologue else []
    lines = [
        "[[band_strength]]",
        f"name = {_quoted(one.name)}",
        *of,
        f"range = [{one.range[0]}, {one.range[1]}]",
        f"strength = {one.strength!r}",
        f"unit = {_quoted(one.unit)}",
        f"temperature = {one.temperature}",
        f"uncertainty = {uncertainty}",
        f"source = {_quoted(one.source)}",
    ]
    return "\n".join(lines) + "\n"


def _commented(text: str, words: str) -> str:
    return f"{text:<{_WIDTH}} # {words}\n"


def _quoted(text: str) -> str:
    """A TOML basic string: JSON's escapes are TOML's, apart from DEL."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


_HEAD = """\
# Recipe for cross-sections of {formula}.
# Lines marked DECIDE need a decision of yours; the rest can stand as it is.  `opacity check` on this file says what is
# missing, before anything is computed.
# File names are relative to this file.  Units: cm-1, K, bar.
"""

_LINE_LIST = """\
[[line_list]]                          # repeat the section for further lists of other ranges or isotopologues
format = "hitran"                      # records of 160 characters; "hapi": a .data file with its .header; "exomol":
                                       # .states, .trans, .pf, .broad, .def, also .bz2; "catalogue": JPL's and CDMS's
files = {files:<30} # DECIDE: the files you have; patterns are allowed
# Where `opacity fetch` gets files that you do not have, saved beside the first of files: from URLs, or from HITRAN by
# its numbers; there the format "hapi" can have parameters = ["gamma_h2", "n_h2", "gamma_he", "n_he"] too.
# urls = ["https://host/{formula}.par"]
# hitran = {{ molecule = {number}, isotopologues = [1], range = [1000.0, 2000.0] }}
# range = [0.0, 9000.0]                # cm-1, to read only a part
reference = ""                         # DECIDE: the publication to cite for this list; goes into the table
bad_records = "stop"                   # "leave-out" counts and skips records that cannot be read
"""

_BAD_RECORDS = """bad_records = "stop"                   # "leave-out" counts and skips rows that cannot be read
"""

_ISOTOPOLOGUES = """\
[isotopologues]
abundance = "terrestrial"              # "pure" for a single isotopologue, or fractions by formula or local number:
                                       # { "1" = 0.9, "2" = 0.1 }
"""

_ONE_ISOTOPOLOGUE = """\
[isotopologues]
abundance = "pure"                     # the list's one isotopologue; its strengths must hold no abundance
"""

_PARTITION_FUNCTION_TIPS = """\
[partition_function]
source = "TIPS-2021"                   # or "TIPS-2025", or "file" with file = "name.pf" (columns T in K and Q)
                                       # with format "exomol" also "states", or "file" alone for the .pf among its files
"""

_PARTITION_FUNCTION_FILE = """\
[partition_function]
source = "file"                        # TIPS does not hold this molecule
file = "partition-function.pf"         # DECIDE: a file with columns T in K and Q
                                       # with format "exomol": source = "states", or no file for the .pf among its files
"""

_PARTITION_FUNCTION_BESIDE = """\
[partition_function]
source = "file"                        # the .pf among the files above; or "states": the sum over the .states
"""

_PARTITION_FUNCTION_STATES = """\
[partition_function]
source = "states"                      # the sum over the .states; no .pf file was found
"""

_IN_RECORDS = """\
# Records of 160 characters hold widths for air and self only; the hapi format can hold H2, He and CO2 too.
"""

_BROADENING = """\
[broadening]
{where}# A gas of solar composition is about {{ H2 = 0.85, He = 0.15 }}; {{ air = 1.0 }} and {{ self = 1.0 }} are
# broadeners like any other.
{mixture}# files = {{ H2 = "H2.broad" }}          # widths in ExoMol's .broad layout, for a list that has none by H2

# Widths for lines for which neither list nor file gives any; such lines are counted and reported.
# A source that says "from memory" needs accept_unverified = true at the top of this file.
# [broadening.default.H2]
# gamma = 0.07                         # half-width, cm-1/bar at 296 K
# exponent = 0.5                       # of the half-width's fall with temperature
# source = "publication of the values"
# [broadening.default.He]
# gamma = 0.05
# exponent = 0.4
# source = "publication of the values"
"""

_PROFILE = """\
[profile]
# Lines count up to this distance from their centre.  25 cm-1 is common practice; 25 cm-1 up to 200 bar and 100 cm-1
# above are recommended (Gharib-Nezhad et al. 2024, as quoted; not read).
cutoff = [{ to_pressure = 200.0, cutoff = 25.0 }, { cutoff = 100.0 }]
tolerance = 1e-3                       # largest relative error of the sum of lines, 1e-6 to 0.1; from 2e-6 with plinth
plinth = false                         # true subtracts the profile's value at the cut-off, for use with a continuum
# chi = "Tonkov-1996"                  # sub-Lorentzian wings: Tonkov-1996 (CO2) or Hartmann-2002 (CH4 in H2); their
                                       # constants are from memory: look them up before you publish
"""

_GRID = """\
[grid]
# With a step above the half-width of the narrowest lines some fall between the points; `opacity plan` says at which
# nodes.  Instead of step, resolving_power = 100000.0 spaces points evenly in log.
# Interpolation in a table needs four nodes or more on each axis to be cubic; with fewer it is linear.
{axes}
# For one atmospheric profile instead of a grid: nodes = [[300.0, 0.01], [450.0, 0.1]]
"""

_TABLES = """\
[cross_section]                        # a table wanted; the section has no keys
# [k_coefficient]                      # another: k-coefficients, beside it or alone
# bands = { resolving_power = 100 }    # or { width = 10.0 }, { edges = [...] }, { wavelength = [...] } (micrometres)
# g_points = "auto"                    # as few as transmission_error asks for, or a number
# transmission_error = 5e-3            # largest error of a band's transmission, at every node

# Published band strengths that `opacity check` holds the table against.
"""

_NO_BANDS = """\
# None is known here; yours may look like this, per molecule of one isotopologue or of the "natural" mixture.
# [[band_strength]]
# name = "1-0"
# isotopologue = "natural"
# range = [1100.0, 1900.0]             # cm-1
# strength = 1.0e-17
# unit = "cm/molecule"                 # or "km/mol", "cm-2 atm-1 (273.15 K)", "cm-2 atm-1 (296 K)", ...
# temperature = 296.0                  # K
# uncertainty = 0.02                   # relative, one standard deviation; "unknown" where none is published
# source = "publication of the strength"
"""
