"""Lines that a list holds twice, record by record: in two files of one list they would count twice unseen."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.errors import LineListError, problem
from opacity.line_list.model import LineList

IN_ONE_FILE = "identical to another record of its file: both count, as the list says"


def identical_pairs(lines: LineList) -> tuple[NDArray[np.intp], NDArray[np.intp]]:
    """Indices of lines, and of the line before each that agrees in wavenumber, isotopologue, strength, energy and A."""
    a = np.nan_to_num(lines.einstein_a, nan=-1.0)
    columns = (a, lines.lower_energy, lines.strength, lines.isotopologue, lines.wavenumber)
    order = np.lexsort(columns)
    same = np.ones(max(order.size - 1, 0), dtype=bool)
    for column in columns:
        same &= np.diff(column[order]) == 0.0
    place = np.flatnonzero(same)
    return order[place + 1], order[place]


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
