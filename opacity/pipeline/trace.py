"""Where lines stand in their files, and where their widths come from.

Lines carry the number of their record.  That record is read again by the reader of its format and held against the
line, so that what is said of it is said of the very text that it came from.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np

from opacity.arguments import DefaultWidth
from opacity.check.explain import LinePart, Width
from opacity.grids import FloatArray
from opacity.kernels.transitions import BRANCHES
from opacity.line_list.catalogue import catalogue_part
from opacity.line_list.exomol.broadening import (
    BEYOND,
    EXACT,
    NEIGHBOUR,
    BroadeningTable,
    match_rows,
    read_broadening,
)
from opacity.line_list.exomol.dataset import OpenDataSet, sort_files
from opacity.line_list.locate import find_records
from opacity.line_list.lower_j import read_j
from opacity.line_list.model import LineList
from opacity.line_list.packed import ENERGY_STEP
from opacity.line_list.read import parser_of
from opacity.line_list.text import TextChunk
from opacity.molecule.broadening import resolve_broadening
from opacity.pipeline.sources import read_options
from opacity.recipe.model import LineListSource, Recipe

Chosen = tuple[LinePart, LineList]
"""A part, and its line as a list of one."""

_MATCH = {
    EXACT: "row of its own quantum numbers",
    NEIGHBOUR: "no row of its own: a neighbour's",
    BEYOND: "beyond the last row, which is taken",
}


@dataclass(frozen=True)
class Record:
    """What a line's record tells: ids of its states, and by broadener in lower case which row of which file serves."""

    states: tuple[int, int] | None = None
    rows: Mapping[str, str] = field(default_factory=dict)


Look = Callable[[LineList, TextChunk], Record | None]


def trace(
    recipe: Recipe,
    chosen: Sequence[Chosen],
    places: Mapping[str, tuple[int, Path]],
    defaults: Mapping[str, DefaultWidth],
) -> tuple[LinePart, ...]:
    """The parts with file, record, states and widths added.

    `places` gives the number of the line list and the path for each name in the lines' `files`; `defaults` are those
    that served the lines.  Raises LineListError where a record is not found again, or a file cannot be read.
    """
    by_file: dict[str, list[int]] = {}
    for number, (_, line) in enumerate(chosen):
        by_file.setdefault(line.files[int(line.file[0])], []).append(number)
    traced: dict[int, LinePart] = {}
    data_sets: dict[int, Look] = {}
    for name, members in by_file.items():
        number, path = places[name]
        source = recipe.line_lists[number]
        if source.format == "exomol":
            # Its states are read once for all its files.
            look = data_sets[number] = data_sets.get(number) or _transition_reader(recipe, source)
        else:
            look = _catalogue_reader if source.format == "catalogue" else _record_reader(recipe, source, path)
        lines = [chosen[member][1] for member in members]
        for member, (line_number, record) in zip(members, _found(path, lines, look), strict=True):
            traced[member] = _with_record(chosen[member], recipe, defaults, path, line_number, record)
    return tuple(traced[number] for number in range(len(chosen)))


def _found(path: Path, lines: Sequence[LineList], look: Look) -> list[tuple[int, Record]]:
    return find_records(path, [int(one.record[0]) for one in lines], lambda k, record: look(lines[k], record))


def _with_record(
    chosen: Chosen, recipe: Recipe, defaults: Mapping[str, DefaultWidth], path: Path, line: int, record: Record
) -> LinePart:
    part, listed = chosen
    upper, lower = record.states or (None, None)
    widths = tuple(
        _width(listed, name, fraction, defaults, record.rows.get(name.lower(), f"{path}:{line}"))
        for name, fraction in recipe.broadening.mixture.items()
    )
    return replace(part, file=str(path), record=line, upper_state=upper, lower_state=lower, widths=widths)


def _width(line: LineList, name: str, fraction: float, defaults: Mapping[str, DefaultWidth], source: str) -> Width:
    """What one gas does to a line, decided by the very rules that the table was made by."""
    found = resolve_broadening(line.broadeners, {name: 1.0}, defaults, 1)
    given = line.broadeners.get(name.lower())
    if given is None or bool(np.isnan(given.gamma[0])):
        source = f"default ({defaults[name].source})"
    notes = tuple(one.what for one in found.assumptions)
    return Width(
        name, fraction, float(found.gamma[0, 0]), float(found.exponent[0, 0]), float(found.shift[0]), source, notes
    )


def _record_reader(recipe: Recipe, source: LineListSource, path: Path) -> Look:
    tables = read_options(recipe, source).widths
    parser = parser_of(path, source.format)

    def look(line: LineList, record: TextChunk) -> Record | None:
        columns = parser(record)
        numbers = columns.numbers
        if not _same(line, numbers["wavenumber"], numbers["strength"], numbers["lower_energy"]):
            return None
        rows = {}
        needed = {name: one for name, one in tables.items() if not _gives(numbers.get(f"gamma_{name.lower()}"))}
        if needed:
            lower, upper = read_j(path, record, columns.whole, int(numbers["molecule"][0]))
            rows = _rows(needed, float(lower[0]), float(upper[0]))
        return Record(None, rows)

    return look


def _gives(gamma: FloatArray | None) -> bool:
    return gamma is not None and bool(gamma[0] > 0.0)


def _catalogue_reader(line: LineList, record: TextChunk) -> Record | None:
    found = catalogue_part(Path("record"), record, True)
    if not len(found) or not _same(line, found.wavenumber, found.strength, found.lower_energy):
        return None
    return Record()


def _transition_reader(recipe: Recipe, source: LineListSource) -> Look:
    files = sort_files(
        source.paths,
        str(recipe.path),
        recipe.molecule.formula,
        source.isotopologue or "",
        recipe.broadening.files,
    )
    states = OpenDataSet(files, recipe.molecule.mass).states
    tables = {name: read_broadening(path) for name, path in files.broad.items()}

    def look(line: LineList, record: TextChunk) -> Record | None:
        try:
            upper, lower = (int(word) for word in record.record(0).split()[:2])
        except ValueError:
            return None
        row = states.rows_of(np.array([upper, lower]))
        if row.min() < 0:
            return None
        energy = states.energy[row]
        # Strengths are not given, but a transition is known by its two states.
        if energy[0] - energy[1] != line.wavenumber[0] or abs(energy[1] - line.lower_energy[0]) > ENERGY_STEP:
            return None
        twice = np.rint(2.0 * states.j[row])
        # As the join has it, which tells no more than so many branches apart.
        step = min(max(twice[0] - twice[1] + 4, 0), BRANCHES - 1) - 4
        return Record((upper, lower), _rows(tables, 0.5 * twice[1], 0.5 * max(twice[1] + step, 0)))

    return look


def _same(line: LineList, wavenumber: FloatArray, strength: FloatArray, energy: FloatArray) -> bool:
    """Whether a record is the one that a line came from: a store keeps strength and energy rounded."""
    return bool(
        wavenumber[0] == line.wavenumber[0]
        and abs(energy[0] - line.lower_energy[0]) <= ENERGY_STEP
        and abs(strength[0] - line.strength[0]) <= 1e-6 * line.strength[0]
    )


def _rows(tables: Mapping[str, BroadeningTable], lower: float, upper: float) -> dict[str, str]:
    """`file:line` of the row that serves J'' and J' by broadener in lower case, where there is one."""
    found = {}
    for name, table in tables.items():
        match = match_rows(table, lower, upper)
        row, kind = int(match.row[0]), int(match.kind[0])
        if row >= 0:
            found[name.lower()] = f"{table.path}:{table.line[row]} ({_MATCH[kind]})"
    return found
