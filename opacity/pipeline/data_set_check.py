"""A look at a data set in ExoMol format, from one of its files: the others are found beside it."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import Executor, ThreadPoolExecutor
from pathlib import Path

import numpy as np

from opacity.check.list_bands import BandSums, bands_of
from opacity.errors import LineListError
from opacity.line_list.batches import Batch
from opacity.line_list.exomol.beside import FilesBeside, files_beside
from opacity.line_list.exomol.broadening import BroadeningTable, read_broadening
from opacity.line_list.exomol.definition import Definition, mass_difference
from opacity.line_list.exomol.examine import Said, examine_broadening, examine_states, summed
from opacity.line_list.exomol.states import States, read_states
from opacity.line_list.exomol.transitions import state_join, transition_batches
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList
from opacity.line_list.packed import join, unpack
from opacity.molecule.hapi_tables import hapi
from opacity.molecule.isotopologue import Isotopologue, isotopologue_of_name, named_isotopologue
from opacity.molecule.names import same_isotopologue
from opacity.pipeline.list_check import ListReport, same_file
from opacity.pipeline.resources import allowed_cpus
from opacity.recipe.formats import exomol_kind
from opacity.recipe.model import Recipe

_REPEATS = (
    "transitions given twice are not looked for here: `opacity ingest RECIPE`, which sorts the lines, counts them"
)
_NO_MASS = 1.0
"""Stands for a mass that nobody gives: nothing here depends on it."""


def check_data_set(target: Path, recipe: Recipe | None = None) -> ListReport:
    """Look at a .states file, at a .trans file with its states, or by its .def at all files of a data set.

    Rows that can't be right are left out and counted.  Raises LineListError for a file that is needed and missing, or
    that cannot be read at all.
    """
    hapi()  # before any thread asks for it
    files, definition = files_beside(target)
    isotopologue = _isotopologue(files, definition, recipe)
    states = read_states(files.states, definition)
    of_states = examine_states(states, files.partition, isotopologue)
    of_widths = examine_broadening(files.broad)
    kind = exomol_kind(target.name)
    chosen = {"def": files.transitions, "trans": (target,)}.get(kind or "", ())
    with ThreadPoolExecutor(allowed_cpus()) as executor:
        ledger, reach, sums = _read(chosen, files, states, isotopologue, executor, recipe)
    problems, remarks = [*of_states.problems, *of_widths.problems], []
    if definition is None:
        remarks.append("no definition (.def) beside it: nothing is held against one")
    else:
        problems += _about_definition(definition, files, isotopologue)
    if kind == "def" and definition is not None:
        problems += _against_definition(definition, files, ledger, reach)
    elif kind == "trans" and len(files.transitions) > 1:
        remarks.append(f"one of {len(files.transitions)} .trans files of {files.name} that are here")
    if chosen:
        remarks.append(_REPEATS)
    rows = [("states", one) for one in of_states.sentences] + [("widths", one) for one in of_widths.sentences]
    return ListReport(
        target=target,
        lines=ledger.kept,
        molecule=isotopologue.molecule_formula,
        isotopologues=(isotopologue.formula,),
        reach=reach,
        ledger=ledger,
        findings=(),
        problems=tuple(problems),
        remarks=tuple(remarks),
        bands=tuple(sums.results()) if ledger.kept else (),
        rows=tuple(rows),
        facts=_facts(files, of_states, of_widths),
    )


def _isotopologue(files: FilesBeside, definition: Definition | None, recipe: Recipe | None) -> Isotopologue:
    """By the recipe if it has the list, by the definition, or by the name of the files."""
    for source in recipe.line_lists if recipe is not None else ():
        if recipe is not None and source.isotopologue and any(same_file(path, files.states) for path in source.paths):
            mass = recipe.molecule.mass or _NO_MASS
            named = named_isotopologue(recipe.molecule.formula, source.isotopologue, mass)
            assert named is not None
            return named
    if definition is not None:
        return isotopologue_of_name(definition.formula, definition.mass)
    return isotopologue_of_name(files.name.split("__")[0], _NO_MASS)


def _read(
    chosen: tuple[Path, ...],
    files: FilesBeside,
    states: States,
    isotopologue: Isotopologue,
    executor: Executor,
    recipe: Recipe | None,
) -> tuple[Ledger, tuple[float, float] | None, BandSums]:
    """The account of all transitions, their first and last wavenumber, and their strengths in bands."""
    wanted = bands_of(isotopologue.molecule_formula, recipe)
    own = summed(states)
    partition = {isotopologue.formula: own} if own is not None else {}
    ledger, low, high, sums = Ledger(), np.inf, -np.inf, BandSums(wanted, partition)
    shared = state_join(states, dict(_usable(files.broad)), isotopologue)
    for path in chosen:
        for batch in transition_batches(path, shared, True, None, executor):
            ledger.add(batch.ledger)
            nu = batch.packed.wavenumber
            if nu.size:
                low, high = min(low, float(nu.min())), max(high, float(nu.max()))
                if wanted:
                    sums.add(_lines(batch, path))
    return ledger, (low, high) if low <= high else None, sums


def _usable(broad: dict[str, Path]) -> Iterator[tuple[str, BroadeningTable]]:
    """Broadening files that can be read; what is wrong with the others is said where they are examined."""
    for name, path in broad.items():
        try:
            yield name, read_broadening(path)
        except LineListError:
            continue


def _lines(batch: Batch, path: Path) -> LineList:
    """The lines of a batch, sorted, without widths."""
    nothing = np.empty(0)
    template = LineList(
        nothing, nothing, nothing, nothing, nothing, nothing, np.empty(0, dtype=np.int16), batch.isotopologues,
        batch.basis, {}, np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int16), (str(path),),
    )  # fmt: skip
    return unpack(join([batch.packed]), template, batch.basis, ())


def _about_definition(definition: Definition, files: FilesBeside, isotopologue: Isotopologue) -> list[str]:
    """What the definition says that does not fit, whatever was read."""
    found = [f"{definition.dataset}: {note}" for note in definition.notes]
    if not same_isotopologue(definition.formula, definition.slug):
        found.append(f"the definition is of {definition.formula} by its formula, of {definition.slug} by its slug")
    if not any(same_isotopologue(name, isotopologue.formula) for name in (definition.formula, definition.slug)):
        found.append(f"the definition is of {definition.formula}, and the recipe takes it for {isotopologue.formula}")
    if isotopologue.known:
        found += [words for words in [mass_difference(definition.mass, isotopologue.mass, "hapi's tables")] if words]
    found += [f"{name} is in the definition, and not beside it" for name in files.absent]
    return found


def _against_definition(
    definition: Definition, files: FilesBeside, ledger: Ledger, reach: tuple[float, float] | None
) -> list[str]:
    """What the definition counts, against all that was read."""
    found = []
    for what, stated, read in (
        (".trans files", definition.transition_files, len(files.transitions)),
        ("transitions", definition.transitions, ledger.read),
    ):
        if stated is not None and stated != read:
            found.append(f"{stated} {what} by the definition, {read} found")
    most = definition.max_wavenumber
    if most is not None and reach is not None and reach[1] > most * (1.0 + 1e-6):
        found.append(f"lines up to {reach[1]:.6f} cm-1, and only to {most:g} by the definition")
    return found


def _facts(files: FilesBeside, states: Said, widths: Said) -> dict[str, object]:
    definition = files.definition
    return {
        "data_set": {
            "name": files.name,
            "definition": str(definition) if definition is not None else None,
            "states": str(files.states),
            "transitions": [str(path) for path in files.transitions],
            "partition_function": str(files.partition) if files.partition is not None else None,
        },
        "states": states.values,
        "broadening": widths.values,
    }
