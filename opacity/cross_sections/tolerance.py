"""From the tolerance to everything that follows from it: where each formula of the profile serves, and how wide cells
may be.

A line's error is bounded relative to that line at every point, and all lines add positive values, so the sum's
relative error is within the largest of the lines' errors.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from opacity.errors import InputError, problem
from opacity.grids import FloatArray

SMALLEST_TOLERANCE = 1e-6
SMALLEST_WITH_PLINTH = 2e-6
LARGEST_TOLERANCE = 0.1

# Relative errors of Gauss-Hermite quadrature, measured against wofz and checked in the tests:
# 2 points 2.7 / |z|^4 for |z| >= 7, 6 points 600 / |z|^12 for |z| >= 5.
_FAR_COEFFICIENT = 2.7
_NEAR_COEFFICIENT = 600.0
_SMALLEST_FAR = 7.0
_SMALLEST_NEAR = 5.0
_NODES = 8
FORMULA_SHARE = 0.5
"""The share of the tolerance that the formulas of the profile may take."""
CELL_SHARE = 0.25
"""The share that interpolation in cells may take."""
WORSE_IN_LOG = 1.4
"""In ln nu a profile is not quite a pole: in cells of a tenth in ln nu it is missed by up to 1.31 times as much."""
TAIL_SHARE = 0.25
"""The share left for the end of the exponential, beyond which it is neglected."""


@dataclass(frozen=True, eq=False)
class Regions:
    """Radii |z| = sqrt(x2 + y2) beyond which 6-point and 2-point quadrature meet the tolerance; by binary exponent of y
    the |x| beyond which the exponential is gone; the half-axis of the ellipse about a cell, in half-widths of the
    cell, outside which a pole is far enough, and the same for cells even in ln nu; and the largest error that is
    predicted from all these.
    """

    tolerance: float
    near_radius: float
    far_radius: float
    exponential: FloatArray
    axis: float
    axis_in_log: float
    predicted_error: float


def regions(tolerance: float, plinth: bool = False) -> Regions:
    """The regions for a tolerance.  Raises InputError for one that cannot be met.

    With plinth removal a difference of two values counts, whose relative error is up to seven times larger where
    an error falls as 1/|z|^6; the core formulas carry that down to 2e-6.
    """
    smallest = SMALLEST_WITH_PLINTH if plinth else SMALLEST_TOLERANCE
    if not smallest <= tolerance <= LARGEST_TOLERANCE:
        what = "cannot be met with plinth removal" if plinth else "cannot be met"
        raise InputError(problem("tolerance", what, expected=f"{smallest:g} to {LARGEST_TOLERANCE:g}", found=tolerance))
    return _regions(float(tolerance), float(tolerance / 14.0 if plinth else tolerance))


@lru_cache(maxsize=64)
def _regions(tolerance: float, inner: float) -> Regions:
    near = max((_NEAR_COEFFICIENT / FORMULA_SHARE / inner) ** (1.0 / 12.0), _SMALLEST_NEAR)
    far = max((_FAR_COEFFICIENT / FORMULA_SHARE / inner) ** 0.25, _SMALLEST_FAR, near)
    formula_error = max(_FAR_COEFFICIENT / far**4, _NEAR_COEFFICIENT / near**12)
    axis = axis_for(CELL_SHARE * inner)
    predicted = formula_error + interpolation_error(axis) + TAIL_SHARE * inner
    axis_in_log = axis_for(CELL_SHARE * inner / WORSE_IN_LOG)
    return Regions(inner, near, far, exponential_radii(inner), axis, axis_in_log, predicted * tolerance / inner)


def exponential_radii(tolerance: float) -> FloatArray:
    """By binary exponent e of y, `kernels.node_line.SMALLEST_EXPONENT` and up: `exponential_radius` of 2^(e - 1), the
    smallest y with that exponent, (n_e,).
    """
    from opacity.kernels.node_line import LARGEST_EXPONENT, SMALLEST_EXPONENT

    exponents = range(SMALLEST_EXPONENT, LARGEST_EXPONENT + 1)
    return np.array([exponential_radius(2.0 ** (e - 1), tolerance) for e in exponents])


def exponential_radius(y: float, tolerance: float) -> float:
    """The x beyond which exp(-x2) is below `TAIL_SHARE` of the tolerance times the Lorentz wing y / (sqrt(pi) x2)."""
    level = math.log(1.0 / (y * TAIL_SHARE * tolerance)) + 0.6
    u = max(level, 1.0)
    for _ in range(4):
        u = max(level + math.log(u), 1.0)
    return math.sqrt(u)


def interpolation_error(axis: float) -> float:
    """Largest error of a Lorentz profile, relative to itself at the same point, when it is interpolated at the roots
    of T_8 on -1..1 and its pole z lies on the ellipse about -1 and 1 with half-axis `axis`.

    The interpolant of 1/(x - z) misses it by T_8(x)/T_8(z) of itself (its numerator vanishes at the roots, and the
    product with x - z at z); a Lorentz profile is the imaginary part.  Largest for poles near the real axis.
    """
    angle = np.concatenate([np.geomspace(1e-6, 1e-2, 12), np.linspace(0.02, 0.5 * math.pi, 60)])
    z = axis * np.cos(angle) + 1j * math.sqrt(axis * axis - 1.0) * np.sin(angle)
    x = np.cos(np.linspace(0.0, math.pi, 401))[:, None]
    chebyshev = np.polynomial.chebyshev.Chebyshev.basis(_NODES)
    profile = 1.0 / (x - z)
    return float(np.max(np.abs(np.imag(profile * chebyshev(x) / chebyshev(z)) / np.imag(profile))))


def axis_for(error: float) -> float:
    """The smallest half-axis (to 0.1 %) whose `interpolation_error` is within `error`."""
    low, high = 1.0, 2.0
    while interpolation_error(high) > error:
        low, high = high, 2.0 * high
    while high - low > 1e-3 * low:
        middle = 0.5 * (low + high)
        low, high = (middle, high) if interpolation_error(middle) > error else (low, middle)
    return high
