"""Lines that a list holds twice, record by record: in two files of one list they would count twice unseen."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import LineListError, problem
from opacity.line_list.model import LineList

IN_ONE_FILE = "identical to another record of its file: both count, as the list says"
IN_ONE_LIST = "identical to another record: both count"
"""The notes of a ledger, of a list in memory and of a line store."""


def identical_pairs(lines: LineList) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Indices of lines, and of the line before each that agrees in wavenumber, isotopologue, strength, energy and A."""
    return _pairs(_columns(lines, lines.isotopologue))


def _columns(lines: LineList, isotopologue: NDArray[np.int16]) -> tuple[NDArray[Any], ...]:
    """What two identical records agree in; wavenumbers last."""
    a = np.nan_to_num(lines.einstein_a, nan=-1.0)
    return a, lines.lower_energy, lines.strength, isotopologue, lines.wavenumber


def _pairs(columns: tuple[NDArray[Any], ...]) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    order = np.lexsort(columns)
    same = np.ones(max(order.size - 1, 0), dtype=bool)
    for column in columns:
        same &= np.diff(column[order]) == 0.0
    place = np.flatnonzero(same)
    return order[place + 1], order[place]


class Repeats:
    """The repeated records of a list that is read part by part, of which two parts are held.

    `complete` says whether all were found: so it is where no part reaches back beyond the one before it, as in a list
    in order of wavenumber.
    """

    def __init__(self) -> None:
        self.complete = True
        self._before: tuple[NDArray[Any], ...] | None = None
        self._passed = -np.inf

    def add(self, lines: LineList, isotopologue: NDArray[np.int16]) -> NDArray[np.bool_]:
        """Which lines of the next part repeat an earlier one of it or of the part before, (n_lines,).

        `isotopologue` (n_lines,) is numbered alike for all parts.
        """
        repeated = np.zeros(len(lines), dtype=bool)
        if not len(lines):
            return repeated
        part = _columns(lines, isotopologue)
        before = self._before
        if before is None:
            later, _ = _pairs(part)
            repeated[later] = True
        else:
            self.complete &= bool(lines.wavenumber.min() > self._passed)
            # Equal records keep their order, so that the later one of a pair is the newer one.
            both = tuple(np.concatenate(pair) for pair in zip(before, part, strict=True))
            later, _ = _pairs(both)
            held = before[-1].size
            repeated[later[later >= held] - held] = True
            self._passed = max(self._passed, float(before[-1].max()))
        self._before = part
        return repeated


def refuse_repeated_files(lines: LineList) -> LineList:
    """Raise LineListError where a record stands in two files; note in the ledger those that one file repeats."""
    later, earlier = identical_pairs(lines)
    across = np.flatnonzero(lines.file[later] != lines.file[earlier])
    if across.size:
        first, second = int(earlier[across[0]]), int(later[across[0]])
        one, other = lines.files[lines.file[first]], lines.files[lines.file[second]]
        raise LineListError(
            problem(
                f"{other}:{lines.record[second]}",
                f"the same record stands in {one}:{lines.record[first]} too, and would count twice",
                found=f"{across.size} such records",
                remedy="name each file once, and no file that holds another's lines",
            )
        )
    if later.size:
        lines.ledger.notes[IN_ONE_FILE] += int(later.size)
    return lines
