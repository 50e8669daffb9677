"""The sections of a recipe other than line lists and grid."""

from __future__ import annotations

import os
import re
from collections.abc import Sequence
from itertools import pairwise
from pathlib import Path
from typing import Any

from opacity.arguments import DefaultWidth
from opacity.chi_factors import CHI_FACTORS
from opacity.grids import HIGHEST_PRESSURE, LOWEST_PRESSURE
from opacity.recipe.faults import Faults, listed, nearest, shown
from opacity.recipe.formats import exomol_kind
from opacity.recipe.line_lists import ISOTOPOLOGUE, WAVENUMBER, full_name
from opacity.recipe.model import (
    BandStrength,
    Broadening,
    Cutoff,
    CutoffStep,
    LineListSource,
    Molecule,
    PartitionFunctionChoice,
    Profile,
)
from opacity.recipe.positions import KeyPath
from opacity.recipe.table import Bounds, Table, checked_number, checked_text
from opacity.units import BAND_STRENGTH_UNITS

FORMULA = re.compile(r"[A-Z(][A-Za-z0-9()]*[+-]*")
ABUNDANCES = ("terrestrial", "pure")
PARTITION_FUNCTIONS = ("TIPS-2021", "TIPS-2025", "file", "states")
BAND_STRENGTH_KEYS = ("name", "isotopologue", "range", "strength", "unit", "temperature", "uncertainty", "source")
SUM_TOLERANCE = 1e-6

TEMPERATURE = Bounds(1.0, 20000.0, "K")
PRESSURE = Bounds(LOWEST_PRESSURE, HIGHEST_PRESSURE, "bar")
_MASS = Bounds(0.0, 1e4, "g/mol", open_low=True)
_FRACTION = Bounds(0.0, 1.0, open_low=True)
_GAMMA = Bounds(0.0, 10.0, "cm-1/bar", open_low=True)
_EXPONENT = Bounds(-2.0, 2.0)
_CUTOFF = Bounds(0.0, 1e6, "cm-1", open_low=True)
_TOLERANCE = Bounds(1e-6, 0.1)
_TOLERANCE_WITH_PLINTH = Bounds(2e-6, 0.1, "with plinth")
_STRENGTH = Bounds(0.0, 1e9, open_low=True)
_BARE_ATMOSPHERE = ("cm-2 atm-1", "cm-2/atm", "cm^-2 atm^-1", "atm-1 cm-2")
_WHICH_ATM = "say at which temperature the gas was: " + listed(
    [unit for unit in BAND_STRENGTH_UNITS if unit.startswith("cm-2 atm-1 (")], quoted=True
)
_PARTITION_FILE = "the name of a file of temperature and partition function"
_BAND_OF = 'the isotopologue of which the strength was published, such as (12C)(16O), or "natural"'
_BROADENER = re.compile(r"[A-Za-z][A-Za-z0-9]*")


def read_molecule(root: Table) -> Molecule:
    """The section [molecule]."""
    values = root.table("molecule", "a section [molecule] with name and formula")
    if values is None:
        return Molecule("", "")
    table = Table(root.faults, root.path("molecule"), values, ("name", "formula", "mass"))
    return Molecule(
        name=table.required_text("name", "the molecule's name, such as carbon monoxide"),
        formula=table.required_text("formula", "a formula such as CO", FORMULA),
        mass=table.number("mass", _MASS) if "mass" in table else None,
    )


def read_abundance(root: Table) -> str | dict[str, float]:
    """The section [isotopologues]: a word, or fractions by formula or local number."""
    values = root.table("isotopologues", "a section [isotopologues]", required=False)
    table = Table(root.faults, root.path("isotopologues"), values or {}, ("abundance",))
    if not isinstance(table.values.get("abundance"), dict):
        return table.choice("abundance", ABUNDANCES, default="terrestrial", also="a table of fractions by isotopologue")
    key = table.path("abundance")
    fractions = _fractions(root.faults, key, table.values["abundance"], "isotopologue", ISOTOPOLOGUE)
    total = sum(fractions.values())
    if total > 1.0 + SUM_TOLERANCE:
        root.faults.add(key, "fractions add up to more than 1", expected="at most 1", found=f"{total:.9g}")
    return fractions


def read_partition_function(root: Table, folder: Path, line_lists: Sequence[LineListSource]) -> PartitionFunctionChoice:
    """The section [partition_function]; a file is looked for in the recipe's folder, or among those of a list."""
    values = root.table("partition_function", "a section [partition_function] with source")
    if values is None:
        return PartitionFunctionChoice("")
    table = Table(root.faults, root.path("partition_function"), values, ("source", "file"))
    source = table.choice("source", PARTITION_FUNCTIONS)
    if source == "file":
        return _partition_file(table, folder) if "file" in table else _partition_beside(table, line_lists)
    if "file" in table and source:
        table.faults.add(
            table.path("file"), "not read with this source", expected='source = "file"', found=shown(source)
        )
    # A list whose format is not understood may have been meant to hold states.
    if source == "states" and line_lists and all(one.format not in ("exomol", "") for one in line_lists):
        expected = f'a line list of format "exomol", or {listed(PARTITION_FUNCTIONS[:-1], quoted=True)}'
        table.faults.add(table.path("source"), "no line list has states", expected=expected, found=shown(source))
    return PartitionFunctionChoice(source)


def _partition_file(table: Table, folder: Path) -> PartitionFunctionChoice:
    file = table.required_text("file", _PARTITION_FILE)
    path = folder / file
    if file and not os.path.isfile(path):
        table.faults.add(
            table.path("file"), "no such file", expected=f"a file in {full_name(folder)}", found=shown(file)
        )
    return PartitionFunctionChoice("file", file, path)


def _partition_beside(table: Table, line_lists: Sequence[LineListSource]) -> PartitionFunctionChoice:
    """The .pf among the files of the one list in ExoMol format."""
    exomol = [one for one in line_lists if one.format == "exomol"]
    if len(exomol) == 1:
        for path in exomol[0].paths:
            if exomol_kind(path.name) == "pf":
                return PartitionFunctionChoice("file", None, path)
        # Where the files themselves are at fault, or the .pf among them, that has been said.
        if not exomol[0].paths or any(exomol_kind(name) == "pf" for name in exomol[0].files):
            return PartitionFunctionChoice("file")
    if line_lists and all(one.format for one in line_lists):
        remedy = 'a .pf among the files of the one list of format "exomol" would serve' if exomol else None
        table.missing("file", _PARTITION_FILE, remedy)
    return PartitionFunctionChoice("file")


def read_broadening(root: Table, folder: Path) -> Broadening:
    """The section [broadening]: the gas that broadens, files of widths, and widths for lines that have none."""
    values = root.table("broadening", "a section [broadening] with mixture")
    if values is None:
        return Broadening({})
    table = Table(root.faults, root.path("broadening"), values, ("mixture", "files", "default"))
    mixture = _mixture(table)
    given = table.table("default", "tables [broadening.default.NAME]", required=False) or {}
    default = {}
    for name, entry in given.items():
        read = _broadening_default(table, name, entry, tuple(mixture))
        if read is not None:
            default[name] = read
    return Broadening(mixture, default, _broadening_files(table, tuple(mixture), folder))


def _broadening_files(table: Table, mixture: tuple[str, ...], folder: Path) -> dict[str, Path]:
    """Files of widths by broadener, looked for in the recipe's folder."""
    expected = "a file that ends in .broad or .broad.bz2"
    given = table.table("files", 'files by broadener, such as { H2 = "CO__H2.broad" }', required=False) or {}
    files = {}
    for name, value in given.items():
        key = table.path("files", name)
        _check_in_mixture(table, key, name, mixture)
        file = checked_text(table.faults, key, value, expected)
        if file and exomol_kind(file) != "broad":
            table.faults.add(key, "not a broadening file", expected=expected, found=shown(file))
        elif file and not os.path.isfile(folder / file):
            table.faults.add(key, "no such file", expected=f"a file in {full_name(folder)}", found=shown(file))
        elif file:
            files[name] = folder / file
    return files


def _check_in_mixture(table: Table, key: KeyPath, name: str, mixture: tuple[str, ...]) -> None:
    if mixture and name not in mixture:
        meant = nearest(name, mixture)
        remedy = f"did you mean {meant}?" if meant else None
        table.faults.add(key, "not in broadening.mixture", expected=listed(mixture), remedy=remedy)


def _mixture(table: Table) -> dict[str, float]:
    expected = "mole fractions by broadener, such as { H2 = 0.85, He = 0.15 }"
    values = table.table("mixture", expected)
    if values is None:
        return {}
    key = table.path("mixture")
    if not values:
        table.faults.add(key, "no broadener", expected=expected, found=shown(values))
        return {}
    mixture = _fractions(table.faults, key, values, "broadener", _BROADENER)
    total = sum(mixture.values())
    if abs(total - 1.0) > SUM_TOLERANCE:
        table.faults.add(key, "mole fractions do not add up to 1", expected=1, found=f"{total:.9g}")
    return mixture


def _fractions(
    faults: Faults, key: tuple[str | int, ...], values: dict[str, Any], kind: str, pattern: re.Pattern[str]
) -> dict[str, float]:
    if not values:
        faults.add(key, f"no {kind}", expected=f"a fraction for each {kind}", found="an empty table")
    fractions = {}
    for name, value in values.items():
        if not pattern.fullmatch(name):
            faults.add((*key, name), "impossible name", expected=f"{kind} in letters and digits", found=shown(name))
        if value == 0.0 and not isinstance(value, bool):
            faults.add((*key, name), "a fraction of 0", expected=_FRACTION, remedy="leave it out")
            continue
        fractions[name] = checked_number(faults, (*key, name), value, _FRACTION)
    return fractions


def _broadening_default(table: Table, name: str, entry: object, mixture: tuple[str, ...]) -> DefaultWidth | None:
    key = table.path("default", name)
    if not isinstance(entry, dict):
        expected = "a table with gamma, exponent and source"
        table.faults.add(key, "not a table", expected=expected, found=shown(entry))
        return None
    _check_in_mixture(table, key, name, mixture)
    section = Table(table.faults, key, entry, ("gamma", "exponent", "source"))
    return DefaultWidth(
        gamma=section.number("gamma", _GAMMA),
        exponent=section.number("exponent", _EXPONENT),
        source=section.required_text("source", 'where the values come from, if need be "from memory"'),
    )


def read_profile(root: Table) -> Profile:
    """The section [profile]."""
    values = root.table("profile", "a section [profile] with cutoff")
    if values is None:
        return Profile(Cutoff(()))
    table = Table(root.faults, root.path("profile"), values, ("cutoff", "tolerance", "plinth", "chi"))
    plinth = table.flag("plinth", default=False)
    return Profile(
        cutoff=_cutoff(table),
        tolerance=table.number("tolerance", _TOLERANCE_WITH_PLINTH if plinth else _TOLERANCE, default=1e-3),
        plinth=plinth,
        chi=_chi(table),
    )


def _chi(table: Table) -> str | None:
    expected = " or ".join(f'"{one}"' for one in CHI_FACTORS)
    name = table.text("chi", expected, required=False)
    if name and name not in CHI_FACTORS:
        table.faults.add(table.path("chi"), "no such set of chi factors", expected=expected, found=f'"{name}"')
        return None
    return name or None


def _cutoff(table: Table) -> Cutoff:
    if not isinstance(table.values.get("cutoff"), list):
        return Cutoff((CutoffStep(table.number("cutoff", _CUTOFF)),))
    key = table.path("cutoff")
    entries = table.values["cutoff"]
    expected = "steps such as [{ to_pressure = 200.0, cutoff = 25.0 }, { cutoff = 100.0 }]"
    if not entries or not all(isinstance(entry, dict) for entry in entries):
        table.faults.add(key, "not a list of steps", expected=expected, found=shown(entries))
        return Cutoff(())
    last = len(entries) - 1
    steps = tuple(_cutoff_step(table.faults, (*key, i), entry, i == last) for i, entry in enumerate(entries))
    limits = [step.to_pressure for step in steps if step.to_pressure is not None]
    for index, (lower, upper) in enumerate(pairwise(limits), start=1):
        if upper <= lower:
            table.faults.add(
                (*key, index, "to_pressure"), "not in rising order", expected=f"above {lower:g} bar", found=f"{upper:g}"
            )
    return Cutoff(steps)


def _cutoff_step(faults: Faults, key: tuple[str | int, ...], entry: dict[str, Any], is_last: bool) -> CutoffStep:
    step = Table(faults, key, entry, ("to_pressure", "cutoff"))
    limit = step.number("to_pressure", PRESSURE) if "to_pressure" in step or not is_last else None
    if is_last and limit is not None:
        faults.add(
            step.path("to_pressure"),
            "the last step has an upper pressure",
            expected="a last step without to_pressure, for all higher pressures",
            found=shown(step.values["to_pressure"]),
        )
    return CutoffStep(step.number("cutoff", _CUTOFF), limit)


def read_band_strengths(root: Table) -> tuple[BandStrength, ...]:
    """All `[[band_strength]]` of a recipe."""
    values = root.values.get("band_strength", [])
    key = root.path("band_strength")
    if not isinstance(values, list) or not all(isinstance(value, dict) for value in values):
        remedy = "write [[band_strength]]" if isinstance(values, dict) else None
        root.faults.add(key, "not an array of tables", expected="[[band_strength]]", found=shown(values), remedy=remedy)
        return ()
    return tuple(_band_strength(Table(root.faults, (*key, i), v, BAND_STRENGTH_KEYS)) for i, v in enumerate(values))


def _band_strength(table: Table) -> BandStrength:
    return BandStrength(
        name=table.required_text("name", "the band's name, such as 1-0"),
        range=table.interval("range", WAVENUMBER, required=True) or (0.0, 0.0),
        strength=table.number("strength", _STRENGTH),
        unit=table.choice("unit", tuple(BAND_STRENGTH_UNITS), remedies=dict.fromkeys(_BARE_ATMOSPHERE, _WHICH_ATM)),
        temperature=table.number("temperature", TEMPERATURE),
        # Not left out, so that it is not forgotten.
        uncertainty=None if table.values.get("uncertainty") == "unknown" else table.number("uncertainty", _FRACTION),
        source=table.required_text("source", "the publication of the strength"),
        isotopologue=table.text("isotopologue", _BAND_OF, pattern=ISOTOPOLOGUE, required=False),
    )
