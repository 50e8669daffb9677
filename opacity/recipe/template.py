"""A commented recipe to fill in, for a molecule that the caller knows more or less about."""

from __future__ import annotations

import json
from dataclasses import dataclass

from opacity.errors import InputError, printable, problem
from opacity.recipe.sections import FORMULA


@dataclass(frozen=True)
class MoleculeFacts:
    """What is known of a molecule: its name, and (formula, terrestrial abundance) in order of local number."""

    name: str | None = None
    isotopologues: tuple[tuple[str, float], ...] = ()


def recipe_template(formula: str, facts: MoleculeFacts | None) -> str:
    """A recipe (TOML) for `formula` in which ``# decide:`` marks what only the user can know.

    With `facts` None the molecule is one without known masses and isotopologues, and the recipe
    asks for them.  Raises InputError for text that is no formula.
    """
    if not FORMULA.fullmatch(formula):
        found = f'"{printable(formula)}"'
        raise InputError(problem("formula", "impossible formula", expected="one such as CO or H2O", found=found))
    parts = (
        _HEAD.format(formula=formula),
        _molecule(formula, facts),
        _line_list(formula, facts),
        _isotopologues(facts),
        _partition_function(facts),
        _BROADENING,
        _PROFILE,
        _GRID,
        _TABLES,
    )
    return "\n".join(parts)


def _molecule(formula: str, facts: MoleculeFacts | None) -> str:
    name = _quoted(facts.name if facts and facts.name else formula)
    section = f'[molecule]\nname = {name}\nformula = "{formula}"\n'
    if facts is None:
        section += "# mass = 28.01                       # decide: g/mol; this molecule's mass is not known here\n"
    return section


def _line_list(formula: str, facts: MoleculeFacts | None) -> str:
    section = _LINE_LIST.format(formula=formula, files=f'["lines/{formula}*.par"]')
    if facts is None:
        name = f'# isotopologue = "{formula}"'
        section += f"{name:<38} # decide: a name for the one isotopologue that the list holds\n"
    elif facts.isotopologues:
        name = f'# isotopologue = "{facts.isotopologues[0][0]}"'
        section += f"{name:<38} # the list's own; from a list of several, this alone\n"
    return section


def _isotopologues(facts: MoleculeFacts | None) -> str:
    if facts is None:
        return _ONE_ISOTOPOLOGUE
    section = _ISOTOPOLOGUES
    if facts.isotopologues:
        section += "# Known here, by local number, with terrestrial abundance:\n"
        rows = enumerate(facts.isotopologues, start=1)
        section += "".join(f"#   {number:<3} {name:<24} {share:.6g}\n" for number, (name, share) in rows)
    return section


def _partition_function(facts: MoleculeFacts | None) -> str:
    if facts is None:
        return _PARTITION_FUNCTION_FILE
    return _PARTITION_FUNCTION_TIPS


def _quoted(text: str) -> str:
    """A TOML basic string: JSON's escapes are TOML's, apart from DEL."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


_HEAD = """\
# Recipe for cross-sections of {formula}.
# Lines marked "decide:" need a decision of yours; the rest can stand as it is.
# File names are relative to this file.  Units: cm-1, K, bar.
"""

_LINE_LIST = """\
[[line_list]]                          # repeat the section for further lists of other ranges or isotopologues
format = "hitran"                      # records of 160 characters; "hapi": a .data file with its .header; "exomol":
                                       # .states, .trans, .pf, .broad, .def, also .bz2; "catalogue": JPL's and CDMS's
files = {files:<30} # decide: the files you have; patterns are allowed
# Where `opacity fetch` gets files that you do not have, saved beside the first of files: from URLs, or from HITRAN by
# its numbers; there the format "hapi" can have parameters = ["gamma_h2", "n_h2", "gamma_he", "n_he"] too.
# urls = ["https://host/{formula}.par"]
# hitran = {{ molecule = 5, isotopologues = [1], range = [1000.0, 2000.0] }} # decide: 5 is CO
# range = [0.0, 9000.0]                # cm-1, to read only a part
reference = ""                         # decide: the publication to cite for this list; goes into the table
bad_records = "stop"                   # "leave-out" counts and skips records that cannot be read
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
file = "partition-function.pf"         # decide: a file with columns T in K and Q
                                       # with format "exomol": source = "states", or no file for the .pf among its files
"""

_BROADENING = """\
[broadening]
# decide: the gas around the molecule, as mole fractions that add up to 1.  The values here are a gas of
# solar composition, rounded (from memory); { air = 1.0 } and { self = 1.0 } are broadeners like any other.
# Records of 160 characters hold widths for air and self only; the hapi format can hold H2, He and CO2 too.
mixture = { H2 = 0.85, He = 0.15 }
# files = { H2 = "H2.broad" }          # widths in ExoMol's .broad layout, for a list that has none by H2

# Widths for lines for which neither list nor file gives any; such lines are counted and reported.
# decide: fill in for each broadener that your list lacks.
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
wavenumber = { start = 1000.0, stop = 2000.0, step = 0.01 }                # decide: cm-1
# Interpolation in a table needs four nodes or more on each axis to be cubic; with fewer it is linear.
# A list made for 296 K misses hot lines: above about 700 K take another.
temperature = { start = 150.0, stop = 700.0, count = 9, spacing = "log" }  # decide: K
pressure = { start = 1e-6, stop = 100.0, count = 9, spacing = "log" }      # decide: bar
# For one atmospheric profile instead of a grid: nodes = [[300.0, 0.01], [450.0, 0.1]]
"""

_TABLES = """\
[cross_section]                        # a table wanted; the section has no keys
# [k_coefficient]                      # another: k-coefficients, beside it or alone
# bands = { resolving_power = 100 }    # or { width = 10.0 }, { edges = [...] }, { wavelength = [...] } (micrometres)
# g_points = "auto"                    # as few as transmission_error asks for, or a number
# transmission_error = 5e-3            # largest error of a band's transmission, at every node

# decide: published band strengths that `opacity check` holds the table against; leave out if there are none.
# [[band_strength]]
# name = "1-0"
# range = [1100.0, 1900.0]             # cm-1
# strength = 1.0e-17
# unit = "cm/molecule"                 # or "km/mol", "cm-2 atm-1 (273.15 K)", "cm-2 atm-1 (296 K)", ...
# temperature = 296.0                  # K
# uncertainty = 0.02                   # relative, one standard deviation
# source = "publication of the strength"
"""
