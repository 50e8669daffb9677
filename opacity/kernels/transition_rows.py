"""Rows of transitions out of bytes in one pass: two ids, A, and perhaps a wavenumber, parted by blanks.

Most rows are of plain form (digits, no signs, up to 17 of them, an exponent with its sign); such a row is read while
its end is looked for.  Any other row is left to the general reader, which finds the line's end first.  Both give the
same values to the bit; what is no row of that kind gets a status.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact
from opacity.kernels.text import BLANK, READ, UNREADABLE, Array, Bytes, Index, read_number, scale_by_power

_NEWLINE, _RETURN, _SPACE, _TAB, _POINT = 10, 13, 32, 9, 46
_LONGEST_ID = 18
_MOST_DIGITS = 17
# Positions in plain rows are unsigned: a signed one might count from the end, and every byte would cost a test of that.
_ONE, _NOT_PLAIN = np.uint64(1), np.uint64(0)


@jit_exact
def read_transition_rows(
    text: Bytes,
    first_number: int,
    ids: tuple[Index, Index],
    values: tuple[Array, Array],
    number: NDArray[np.uint32],
    status: NDArray[np.uint8],
) -> int:
    """Ids (upper, lower), values (A, wavenumber or NaN) and line numbers of the lines that are not blank; how many.

    Lines end in LF or CRLF.  `number` counts from `first_number`, modulo 2^32; `status` is READ, or UNREADABLE where
    ids and values mean nothing.  All arrays hold one entry more than the text has LF.
    """
    size = text.size
    # Every line before `ended` has its LF, which stops all loops over its bytes.
    ended = size
    while ended > 0 and text[ended - 1] != _NEWLINE:
        ended -= 1
    start, line, count = 0, first_number, 0
    while start < size:
        after, found = 0, READ
        if start < ended:
            upper, lower, a, given, after = read_plain_row(text, start)
        if after == 0:
            upper, lower, a, given, after, found = read_any_row(text, start)
        if found != BLANK:
            ids[0][count], ids[1][count], values[0][count], values[1][count] = upper, lower, a, given
            number[count], status[count] = line & 0xFFFFFFFF, found
            count += 1
        line += 1
        start = after
    return count


@jit_exact
def read_plain_row(text: Bytes, start: int) -> tuple[int, int, float, float, int]:
    """Ids, A and wavenumber (or NaN) of a row of plain form, and where the next line starts; 0 for any other row.

    There must be an LF at or behind `start`.
    """
    upper, i = _plain_id(text, np.uint64(start))
    if i == _NOT_PLAIN:
        return -1, -1, np.nan, np.nan, 0
    lower, i = _plain_id(text, i)
    if i == _NOT_PLAIN:
        return -1, -1, np.nan, np.nan, 0
    a, i = _plain_number(text, _behind_spaces(text, i))
    if i == _NOT_PLAIN:
        return -1, -1, np.nan, np.nan, 0
    given = np.nan
    if text[i] == _SPACE:
        i = _behind_spaces(text, i)
        if text[i] != _NEWLINE and text[i] != _RETURN:
            given, i = _plain_number(text, i)
            if i == _NOT_PLAIN:
                return -1, -1, np.nan, np.nan, 0
            i = _behind_spaces(text, i)
    if text[i] == _RETURN:
        i += _ONE
    return upper, lower, a, given, (_signed(i + _ONE) if text[i] == _NEWLINE else 0)


@jit_exact
def _signed(position: np.uint64) -> int:
    return int(np.int64(position))


@jit_exact
def _behind_spaces(text: Bytes, i: np.uint64) -> np.uint64:
    while text[i] == _SPACE:
        i += _ONE
    return i


@jit_exact
def _digits(text: Bytes, i: np.uint64, value: int) -> tuple[int, np.uint64]:
    """A whole number with the digits from here on behind it, and where they end."""
    while True:
        digit = int(text[i]) - 48
        if not 0 <= digit <= 9:
            return value, i
        value = value * 10 + digit
        i += _ONE


@jit_exact
def _plain_id(text: Bytes, i: np.uint64) -> tuple[int, np.uint64]:
    """Spaces, then digits, then a space that is still to come: the whole number and where it ends, 0 for others."""
    first = _behind_spaces(text, i)
    value, i = _digits(text, first, 0)
    good = text[i] == _SPACE and 0 < _signed(i - first) <= _LONGEST_ID
    return value, (i if good else _NOT_PLAIN)


@jit_exact
def _plain_number(text: Bytes, i: np.uint64) -> tuple[float, np.uint64]:
    """Digits, perhaps with a point, perhaps with E and a signed power: the number and where it ends, 0 for others."""
    first, exponent = i, 0
    mantissa, i = _digits(text, first, 0)
    digits = _signed(i - first)
    if text[i] == _POINT:
        first = i + _ONE
        mantissa, i = _digits(text, first, mantissa)
        exponent = -_signed(i - first)
        digits -= exponent
    good = 0 < digits <= _MOST_DIGITS
    if text[i] == 69 or text[i] == 101:
        sign = text[i + _ONE]
        if sign != 43 and sign != 45:
            return np.nan, _NOT_PLAIN
        first = i + _ONE + _ONE
        power, i = _digits(text, first, 0)
        good = good and 0 < _signed(i - first) <= 3
        exponent += -power if sign == 45 else power
    return (scale_by_power(float(mantissa), exponent), i) if good else (np.nan, _NOT_PLAIN)


@jit_exact
def read_any_row(text: Bytes, start: int) -> tuple[int, int, float, float, int, int]:
    """Ids, A and wavenumber (or NaN) of any line, where the next one starts, and READ, BLANK or UNREADABLE."""
    after = start
    while after < text.size and text[after] != _NEWLINE:
        after += 1
    stop = after - 1 if after > start and text[after - 1] == _RETURN else after
    upper, lower, a, given = -1, -1, np.nan, np.nan
    i, columns, status = start, 0, READ
    while True:
        while i < stop and (text[i] == _SPACE or text[i] == _TAB):
            i += 1
        if i >= stop:
            break
        first = i
        while i < stop and text[i] != _SPACE and text[i] != _TAB:
            i += 1
        if columns < 2:
            upper, lower = lower, _whole_number(text, first, i)
            status = UNREADABLE if lower < 0 else status
        elif columns < 4:
            a, (given, found) = given, read_number(text, first, i)
            status = UNREADABLE if found != READ else status
        columns += 1
    if columns == 0:
        status = BLANK
    elif columns == 3:
        a, given = given, np.nan
    elif columns != 4:
        status = UNREADABLE
    return upper, lower, a, given, after + 1, status


@jit_exact
def _whole_number(text: Bytes, start: int, stop: int) -> int:
    """The value of up to 18 digits; -1 for anything else."""
    if stop - start > _LONGEST_ID:
        return -1
    value = 0
    for i in range(start, stop):
        if not 48 <= text[i] <= 57:
            return -1
        value = value * 10 + (int(text[i]) - 48)
    return value
