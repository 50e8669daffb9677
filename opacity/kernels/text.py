"""Numbers out of bytes: records of fixed width and rows of white-space separated columns, millions a second.

A decimal number is read as an integer mantissa times a power of ten.  The power is kept as a sum of two f8 and the
product carries its rounding error (Dekker 1971, Numer. Math. 18, 224), so that a number of up to 15 digits comes out
as `float` gives it, and one of more digits within one unit in the last place.  What is not a plain decimal
number gets a status, and the caller says which record it was.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact

Array = NDArray[np.float64]
Bytes = NDArray[np.uint8]
Index = NDArray[np.int64]

READ, BLANK, UNREADABLE = 0, 1, 2

_LOWEST_POWER = -340
_HIGHEST_POWER = 308


def _power_table() -> tuple[Array, Array]:
    """10^k for k from -340 to 308 as the nearest f8 and what is left of it, both (649,)."""
    exact = [Fraction(10) ** exponent for exponent in range(_LOWEST_POWER, _HIGHEST_POWER + 1)]
    rounded = [float(power) for power in exact]
    rest = [float(power - Fraction(near)) for power, near in zip(exact, rounded, strict=True)]
    return np.array(rounded), np.array(rest)


_POWERS, _POWER_RESTS = _power_table()
_SPLIT = 134217729.0
_MAX_MANTISSA = 922337203685477579
_NEWLINE, _RETURN, _SPACE, _TAB, _HASH = 10, 13, 32, 9, 35


@jit_exact
def scale_by_power(mantissa: float, exponent: int) -> float:
    """mantissa times 10 to the exponent, infinite beyond the range of f8 and 0 below it."""
    if mantissa == 0.0:
        return 0.0
    if exponent > 308:
        return float(np.inf) if exponent > 340 else mantissa * _POWERS[308 - _LOWEST_POWER] * 10.0 ** (exponent - 308)
    if exponent < _LOWEST_POWER:
        return 0.0
    if exponent < -270:
        # The power's rest would lose digits: two steps.
        return float(mantissa * _POWERS[-200 - _LOWEST_POWER] * _POWERS[exponent + 200 - _LOWEST_POWER])
    if exponent > 270:
        # Splitting would overflow.
        return float(mantissa * _POWERS[exponent - _LOWEST_POWER])
    power = _POWERS[exponent - _LOWEST_POWER]
    product = mantissa * power
    carry = _SPLIT * mantissa
    m_high = carry - (carry - mantissa)
    m_low = mantissa - m_high
    carry = _SPLIT * power
    p_high = carry - (carry - power)
    p_low = power - p_high
    error = ((m_high * p_high - product) + m_high * p_low + m_low * p_high) + m_low * p_low
    return float(product + (error + mantissa * _POWER_RESTS[exponent - _LOWEST_POWER]))


@jit_exact
def read_number(text: Bytes, start: int, stop: int) -> tuple[float, int]:
    """The number between two bytes, spaces around it allowed, and a status; NaN unless it was read.

    A field of # alone is blank too: hapi writes so what is missing.
    """
    while start < stop and text[start] == _SPACE:
        start += 1
    while stop > start and text[stop - 1] == _SPACE:
        stop -= 1
    if start == stop:
        return np.nan, BLANK
    i = start
    if text[i] == _HASH:
        while i < stop and text[i] == _HASH:
            i += 1
        return np.nan, (BLANK if i == stop else UNREADABLE)
    negative = text[i] == 45
    if negative or text[i] == 43:
        i += 1
    mantissa, exponent, digits, after_point = 0, 0, 0, False
    while i < stop:
        byte = text[i]
        if 48 <= byte <= 57:
            digits += 1
            if mantissa < _MAX_MANTISSA:
                mantissa = mantissa * 10 + (int(byte) - 48)
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
        power = min(power * 10 + (int(text[i]) - 48), 100_000)
        i += 1
    return (-power if negative else power), True


@jit_exact
def count_newlines(text: Bytes) -> int:
    """Number of LF in a text."""
    count = 0
    for i in range(text.size):
        count += text[i] == _NEWLINE
    return count


@jit_exact
def _look_at(line: Bytes) -> tuple[bool, bool]:
    """Whether a line holds more than blanks, and whether it holds bytes other than printable ASCII and tabs."""
    filled, odd = np.uint8(0), np.uint8(0)
    for byte in line:
        tab = np.uint8(byte == _TAB)
        filled |= np.uint8(byte != _SPACE) & np.uint8(1 - tab)
        odd |= np.uint8((byte < 32) | (byte > 126)) & np.uint8(1 - tab)
    return filled != 0, odd != 0


@jit_exact
def find_lines(
    text: Bytes, first_number: int, starts: Index, stops: Index, numbers: Index, plain: NDArray[np.bool_]
) -> int:
    """Bounds of the lines that are not blank, without their line ends (LF or CRLF); how many there are.

    `numbers` are line numbers, counted from `first_number`; `plain` is false for a line with bytes other than
    printable ASCII and tabs.  The arrays must hold one entry more than the text has LF.
    """
    count, start, number = 0, 0, first_number
    size = text.size
    while start < size:
        end = start
        while end < size and text[end] != _NEWLINE:
            end += 1
        stop = end - 1 if end > start and text[end - 1] == _RETURN else end
        # A slice, so that the loop vectorises.
        filled, odd = _look_at(text[start:stop])
        if filled:
            starts[count], stops[count], numbers[count], plain[count] = start, stop, number, not odd
            count += 1
        number += 1
        start = end + 1
    return count


@jit_exact
def read_fixed_column(text: Bytes, starts: Index, first: int, last: int, out: Array, status: NDArray[np.uint8]) -> None:
    """A column of records: bytes first..last - 1 of each; values and statuses, both (n_records,).

    A record whose start is negative counts as blank.
    """
    for i in range(starts.size):
        if starts[i] < 0:
            out[i], status[i] = np.nan, BLANK
        else:
            out[i], status[i] = read_number(text, starts[i] + first, starts[i] + last)


@jit_exact
def wide_enough(text: Bytes, starts: Index, stops: Index, width: int, out: NDArray[np.bool_]) -> None:
    """Which lines have `width` bytes and behind them only blanks; `out` (n_lines,)."""
    for i in range(starts.size):
        good = stops[i] - starts[i] >= width
        for k in range(starts[i] + width, stops[i]):
            good = good and (text[k] == _SPACE or text[k] == _TAB)
        out[i] = good


@jit_exact
def read_fields(text: Bytes, starts: Index, stops: Index, out: Array, status: NDArray[np.uint8]) -> None:
    """Numbers between given bytes, tabs around them allowed; values and statuses, both (n,).

    A field whose start is negative counts as blank.
    """
    for i in range(starts.size):
        if starts[i] < 0:
            out[i], status[i] = np.nan, BLANK
            continue
        start, stop = starts[i], stops[i]
        while start < stop and text[start] == _TAB:
            start += 1
        while stop > start and text[stop - 1] == _TAB:
            stop -= 1
        out[i], status[i] = read_number(text, start, stop)


@jit_exact
def split_fields(
    text: Bytes, starts: Index, stops: Index, separator: Bytes, field_starts: Index, field_stops: Index
) -> None:
    """Bounds of `n_fields` separated fields of each line, both (n_lines, n_fields); -1 in all where the count differs.

    Blanks at a line's end do not count, unless they are the separator.
    """
    size = separator.size
    n_fields = field_starts.shape[1]
    for row in range(starts.size):
        stop = stops[row]
        while stop > starts[row] and (
            (text[stop - 1] == _SPACE and separator[size - 1] != _SPACE)
            or (text[stop - 1] == _TAB and separator[size - 1] != _TAB)
        ):
            stop -= 1
        count, at, i = 0, starts[row], starts[row]
        while i <= stop:
            here = i + size <= stop
            for k in range(size):
                here = here and text[i + k] == separator[k]
            if here or i == stop:
                if count < n_fields:
                    field_starts[row, count], field_stops[row, count] = at, i
                count += 1
                i = i + size if here else i + 1
                at = i
            else:
                i += 1
        if starts[row] < 0 or count != n_fields:
            field_starts[row, :] = -1
