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
    upper, i = _plain_id(text, start)
    if i < 0:
        return -1, -1, np.nan, np.nan, 0
    lower, i = _plain_id(text, i)
    if i < 0:
        return -1, -1, np.nan, np.nan, 0
    a, i = _plain_number(text, _behind_spaces(text, i))
    if i < 0:
        return -1, -1, np.nan, np.nan, 0
    given = np.nan
    if text[i] == _SPACE:
        i = _behind_spaces(text, i)
        if text[i] != _NEWLINE and text[i] != _RETURN:
            given, i = _plain_number(text, i)
            if i < 0:
                return -1, -1, np.nan, np.nan, 0
            i = _behind_spaces(text, i)
    if text[i] == _RETURN:
        i += 1
    return upper, lower, a, given, (i + 1 if text[i] == _NEWLINE else 0)


@jit_exact
def _behind_spaces(text: Bytes, i: int) -> int:
    while text[i] == _SPACE:
        i += 1
    return i


@jit_exact
def _plain_id(text: Bytes, i: int) -> tuple[int, int]:
    """Spaces, then digits, then a space that is still to come: the whole number and where it ends, -1 for others."""
    i = _behind_spaces(text, i)
    first, value = i, 0
    while True:
        digit = int(text[i]) - 48
        if not 0 <= digit <= 9:
            break
        value = value * 10 + digit
        i += 1
    good = text[i] == _SPACE and 0 < i - first <= _LONGEST_ID
    return value, (i if good else -1)


@jit_exact
def _plain_number(text: Bytes, i: int) -> tuple[float, int]:
    """Digits, perhaps with a point, perhaps with E and a signed power: the number and where it ends, -1 for others."""
    first, mantissa, exponent = i, 0, 0
    while True:
        digit = int(text[i]) - 48
        if not 0 <= digit <= 9:
            break
        mantissa = mantissa * 10 + digit
        i += 1
    digits = i - first
    if text[i] == _POINT:
        i += 1
        point = i
        while True:
            digit = int(text[i]) - 48
            if not 0 <= digit <= 9:
                break
            mantissa = mantissa * 10 + digit
            i += 1
        exponent = point - i
        digits -= exponent
    good = 0 < digits <= _MOST_DIGITS
    if text[i] == 69 or text[i] == 101:
        negative = text[i + 1] == 45
        if not (negative or text[i + 1] == 43):
            return np.nan, -1
        i += 2
        first, power = i, 0
        while True:
            digit = int(text[i]) - 48
            if not 0 <= digit <= 9:
                break
            power = power * 10 + digit
            i += 1
        good = good and 0 < i - first <= 3
        exponent += -power if negative else power
    return (scale_by_power(float(mantissa), exponent), i) if good else (np.nan, -1)


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
