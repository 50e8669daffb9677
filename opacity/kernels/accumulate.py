"""The direct sum over lines on one tile of the grid: the cut, and the points that each formula serves."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.chi import chi_at, weigh
from opacity.kernels.jit import jit, jit_exact
from opacity.kernels.node_line import (
    SMALLEST_Y,
    Formulas,
    LineAtNode,
    LineColumns,
    add_pieces,
    line_at_node,
    with_plinth,
)

Array = NDArray[np.float64]


@jit_exact
def first_not_below(nu: Array, value: float) -> int:
    """Index of the first point >= value, as numpy.searchsorted; quick where the points are evenly spaced."""
    size = nu.size
    if size == 0 or value <= nu[0]:
        return 0
    if value > nu[size - 1]:
        return size
    low, high = 0, size - 1
    guess = int((value - nu[0]) / (nu[high] - nu[0]) * high)
    guess = min(max(guess, 0), high - 1)
    if nu[guess] < value:
        low = guess
        if value <= nu[guess + 1]:
            return guess + 1
    else:
        high = guess
        if guess > 0 and nu[guess - 1] < value:
            return guess
    while high - low > 1:
        middle = (low + high) // 2
        if nu[middle] < value:
            low = middle
        else:
            high = middle
    return high


@jit_exact
def reach(nu: Array, nu0: float, cutoff: float) -> tuple[int, int]:
    """First and one past the last point with |nu - nu0| <= cutoff, in exactly this arithmetic."""
    size = nu.size
    first = first_not_below(nu, nu0 - cutoff)
    while first > 0 and abs(nu[first - 1] - nu0) <= cutoff:
        first -= 1
    while first < size and nu[first] < nu0 and abs(nu[first] - nu0) > cutoff:
        first += 1
    last = max(first, first_not_below(nu, nu0 + cutoff))
    while last < size and abs(nu[last] - nu0) <= cutoff:
        last += 1
    while last > first and abs(nu[last - 1] - nu0) > cutoff:
        last -= 1
    return first, last


@jit
def add_line(out: Array, nu: Array, first: int, last: int, line: LineAtNode) -> None:
    """One line on the points first..last - 1."""
    near, core = line.near / line.scale, line.core / line.scale
    if line.near < 0.0:
        add_pieces(out, nu, first, last, last, last, last, last, line)
        return
    near_left, near_right = first_not_below(nu, line.centre - near), first_not_below(nu, line.centre + near)
    if line.core < 0.0:
        add_pieces(out, nu, first, last, near_left, near_right, near_right, near_right, line)
        return
    core_left, core_right = first_not_below(nu, line.centre - core), first_not_below(nu, line.centre + core)
    add_pieces(out, nu, first, last, near_left, core_left, core_right, near_right, line)


@jit
def add_weighted(out: Array, nu: Array, first: int, last: int, line: LineAtNode, factor: float, rate: float) -> None:
    """One line on the points first..last - 1, times factor exp(-rate |nu - centre|)."""
    if first >= last:
        return
    values = np.zeros(last - first)
    bare = LineAtNode(line.centre, line.scale, line.y, line.amplitude, 0.0, line.core, line.near)
    add_line(values, nu[first:last], 0, last - first, bare)
    weigh(out[first:last], values, nu[first:last], line.centre, line.plinth, factor, rate)


@jit
def line_in_reach(
    nu: Array,
    nu0: float,
    shift: float,
    strength: float,
    lorentz: float,
    doppler: float,
    pressure: float,
    cutoff: float,
    subtract_plinth: bool,
    chi: Array,
    near_radius: float,
    far_radius: float,
    exponential: Array,
) -> tuple[int, int, LineAtNode]:
    """The points that a line of `LineColumns` reaches, from the first to before the last, and the line at the node."""
    first, last = reach(nu, nu0, cutoff) if strength != 0.0 else (0, 0)
    line = line_at_node(nu0, shift, strength, lorentz, doppler, pressure, near_radius, far_radius, exponential)
    if subtract_plinth and first < last:
        line = with_plinth(line, cutoff, chi_at(chi, cutoff))
    return first, last, line


@jit
def stretch(nu: Array, centre: float, chi: Array, number: int, first: int, last: int) -> tuple[int, int, float, float]:
    """One of the 2 n - 1 stretches in which a line's points have one row of n chi factors: low, high, factor and rate.

    From the centre outwards, left before right.  Without rows the one stretch is all of first..last, its rate below 0.
    """
    if chi.shape[0] == 0:
        return first, last, 1.0, -1.0
    row = (number + 1) >> 1
    # Within the same arithmetic as the exact sum.
    low, high = reach(nu, centre, chi[row, 0])
    low, high = min(max(low, first), last), min(max(high, first), last)
    if row > 0:
        left, right = reach(nu, centre, chi[row - 1, 0])
        left, right = min(max(left, first), last), min(max(right, first), last)
        low, high = (low, left) if number % 2 else (right, high)
    return low, high, chi[row, 1], chi[row, 2]


@jit
def add_lines(
    out: Array,
    nu: Array,
    first_line: int,
    last_line: int,
    lines: LineColumns,
    pressure: float,
    cutoff: float,
    subtract_plinth: bool,
    chi: Array,
    formulas: Formulas,
) -> int:
    """Add lines first_line..last_line - 1 to a tile: `out`, `nu` (n_points,); pressure in bar, cut-off in cm-1.

    `chi` is the table of `chi`, without rows where there is none.  Returns the first line whose pressure width is
    out of range, or -1.
    """
    wavenumber, shift, strength, lorentz, doppler = lines
    near_radius, far_radius, exponential = formulas
    for j in range(first_line, last_line):
        first, last, line = line_in_reach(
            nu, wavenumber[j], shift[j], strength[j], lorentz[j], doppler[j], pressure, cutoff, subtract_plinth, chi,
            near_radius, far_radius, exponential,
        )  # fmt: skip
        if first >= last:
            continue
        if not SMALLEST_Y <= line.y < np.inf:
            return j
        for number in range(max(2 * chi.shape[0] - 1, 1)):
            low, high, factor, rate = stretch(nu, line.centre, chi, number, first, last)
            if rate < 0.0:
                add_line(out, nu, low, high, line)
            else:
                add_weighted(out, nu, low, high, line, factor, rate)
    return -1
