"""From the tolerance to everything that follows from it: where each formula of the profile serves.

A line's error is bounded relative to that line at every point, and all lines add positive values, so the sum's
relative error is within the largest of the lines' errors.
"""

from __future__ import annotations

from dataclasses import dataclass

from opacity.errors import InputError, problem

SMALLEST_TOLERANCE = 1e-6
SMALLEST_WITH_PLINTH = 2e-6
LARGEST_TOLERANCE = 0.1

# Relative errors of Gauss-Hermite quadrature, measured against wofz and checked in the tests:
# 2 points 2.7 / |z|^4 for |z| >= 7, 6 points 600 / |z|^12 for |z| >= 5; half of the tolerance goes to them.
_FAR_COEFFICIENT = 2.7
_NEAR_COEFFICIENT = 600.0
_SMALLEST_FAR = 7.0
_SMALLEST_NEAR = 5.0


@dataclass(frozen=True)
class Regions:
    """Radii |z| = sqrt(x2 + y2) beyond which 6-point and 2-point quadrature meet the tolerance."""

    tolerance: float
    near_radius: float
    far_radius: float


def regions(tolerance: float, plinth: bool = False) -> Regions:
    """The regions for a tolerance.  Raises InputError for one that cannot be met.

    With plinth removal a difference of two values counts, whose relative error is up to seven times larger where
    an error falls as 1/|z|^6; the core formulas carry that down to 2e-6.
    """
    smallest = SMALLEST_WITH_PLINTH if plinth else SMALLEST_TOLERANCE
    if not smallest <= tolerance <= LARGEST_TOLERANCE:
        what = "cannot be met with plinth removal" if plinth else "cannot be met"
        raise InputError(problem("tolerance", what, expected=f"{smallest:g} to {LARGEST_TOLERANCE:g}", found=tolerance))
    inner = tolerance / 14.0 if plinth else tolerance
    near = max((2.0 * _NEAR_COEFFICIENT / inner) ** (1.0 / 12.0), _SMALLEST_NEAR)
    far = max((2.0 * _FAR_COEFFICIENT / inner) ** 0.25, _SMALLEST_FAR)
    return Regions(inner, near, max(far, near))
