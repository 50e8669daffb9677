"""A recipe to fill in for a molecule, from hapi's tables, published bands, and the files of a data set."""

from __future__ import annotations

import os
from pathlib import Path

from opacity.errors import InputError, LineListError, problem
from opacity.line_list.exomol.beside import FilesBeside, files_beside, stem_of
from opacity.line_list.exomol.definition import Definition
from opacity.molecule.isotopologue import Isotopologue, isotopologue_of_name, isotopologues_of
from opacity.molecule.published_bands import FROM_MEMORY, published_bands
from opacity.recipe.formats import COMPRESSIONS, exomol_kind, plain_name
from opacity.recipe.model import BandStrength
from opacity.recipe.template import DataSetFacts, MoleculeFacts, recipe_template

_MOST_NAMED = 4
"""So many .trans files are named one by one, more by a pattern."""
_NARROWEST = 1.0
"""Bands of a single line (cm-1) are for lists: the wings of a table's spectrum leave them."""
_NO_MASS = 1.0
"""Stands for a mass that no file gives, where only the name of an isotopologue is asked for."""


def new_recipe(formula: str, folder: Path, source: Path | None = None) -> str:
    """The text of a commented recipe, to be written into a folder, for a molecule or for a data set in ExoMol format.

    `source` is a .def, .states or .trans file, or a folder that holds one data set.  Raises InputError for a formula
    that is none or not that of the data set, LineListError where the files make no data set.
    """
    known = isotopologues_of(formula)
    named = tuple((one.formula, one.abundance) for one in known)
    facts = MoleculeFacts(None, named, known[0].molecule) if known else None
    data_set = None if source is None else _data_set(formula, folder, source)
    return recipe_template(formula, facts, _bands(formula), data_set)


def _bands(formula: str) -> tuple[BandStrength, ...]:
    """Published bands that a table can be held against; values from memory are left to `opacity check LIST`."""
    return tuple(
        BandStrength(
            one.name, one.range, one.strength, one.unit, one.temperature, one.uncertainty, one.source,
            one.isotopologue or "natural",
        )
        for one in published_bands(formula)
        if one.range is not None and one.range[1] - one.range[0] > _NARROWEST and one.status != FROM_MEMORY
    )  # fmt: skip


def _data_set(formula: str, folder: Path, source: Path) -> DataSetFacts:
    files, definition = files_beside(_leading_file(source))
    one = _isotopologue(files, definition)
    if one.molecule_formula != formula:
        found = f"{one.formula} in {files.name}"
        raise InputError(problem("FORMULA", "the data set is of another molecule", expected=formula, found=found))
    paths = [files.definition, files.states, *files.transitions, files.partition, *files.broad.values()]
    return DataSetFacts(
        name=files.name,
        isotopologue=one.formula,
        files=_names([path for path in paths if path is not None], folder),
        has_partition=files.partition is not None,
        broadeners=tuple(files.broad),
        mass=None if one.known or definition is None else definition.mass,
        gamma=definition.gamma if definition is not None else None,
        exponent=definition.exponent if definition is not None else None,
        max_temperature=definition.max_temperature if definition is not None else None,
        max_wavenumber=definition.max_wavenumber if definition is not None else None,
        notes=tuple(f"{name} is in the definition, and was not found." for name in files.absent),
    )


def _isotopologue(files: FilesBeside, definition: Definition | None) -> Isotopologue:
    if definition is not None:
        return isotopologue_of_name(definition.formula, definition.mass)
    return isotopologue_of_name(files.name.split("__")[0], _NO_MASS)


def _leading_file(source: Path) -> Path:
    """The file that leads to a data set: the one given, or the one of a folder."""
    if not source.is_dir():
        if exomol_kind(source.name) not in ("def", "states", "trans"):
            expected = "a folder, or a .def, .states or .trans file"
            raise InputError(problem("--from", "leads to no data set", expected=expected, found=source))
        return source
    for kind in ("def", "states"):
        found = {plain_name(path.name): path for path in sorted(source.iterdir()) if exomol_kind(path.name) == kind}
        if len(found) > 1:
            names = ", ".join(path.name for path in found.values())
            raise InputError(
                problem("--from", "several data sets", expected="one", found=names, remedy="name its file")
            )
        if found:
            return next(iter(found.values()))
    raise LineListError(problem(source, "no data set here", expected="a .def or .states file, plain or compressed"))


def _names(paths: list[Path], folder: Path) -> tuple[str, ...]:
    """File names as seen from the recipe's folder; many .trans files of one data set as a pattern."""
    transitions = [path for path in paths if exomol_kind(path.name) == "trans"]
    names = [os.path.relpath(path, folder) for path in paths]
    if len(transitions) <= _MOST_NAMED:
        return tuple(names)
    starts = {(stem_of(path.name).rpartition("__")[0], _ending(path.name)) for path in transitions}
    first = paths.index(transitions[0])
    where = os.path.relpath(transitions[0].parent, folder)
    patterns = [os.path.normpath(os.path.join(where, f"{start}__*{ending}")) for start, ending in sorted(starts)]
    return (*names[:first], *patterns, *names[first + len(transitions) :])


def _ending(name: str) -> str:
    return ".trans" + next((one for one in COMPRESSIONS if name.lower().endswith(one)), "")
