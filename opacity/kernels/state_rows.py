"""Rows of a .states file out of bytes: a whole number, then decimal ones, then columns that are not read."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact
from opacity.kernels.text import READ, Array, Bytes, Index, read_number

GOOD, SHORT_ROW, BAD_COLUMN = 0, 1, 2
"""What a row is; BAD_COLUMN + k where its column k, from 0, is not a number."""

_SPACE, _TAB = 32, 9
_LONGEST_ID = 18


@jit_exact
def read_state_rows(
    text: Bytes, starts: Index, stops: Index, ids: Index, numbers: Array, status: NDArray[np.uint8]
) -> None:
    """The first columns of rows parted by blanks.

    `starts`, `stops` (n_rows,) bound the rows in `text`; filled are `ids` (n_rows,), `numbers` (n_rows, n_columns), the
    columns behind the id, and `status` (n_rows,).
    """
    for row in range(starts.size):
        status[row] = _read_row(text, starts[row], stops[row], ids, numbers, row)


@jit_exact
def _read_row(text: Bytes, i: int, stop: int, ids: Index, numbers: Array, row: int) -> int:
    columns = numbers.shape[1] + 1
    for column in range(columns):
        while i < stop and (text[i] == _SPACE or text[i] == _TAB):
            i += 1
        if i >= stop:
            return SHORT_ROW
        start = i
        while i < stop and text[i] != _SPACE and text[i] != _TAB:
            i += 1
        if column == 0:
            value, good = 0, i - start <= _LONGEST_ID
            for k in range(start, i):
                good = good and 48 <= text[k] <= 57
                value = value * 10 + (int(text[k]) - 48)
            ids[row] = value if good else -1
        else:
            number, what = read_number(text, start, i)
            numbers[row, column - 1] = number
            good = what == READ
        if not good:
            return BAD_COLUMN + column
    return GOOD
