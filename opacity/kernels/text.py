"""Numbers out of bytes: records of fixed width and rows of white-space separated columns, millions a second.

A decimal number is read as an integer mantissa times a power of ten; the power is correctly rounded, so that a
value is within one unit in the last place of what `float` gives, and exact for up to 15 digits and
exponents up to 22.  What is not a plain decimal number gets a status, and the caller says which record it was.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact

Array = NDArray[np.float64]
Bytes = NDArray[np.uint8]
Index = NDArray[np.int64]

READ, BLANK, UNREADABLE = 0, 1, 2

_LOWEST_POWER = -340
_POWERS = np.array([float(f"1e{exponent}") for exponent in range(_LOWEST_POWER, 309)])
_MAX_MANTISSA = 922337203685477579
_NEWLINE, _RETURN, _SPACE, _TAB = 10, 13, 32, 9


@jit_exact
def scale_by_power(mantissa: float, exponent: int) -> float:
    """mantissa times 10 to the exponent, infinite beyond the range of f8 and 0 below it."""
    if mantissa == 0.0:
        return 0.0
    if exponent > 308:
        return float(np.inf) if exponent > 340 else mantissa * _POWERS[308 - _LOWEST_POWER] * 10.0 ** (exponent - 308)
    if exponent < _LOWEST_POWER:
        return 0.0
    if exponent < -307:
        # The power itself would lose digits: two steps.
        return float(mantissa * _POWERS[-300 - _LOWEST_POWER] * _POWERS[exponent + 300 - _LOWEST_POWER])
    if -22 <= exponent < 0:
        return float(mantissa / _POWERS[-exponent - _LOWEST_POWER])
    return float(mantissa * _POWERS[exponent - _LOWEST_POWER])


@jit_exact
def read_number(text: Bytes, start: int, stop: int) -> tuple[float, int]:
    """The number between two bytes, blanks around it allowed, and a status; NaN unless it was read."""
    while start < stop and (text[start] == _SPACE or text[start] == _TAB):
        start += 1
    while stop > start and (text[stop - 1] == _SPACE or text[stop - 1] == _TAB):
        stop -= 1
    if start == stop:
        return np.nan, BLANK
    i = start
    negative = text[i] == 45
    if negative or text[i] == 43:
        i += 1
    mantissa, exponent, digits, after_point = 0, 0, 0, False
    while i < stop:
        byte = text[i]
        if 48 <= byte <= 57:
            digits += 1
            if mantissa < _MAX_MANTISSA:
                mantissa = mantissa * 10 + (byte - 48)
                exponent -= 1 if after_point else 0
            elif not after_point:
                exponent += 1
        elif byte == 46 and not after_point:
            after_point = True
        else:
            break
        i += 1
    if digits == 0:
        return np.nan, UNREADABLE
    if i < stop:
        power, good = _read_exponent(text, i, stop)
        if not good:
            return np.nan, UNREADABLE
        exponent += power
    value = scale_by_power(float(mantissa), exponent)
    return (-value if negative else value), READ


@jit_exact
def _read_exponent(text: Bytes, i: int, stop: int) -> tuple[int, bool]:
    """E+12, e-12, E12, or Fortran's three digits without a letter: -101."""
    letter = text[i] == 69 or text[i] == 101
    if letter:
        i += 1
    if i == stop:
        return 0, False
    negative = text[i] == 45
    signed = negative or text[i] == 43
    if signed:
        i += 1
    if i == stop or not (letter or (signed and stop - i == 3)):
        return 0, False
    power = 0
    while i < stop:
        if not 48 <= text[i] <= 57:
            return 0, False
        power = min(power * 10 + (text[i] - 48), 100_000)
        i += 1
    return (-power if negative else power), True


@jit_exact
def find_lines(text: Bytes, starts: Index, stops: Index) -> int:
    """Bounds of the lines of a text without their line ends (LF or CRLF); the number of lines, last one included.

    `starts`, `stops` must be long enough: one more than the number of LF.
    """
    count, start = 0, 0
    for i in range(text.size):
        if text[i] == _NEWLINE:
            starts[count] = start
            stops[count] = i - 1 if i > start and text[i - 1] == _RETURN else i
            count += 1
            start = i + 1
    if start < text.size:
        starts[count] = start
        stops[count] = text.size
        count += 1
    return count


@jit_exact
def read_fixed_column(text: Bytes, starts: Index, first: int, last: int, out: Array, status: NDArray[np.uint8]) -> None:
    """A column of records: bytes first..last - 1 of each; values and statuses, both (n_records,)."""
    for i in range(starts.size):
        out[i], status[i] = read_number(text, starts[i] + first, starts[i] + last)


@jit_exact
def read_rows(
    text: Bytes, starts: Index, stops: Index, integers: Index, numbers: Array, fields: NDArray[np.uint8]
) -> None:
    """Rows of two whole numbers, then decimal ones, parted by blanks.

    `integers` (n_rows, 2), `numbers` (n_rows, n_columns), NaN where a row has fewer; `fields` (n_rows,) the number of
    columns that the row has, 255 where one could not be read.
    """
    columns = numbers.shape[1]
    for row in range(starts.size):
        i, stop, count = starts[row], stops[row], 0
        while True:
            while i < stop and (text[i] == _SPACE or text[i] == _TAB):
                i += 1
            if i >= stop:
                break
            start = i
            while i < stop and text[i] != _SPACE and text[i] != _TAB:
                i += 1
            if count < 2:
                value = 0
                good = i - start <= 18
                for k in range(start, i):
                    good = good and 48 <= text[k] <= 57
                    value = value * 10 + (text[k] - 48)
                integers[row, count] = value if good else -1
                if not good:
                    count = 255
                    break
            elif count - 2 < columns:
                number, status = read_number(text, start, i)
                numbers[row, count - 2] = number
                if status != READ:
                    count = 255
                    break
            count = min(count + 1, 254)
        for missing in range(min(max(count - 2, 0), columns), columns):
            numbers[row, missing] = np.nan
        fields[row] = count
