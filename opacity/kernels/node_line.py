"""One line at a node: from its columns at a temperature to where each formula of the profile serves.

Arrays are taken out of tuples once a tile and handed on by themselves: each time a kernel takes one out of a tuple it
counts references, which for small functions is most of their time.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit
from opacity.kernels.line_width import LOWEST_SHIFTED
from opacity.kernels.voigt import INV_SQRT_PI, NARROW_X, NARROW_Y, add_core, add_far, add_narrow, add_near

Array = NDArray[np.float64]

SQRT_LN2 = math.sqrt(math.log(2.0))
SMALLEST_Y = 1e-30
SMALLEST_EXPONENT = -100
LARGEST_EXPONENT = 12
FLAT = 2.0
"""A profile changes by less than a factor of five within a cut-off of this many pressure widths."""


class LineColumns(NamedTuple):
    """Lines at a temperature, each (n_lines,).

    `wavenumber` is the unshifted one, cm-1; `shift` cm-1/bar; `strength` cm/molecule; `lorentz` pressure half-width
    (HWHM) in cm-1/bar; `doppler` Doppler half-width as a share of the wavenumber.
    """

    wavenumber: Array
    shift: Array
    strength: Array
    lorentz: Array
    doppler: Array


class Formulas(NamedTuple):
    """Where each formula of the profile serves: radii |z| beyond which 6-point and 2-point quadrature are good
    enough, and by binary exponent of y (from `SMALLEST_EXPONENT`) the |x| beyond which the exponential is gone.
    """

    near_radius: float
    far_radius: float
    exponential: Array


class LineAtNode(NamedTuple):
    """amplitude K((nu - centre) scale, y) - plinth; up to |x| = `core` a core formula, up to `near` six points."""

    centre: float
    scale: float
    y: float
    amplitude: float
    plinth: float
    core: float
    near: float


@jit
def region_radii(y: float, near_radius: float, far_radius: float, exponential: Array) -> tuple[float, float]:
    """Distances |x| up to which a core formula, and up to which `near`, is needed; -1 where not at all."""
    y2 = y * y
    core = -1.0
    if y2 < near_radius * near_radius:
        exponent = min(max(math.frexp(y)[1], SMALLEST_EXPONENT), LARGEST_EXPONENT)
        core = max(math.sqrt(near_radius * near_radius - y2), exponential[exponent - SMALLEST_EXPONENT])
    near = core
    if y2 < far_radius * far_radius:
        near = max(core, math.sqrt(far_radius * far_radius - y2))
    return core, near


@jit
def line_at_node(
    nu0: float,
    shift: float,
    strength: float,
    lorentz: float,
    doppler: float,
    pressure: float,
    near_radius: float,
    far_radius: float,
    exponential: Array,
) -> LineAtNode:
    """A line of `LineColumns` at a pressure (bar), without plinth."""
    centre = nu0 + pressure * shift
    scale = SQRT_LN2 / (doppler * max(centre, LOWEST_SHIFTED * nu0))
    y = pressure * lorentz * scale
    core, near = region_radii(y, near_radius, far_radius, exponential)
    return LineAtNode(centre, scale, y, strength * scale * INV_SQRT_PI, 0.0, core, near)


@jit
def with_plinth(line: LineAtNode, cutoff: float, weight: float) -> LineAtNode:
    """The line with its value at the cut-off as plinth; `weight` is the chi factor there.

    The same formula must serve at the cut-off and near it, or the difference is all error: regions are widened.  Where
    the profile is broader than the cut-off it is flat all over, and one formula must serve throughout.
    """
    edge, core, near = cutoff * line.scale, line.core, line.near
    if near > 0.5 * edge or (near >= 0.0 and edge < FLAT * line.y):
        near = 2.0 * edge + 20.0 * near
    if core > 0.5 * edge:
        core = near
    if core > NARROW_X and line.y < NARROW_Y:
        core = NARROW_X
    value = weight * line.amplitude * profile_value(edge, line.y, core, near)
    return LineAtNode(line.centre, line.scale, line.y, line.amplitude, value, core, near)


@jit
def profile_value(x: float, y: float, core: float, near: float) -> float:
    """K(x, y) by the formula that serves at this point."""
    out = np.zeros(1)
    at = np.full(1, x)
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
def voigt_value(x: float, y: float, formulas: Formulas) -> float:
    """K(x, y) within the tolerance that `formulas` follow from."""
    core, near = region_radii(y, formulas.near_radius, formulas.far_radius, formulas.exponential)
    return profile_value(x, y, core, near)


@jit
def add_pieces(
    out: Array,
    nu: Array,
    first: int,
    last: int,
    near_left: int,
    core_left: int,
    core_right: int,
    near_right: int,
    line: LineAtNode,
) -> None:
    """A line on the points first..last - 1: far, near from `near_left`, core from `core_left`, near, far."""
    left = min(max(near_left, first), last)
    right = min(max(near_right, left), last)
    if left > first:
        add_far(out, nu, first, left, line.centre, line.scale, line.y, line.amplitude, line.plinth)
    if last > right:
        add_far(out, nu, right, last, line.centre, line.scale, line.y, line.amplitude, line.plinth)
    if right == left:
        return
    inner_left = min(max(core_left, left), right)
    inner_right = min(max(core_right, inner_left), right)
    if inner_left > left:
        add_near(out, nu, left, inner_left, line.centre, line.scale, line.y, line.amplitude, line.plinth)
    if right > inner_right:
        add_near(out, nu, inner_right, right, line.centre, line.scale, line.y, line.amplitude, line.plinth)
    if inner_right > inner_left:
        if line.y < NARROW_Y:
            add_narrow(out, nu, inner_left, inner_right, line.centre, line.scale, line.y, line.amplitude, line.plinth)
        else:
            add_core(out, nu, inner_left, inner_right, line.centre, line.scale, line.y, line.amplitude, line.plinth)
