"""The direct sum over lines on one tile of the grid: where each formula of `voigt` serves, and the cut."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit, jit_exact
from opacity.kernels.voigt import NARROW_X, NARROW_Y, add_core, add_far, add_narrow, add_near

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
def exponential_radius(y: float, tolerance: float) -> float:
    """The x beyond which exp(-x2) is below tolerance times the Lorentz wing y / (sqrt(pi) x2)."""
    level = math.log(4.0 / (y * tolerance)) + 0.6
    u = max(level, 1.0)
    for _ in range(4):
        u = max(level + math.log(u), 1.0)
    return math.sqrt(u)


@jit
def region_radii(y: float, tolerance: float, near_radius: float, far_radius: float) -> tuple[float, float]:
    """Distances |x| up to which a core formula, and up to which `near`, is needed; -1 where not at all."""
    y2 = y * y
    core = -1.0
    if y2 < near_radius * near_radius:
        core = max(math.sqrt(near_radius * near_radius - y2), exponential_radius(y, tolerance))
    near = core
    if y2 < far_radius * far_radius:
        near = max(core, math.sqrt(far_radius * far_radius - y2))
    return core, near


@jit
def voigt_value(x: float, y: float, tolerance: float, near_radius: float, far_radius: float) -> float:
    """K(x, y) by the formula that serves at this point."""
    out = np.zeros(1)
    at = np.full(1, x)
    core, near = region_radii(y, tolerance, near_radius, far_radius)
    if abs(x) > near:
        add_far(out, at, 0, 1, 0.0, 1.0, y, 1.0, 0.0)
    elif abs(x) > core:
        add_near(out, at, 0, 1, 0.0, 1.0, y, 1.0, 0.0)
    elif y < NARROW_Y:
        add_narrow(out, at, 0, 1, 0.0, 1.0, y, 1.0, 0.0)
    else:
        add_core(out, at, 0, 1, 0.0, 1.0, y, 1.0, 0.0)
    return float(out[0])


@jit
def add_line(
    out: Array,
    nu: Array,
    first: int,
    last: int,
    centre: float,
    scale: float,
    y: float,
    amplitude: float,
    plinth: float,
    core: float,
    near: float,
) -> None:
    """One line on the points first..last - 1: far, near, core, near, far."""
    left = min(max(first_not_below(nu, centre - near / scale), first), last)
    right = min(max(first_not_below(nu, centre + near / scale), left), last)
    if near < 0.0:
        right = left
    add_far(out, nu, first, left, centre, scale, y, amplitude, plinth)
    add_far(out, nu, right, last, centre, scale, y, amplitude, plinth)
    if right == left:
        return
    inner_left = min(max(first_not_below(nu, centre - core / scale), left), right)
    inner_right = min(max(first_not_below(nu, centre + core / scale), inner_left), right)
    if core < 0.0:
        inner_right = inner_left
    add_near(out, nu, left, inner_left, centre, scale, y, amplitude, plinth)
    add_near(out, nu, inner_right, right, centre, scale, y, amplitude, plinth)
    if y < NARROW_Y:
        add_narrow(out, nu, inner_left, inner_right, centre, scale, y, amplitude, plinth)
    else:
        add_core(out, nu, inner_left, inner_right, centre, scale, y, amplitude, plinth)


@jit
def add_lines(
    out: Array,
    nu: Array,
    first_line: int,
    last_line: int,
    nu0: Array,
    centre: Array,
    scale: Array,
    y: Array,
    amplitude: Array,
    cutoff: float,
    subtract_plinth: bool,
    tolerance: float,
    near_radius: float,
    far_radius: float,
) -> None:
    """Add lines first_line..last_line - 1 to a tile: `out`, `nu` (n_points,), the others (n_lines,).

    `nu0` is the unshifted wavenumber that the cut-off counts from, `centre` the shifted one; cm-1.
    """
    for j in range(first_line, last_line):
        if amplitude[j] == 0.0:
            continue
        first, last = reach(nu, nu0[j], cutoff)
        if first >= last:
            continue
        core, near = region_radii(y[j], tolerance, near_radius, far_radius)
        plinth = 0.0
        if subtract_plinth:
            edge = cutoff * scale[j]
            # The same formula must serve at the cut-off and near it, or the difference is all error.
            if near > 0.5 * edge:
                near = 2.0 * edge + 20.0 * near
            if core > 0.5 * edge:
                core = near
            if core > NARROW_X and y[j] < NARROW_Y:
                core = NARROW_X
            plinth = amplitude[j] * _plinth_value(edge, y[j], core, near)
        add_line(out, nu, first, last, centre[j], scale[j], y[j], amplitude[j], plinth, core, near)


@jit
def _plinth_value(edge: float, y: float, core: float, near: float) -> float:
    out = np.zeros(1)
    add_line(out, np.full(1, edge), 0, 1, 0.0, 1.0, y, 1.0, 0.0, core, near)
    return float(out[0])
