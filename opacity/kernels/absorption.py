"""Transmissions of rows of k, with an exponential of additions and products alone: loops over it vectorise.

exp(-x) = 2^n exp(r) with n the whole number nearest to -x / ln 2, and exp(r) - 1 by its series to r^11.  Its relative
error is below 1e-14 and that of 1 - exp(-x) below 3e-14: the first term left out, r^12 / 12!, is at most 6.4e-15, and
where it is 1 - exp(-x) is 0.29.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit, jit_exact, jit_in_order

Array = NDArray[np.float64]

DEEPEST = 700.0
"""Beyond this depth nothing is left: exp(-700) = 1e-304 stands for all that is less, whose numbers would be slow."""

# ln 2 in two parts, the first with so few digits that its product with a whole number up to 2^11 is exact.
_LN2_HIGH, _LN2_LOW = 6.93147180369123816490e-01, 1.90821492927058770002e-10
_A_LN2 = 1.0 / math.log(2.0)
# A number added to this is rounded to a whole one, which the sum's last bits hold.
_ROUNDING = 1.5 * 2.0**52
_BIAS, _MANTISSA = np.int64(1023), np.int64(52)
_C3, _C4, _C5, _C6, _C7 = 1.0 / 6.0, 1.0 / 24.0, 1.0 / 120.0, 1.0 / 720.0, 1.0 / 5040.0
_C8, _C9, _C10, _C11 = 1.0 / 40320.0, 1.0 / 362880.0, 1.0 / 3628800.0, 1.0 / 39916800.0


_LOWEST, _HIGHEST = -5.0, 60.0
_MOST_STEPS = 100
_SMALL_STEP = 1e-5
"""Newton's last step, whose own error goes with its square."""


@jit_in_order
def _parts(depth: float) -> tuple[float, float]:
    """2^n and exp(r) - 1 whose product and 2^n add up to exp(-depth); a depth from 0 to 700."""
    rounded = np.float64(_ROUNDING - depth * _A_LN2)
    n = rounded - _ROUNDING
    r = (-depth - n * _LN2_HIGH) - n * _LN2_LOW
    p = _C8 + r * (_C9 + r * (_C10 + r * _C11))
    p = _C3 + r * (_C4 + r * (_C5 + r * (_C6 + r * (_C7 + r * p))))
    bits = np.float64(rounded).view(np.int64)
    power = np.int64((bits + _BIAS) << _MANTISSA).view(np.float64)
    return power, r + r * r * (0.5 + r * p)


@jit_in_order
def absorb(depths: Array) -> None:
    """Put 1 - exp(-x) in the place of depths x, 0 or above."""
    for i in range(depths.size):
        power, more = _parts(min(depths[i], DEEPEST))
        depths[i] = (1.0 - power) - power * more


@jit_in_order
def add_transmission(k: Array, weights: Array, columns: Array, out: Array) -> None:
    """Add the weighted sum of exp(-k u) over k (n,) with `weights` (n,) to `out`, for `columns` u, (n_column,) both."""
    for i in range(k.size):
        one, weight = k[i], weights[i]
        for j in range(columns.size):
            power, more = _parts(min(one * columns[j], DEEPEST))
            out[j] += weight * (power + power * more)


@jit
def weighted_sum(values: Array, weights: Array) -> float:
    """Sum of products of two (n,)."""
    total = 0.0
    for i in range(values.size):
        total += values[i] * weights[i]
    return total


@jit_exact
def transmission_rows(k: Array, weights: Array, columns: Array, out: Array) -> None:
    """Fill `out` (n_row, n_column) with means of exp(-k u) of rows: k (n_row, n), `weights` (n_row or 1, n)."""
    for row in range(k.shape[0]):
        out[row] = 0.0
        add_transmission(k[row], weights[row % weights.shape[0]], columns[row], out[row])


@jit_in_order
def _depth_and_slope(values: Array, widths: Array, filled: float, column: float, work: Array) -> tuple[float, float]:
    """-ln T of a row's samples above 0, whose widths add up to `filled`, at a column, and what it rises by with ln u.

    `work` (2, n) is room to work in.
    """
    through, weighted = work[0], work[1]
    for i in range(values.size):
        depth = min(values[i] * column, DEEPEST)
        power, more = _parts(depth)
        through[i] = power + power * more
        weighted[i] = depth * through[i]
    left = weighted_sum(through, widths) / filled
    return -math.log(left), weighted_sum(weighted, widths) / (filled * left)


@jit_exact
def _column_of(values: Array, widths: Array, filled: float, mean: float, level: float, work: Array) -> float:
    """Column u, from e^-5 to e^60 of 1 / `mean`, at which samples above 0 transmit a level in the mean.

    Newton's steps on ln(-ln T) against ln u, a straight line for a single value; the bracket is halved where a step
    leads out of it.
    """
    wanted = -math.log(level)
    low, high = _LOWEST, _HIGHEST
    at = max(low, min(math.log(wanted * filled), high))
    for _ in range(_MOST_STEPS):
        depth, slope = _depth_and_slope(values, widths, filled, math.exp(at) / mean, work)
        if depth < wanted:
            low = at
        else:
            high = at
        step = math.log(wanted / depth) * depth / slope
        if abs(step) < _SMALL_STEP:
            return math.exp(at + step) / mean
        at += step
        if not low < at < high:
            at = 0.5 * (low + high)
        if high - low < _SMALL_STEP:
            break
    return math.exp(high) / mean


@jit_exact
def column_rows(values: Array, widths: Array, levels: Array, least: float, first: Array, second: Array) -> None:
    """Columns `first` and `second` (n_row,) at which rows transmit the two `levels`, or 0 for rows of zeros.

    `values` (n_row, m) rising, `widths` (m,) with sum 1.  Where zeros let through more than a level, the column is that
    at which the share `least` of what the others absorb is left.  Columns are good to 1e-9 unless the transmission
    hardly changes there, and lie between e^-5 and e^60 of 1 / (mean of the row).
    """
    work = np.empty((2, widths.size))
    for row in range(values.shape[0]):
        start, clear = 0, 0.0
        while start < widths.size and values[row, start] == 0.0:
            clear += widths[start]
            start += 1
        if start == widths.size:
            first[row], second[row] = 0.0, 0.0
            continue
        its, its_widths, room = values[row, start:], widths[start:], work[:, start:]
        filled, mean = 0.0, weighted_sum(its, its_widths)
        for i in range(its.size):
            filled += its_widths[i]
        first[row] = _column_of(its, its_widths, filled, mean, max((levels[0] - clear) / filled, least), room)
        second[row] = _column_of(its, its_widths, filled, mean, max((levels[1] - clear) / filled, least), room)
