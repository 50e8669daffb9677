"""The states of a line list in ExoMol format: id, energy, total weight, J, then columns that are not needed here.

The first columns are those of Tennyson et al. 2016, J. Mol. Spectrosc. 327, 73, table 11; the fifth one is the
uncertainty of the energy where the definition says so.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from opacity.constants import SECOND_RADIATION
from opacity.errors import InputError, LineListError, excerpt, problem
from opacity.grids import FloatArray
from opacity.kernels.state_rows import BAD_COLUMN, GOOD, SHORT_ROW, read_state_rows
from opacity.kernels.transitions import find_rows
from opacity.line_list.exomol.definition import Definition
from opacity.line_list.text import CHUNK, TextChunk, read_chunks

Index = NDArray[np.int64]

LOWEST_ENERGY, HIGHEST_ENERGY = -1.0, 1e6
"""Energies beyond these (cm-1) are refused; between the lower one and 0 they are counted and used as they stand."""

HIGHEST_J = 10_000.0
_ROUNDING = -1e-6
_HIGHEST_WEIGHT = 1e9
_COLUMNS = ("id", "energy", "total weight", "J", "uncertainty")
_NEGATIVE = "energy below 0: used as it stands"
_AT_A_TIME = 1 << 18
_COLDEST = 1.0
_NO_TABLE = np.empty(0, dtype=np.int32)


@dataclass(frozen=True)
class IdIndex:
    """Where the state of each id stands.  Ids that follow each other need no table; few gaps, a dense one."""

    first: int
    count: int
    table: NDArray[np.int32] | None = None
    sorted_ids: Index | None = None
    order: Index | None = None

    def rows_of(self, ids: Index) -> Index:
        """Row of each id (k,); -1 for an id that no state has."""
        if self.sorted_ids is not None and self.order is not None:
            place = np.minimum(np.searchsorted(self.sorted_ids, ids), self.sorted_ids.size - 1)
            return np.where(self.sorted_ids[place] == ids, self.order[place], -1)
        rows = np.empty(ids.size, dtype=np.int64)
        find_rows(ids, self.first, self.count, _NO_TABLE if self.table is None else self.table, rows)
        return rows


@dataclass(frozen=True)
class States:
    """States in the order of the file; every array is (n,).

    `energy` cm-1; `total_weight` with the nuclear-spin weights in HITRAN's convention; `j` total angular momentum,
    whole or half; `uncertainty` of the energy, cm-1, None where the list has none; `notes` counts what was assumed.
    """

    path: str
    energy: FloatArray
    total_weight: FloatArray
    j: NDArray[np.float32]
    uncertainty: NDArray[np.float32] | None
    index: IdIndex
    notes: Counter[str] = field(default_factory=Counter)

    def __len__(self) -> int:
        return int(self.energy.size)

    def rows_of(self, ids: ArrayLike) -> Index:
        """Row of the state of each id (k,), whole numbers; -1 for an id that no state has."""
        return self.index.rows_of(np.asarray(ids, dtype=np.int64))


def partition_sum(states: States, temperatures: ArrayLike) -> FloatArray:
    """Q = sum of g exp(-c2 E / T) at each temperature (n_T,), K; (n_T,).  Raises InputError below 1 K."""
    wanted = np.atleast_1d(np.asarray(temperatures, dtype=np.float64))
    if not np.all((wanted >= _COLDEST) & np.isfinite(wanted)):
        raise InputError(
            problem("temperature", "impossible for a sum over states", expected="1 K or more", found=temperatures)
        )
    total = np.zeros(wanted.size)
    for start in range(0, len(states), _AT_A_TIME):
        energy = states.energy[start : start + _AT_A_TIME]
        weight = states.total_weight[start : start + _AT_A_TIME]
        for i, temperature in enumerate(wanted):
            # Not by the dot product, whose last bits depend on the threads that BLAS gets.
            total[i] += np.sum(weight * np.exp(-SECOND_RADIATION / temperature * energy))
    return total


@dataclass(frozen=True)
class _Lines:
    """`count` rows of one chunk; `numbers` their line numbers, None where these follow each other from `first`."""

    count: int
    first: int
    numbers: Index | None


class _Rows:
    """Rows read so far, by column and chunk."""

    def __init__(self) -> None:
        self.ids: list[Index] = []
        self.columns: dict[str, list[NDArray[np.floating]]] = {}
        self.lines: list[_Lines] = []

    def add(self, name: str, values: NDArray[np.floating]) -> None:
        self.columns.setdefault(name, []).append(values)

    def joined(self, name: str) -> NDArray[Any]:
        """A column of all chunks; its pieces are let go, so that no two columns stand twice in memory."""
        return np.concatenate(self.columns.pop(name))


def read_states(path: Path, definition: Definition | None = None, *, chunk: int = CHUNK) -> States:
    """The states of a .states file, plain, .gz or .bz2, read in pieces of about `chunk` bytes.

    The fifth column is read as the uncertainty only if `definition` says that there is one.
    Raises LineListError naming file and line of the first row that can't be right.
    """
    rows = _read_rows(path, 5 if definition is not None and definition.has_uncertainty else 4, chunk)
    if not rows.ids:
        raise LineListError(problem(path, "holds no state", expected="rows of id, energy, weight and J"))
    energy, weight, j = (rows.joined(name) for name in ("energy", "weight", "j"))
    notes: Counter[str] = Counter()
    below = int(np.count_nonzero(energy < _ROUNDING))
    if below:
        notes[_NEGATIVE] = below
    if definition is not None and definition.states is not None and definition.states != energy.size:
        what = "missing" if definition.states > energy.size else "too many"
        notes[f"states {what}: the definition counts {definition.states}"] = abs(definition.states - energy.size)
    uncertainty = rows.joined("uncertainty") if "uncertainty" in rows.columns else None
    index = _index(path, np.concatenate(rows.ids), rows.lines)
    return States(str(path), energy, weight, j, uncertainty, index, notes)


def _read_rows(path: Path, columns: int, size: int) -> _Rows:
    rows = _Rows()
    for chunk in read_chunks(path, size):
        if len(chunk):
            _add_chunk(path, chunk, columns, rows)
    return rows


def _add_chunk(path: Path, chunk: TextChunk, columns: int, rows: _Rows) -> None:
    count = len(chunk)
    ids, numbers = np.zeros(count, dtype=np.int64), np.zeros((count, columns - 1))
    status = np.zeros(count, dtype=np.uint8)
    read_state_rows(chunk.buffer, chunk.starts, chunk.stops, ids, numbers, status)
    fault = _first_fault(numbers, status, chunk.plain)
    if fault is not None:
        row, reason, expected = fault
        shown = excerpt(chunk.record(row).decode("latin-1"))
        raise LineListError(problem(f"{path}:{chunk.line[row]}", reason, expected=expected, found=f'"{shown}"'))
    first, last = int(chunk.line[0]), int(chunk.line[-1])
    rows.lines.append(_Lines(count, first, None if last - first + 1 == count else chunk.line))
    rows.ids.append(ids)
    rows.add("energy", numbers[:, 0].copy())
    rows.add("weight", numbers[:, 1].copy())
    rows.add("j", numbers[:, 2].astype(np.float32))
    if columns == 5:
        rows.add("uncertainty", numbers[:, 3].astype(np.float32))


def _first_fault(
    numbers: FloatArray, status: NDArray[np.uint8], plain: NDArray[np.bool_]
) -> tuple[int, str, str] | None:
    """Row, reason and what was expected for the first row that can't be right."""
    found = []
    for reason, expected, bad in _faults(numbers, status, plain):
        if bad.any():
            found.append((int(np.argmax(bad)), reason, expected))
    return min(found, key=lambda one: one[0]) if found else None


def _faults(
    numbers: FloatArray, status: NDArray[np.uint8], plain: NDArray[np.bool_]
) -> Iterator[tuple[str, str, NDArray[np.bool_]]]:
    columns = numbers.shape[1] + 1
    yield "row with bytes that are no text", "printable ASCII characters", ~plain
    yield "row with too few columns", f"{columns} or more: {', '.join(_COLUMNS[:columns])}", status == SHORT_ROW
    yield "id is not a whole number", "digits", status == BAD_COLUMN
    for column in range(1, columns):
        yield f"{_COLUMNS[column]} is not a number", "a decimal number", status == BAD_COLUMN + column
    energy, weight, j = numbers[:, 0], numbers[:, 1], numbers[:, 2]
    good = status == GOOD
    limits = f"{LOWEST_ENERGY:g} to {HIGHEST_ENERGY:g} cm-1"
    yield "energy is impossible", limits, good & ~((energy >= LOWEST_ENERGY) & (energy <= HIGHEST_ENERGY))
    limits = f"0 to {_HIGHEST_WEIGHT:g}"
    yield "total weight is impossible", limits, good & ~((weight >= 0.0) & (weight <= _HIGHEST_WEIGHT))
    bounded = np.where((j >= 0.0) & (j <= HIGHEST_J), j, 0.25)
    yield "J is impossible", f"a whole or half number from 0 to {HIGHEST_J:g}", good & (bounded % 0.5 != 0.0)
    if columns == 5:
        limits = f"0 to {HIGHEST_ENERGY:g} cm-1, as the definition says that there is one"
        yield "uncertainty is impossible", limits, good & ~((numbers[:, 3] >= 0.0) & (numbers[:, 3] <= HIGHEST_ENERGY))


def _index(path: Path, ids: Index, lines: list[_Lines]) -> IdIndex:
    """The way from ids to rows.  Raises LineListError naming the line of an id that stands there twice."""
    first, last = int(ids.min()), int(ids.max())
    span = last - first + 1
    if span == ids.size and np.all(ids[1:] - ids[:-1] == 1):
        return IdIndex(first, ids.size)
    if span <= 8 * ids.size + 65536 and ids.size < 2**31:
        table = np.full(span, -1, dtype=np.int32)
        table[ids - first] = np.arange(ids.size, dtype=np.int32)
        if np.count_nonzero(table >= 0) == ids.size:
            return IdIndex(first, span, table=table)
    order = np.argsort(ids, kind="stable")
    ranked = ids[order]
    twice = np.flatnonzero(ranked[1:] == ranked[:-1])
    if twice.size:
        at = twice[np.argmin(order[twice + 1])]
        again, before = int(order[at + 1]), int(order[at])
        raise LineListError(
            problem(
                f"{path}:{_line_of(again, lines)}",
                "id given twice",
                expected="each state once",
                found=f"id {ids[again]} in line {_line_of(before, lines)} too",
            )
        )
    return IdIndex(first, span, sorted_ids=ranked, order=order)


def _line_of(row: int, lines: list[_Lines]) -> int:
    for part in lines:
        if row < part.count:
            return part.first + row if part.numbers is None else int(part.numbers[row])
        row -= part.count
    raise AssertionError("row beyond the last")
