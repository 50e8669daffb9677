"""The Voigt function's integral, value and derivatives at a point, for accounts of lines and not for spectra.

T(x, y) is the integral of K(t, y)/sqrt(pi) from x to infinity: 1/2 at x = 0, 1 at -infinity; z = x + iy.  Beyond
|z| = 6 all follow from one asymptotic series (Abramowitz & Stegun 7.1.23, integrated and differentiated term by term),

    w(z) = i/(sqrt(pi) z) sum_k m_k z^-2k,   m_k = (2k - 1)!!/2^k,   T = [arg z - Im sum_k>0 m_k/(2k) z^-2k] / pi,

cut where the relative error is below 8e-8 (derivatives: 2e-4); it leaves out the exponential, below 3e-16.  Nearer the
formulas of `voigt` serve (5e-8), for T under Gauss-Legendre with 48 points up to x = 6, and for derivatives Weideman's
series with 48 terms (1e-12 of the largest).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit
from opacity.kernels.voigt import INV_SQRT_PI, NARROW_Y, add_core, add_narrow, weideman_coefficients

Array = NDArray[np.float64]

FAR = 6.0
_FAR2 = FAR * FAR
VERY_FAR = 100.0
"""|z| beyond which two terms of the series are good to 2e-11."""
_VERY_FAR2 = VERY_FAR * VERY_FAR
_FLAT = 0.05
"""y/x below which arg z is its series, cut after the ninth power: 1e-14."""
_M6 = 162.421875
_INV_PI = 1.0 / math.pi
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(48)
_TERMS = 48
_WEIDEMAN, _LENGTH = weideman_coefficients(_TERMS)


@jit
def _inverse_square(x: float, y: float, r2: float) -> complex:
    """1/z^2 where |z|^2 = r2."""
    inverse = 1.0 / r2
    re, im = x * inverse, -y * inverse
    return complex(re * re - im * im, 2.0 * re * im)


@jit
def _angle(x: float, y: float) -> float:
    """arg z for x >= 0."""
    if y < _FLAT * x:
        t = y / x
        t2 = t * t
        return t * (1.0 - t2 * (1.0 / 3.0 - t2 * (0.2 - t2 * (1.0 / 7.0 - t2 / 9.0))))
    return math.atan2(y, x)


@jit
def _far_tail(x: float, y: float, r2: float) -> float:
    """T for x >= 0 by the series."""
    u = _inverse_square(x, y, r2)
    if r2 > _VERY_FAR2:
        series = u * (0.25 + 0.1875 * u)
    else:
        series = u * (0.25 + u * (0.1875 + u * (0.3125 + u * (0.8203125 + u * 2.953125))))
    return (_angle(x, y) - series.imag) * _INV_PI


@jit
def _near_tail(x: float, y: float) -> float:
    """T for 0 <= x < 6 and |z| < 6: 48 points up to 6, and the tail from there."""
    half = 0.5 * (FAR - x)
    points, values = x + half * (_NODES + 1.0), np.zeros(_NODES.size)
    if y < NARROW_Y:
        add_narrow(values, points, 0, points.size, 0.0, 1.0, y, 1.0, 0.0)
    else:
        add_core(values, points, 0, points.size, 0.0, 1.0, y, 1.0, 0.0)
    total = 0.0
    for i in range(values.size):
        total += values[i] * _WEIGHTS[i]
    return _far_tail(FAR, y, _FAR2 + y * y) + half * total * INV_SQRT_PI


@jit
def tail(x: float, y: float) -> float:
    """T(x, y); relative error below 2e-7 for x >= 0, below 0 that of 1 - T(-x, y)."""
    distance = abs(x)
    r2 = distance * distance + y * y
    found = _near_tail(distance, y) if r2 < _FAR2 else _far_tail(distance, y, r2)
    return found if x >= 0.0 else 1.0 - found


@jit
def share(start: float, stop: float, y: float) -> float:
    """Integral of K(t, y)/sqrt(pi) from one x to another, 0 where `stop` <= `start`.

    K is even: below the centre the mirrored limits keep the digits that 1 - T would lose.
    """
    if not stop > start:
        return 0.0
    if stop < 0.0:
        start, stop = -stop, -start
    return max(tail(start, y) - tail(stop, y), 0.0)


@jit
def _near_value(x: float, y: float) -> float:
    out, at = np.zeros(1), np.full(1, x)
    if y < NARROW_Y:
        add_narrow(out, at, 0, 1, 0.0, 1.0, y, 1.0, 0.0)
    else:
        add_core(out, at, 0, 1, 0.0, 1.0, y, 1.0, 0.0)
    return float(out[0])


@jit
def value(x: float, y: float) -> float:
    """K(x, y), relative error below 2e-7."""
    r2 = x * x + y * y
    if r2 < _FAR2:
        return _near_value(x, y)
    u = _inverse_square(x, y, r2)
    if r2 > _VERY_FAR2:
        series = 1.0 + u * (0.5 + u * 0.75)
    else:
        series = 1.0 + u * (0.5 + u * (0.75 + u * (1.875 + u * (6.5625 + u * (29.53125 + u * _M6 * (1.0 + 6.5 * u))))))
    return INV_SQRT_PI * (y * series.real - x * series.imag) / r2


@jit
def very_far(x: float, y: float) -> tuple[float, float]:
    """T and K for x >= VERY_FAR, both from one division."""
    r2 = x * x + y * y
    u = _inverse_square(x, y, r2)
    series = 1.0 + u * (0.5 + u * 0.75)
    integral = _angle(x, y) - (u * (0.25 + 0.1875 * u)).imag
    return integral * _INV_PI, INV_SQRT_PI * (y * series.real - x * series.imag) / r2


@jit
def _near_derivatives(x: float, y: float) -> tuple[float, float]:
    """From w' = -2 z w + 2i/sqrt(pi) and its derivatives (Abramowitz & Stegun 7.1.20), w by Weideman's series."""
    z = complex(x, y)
    below = complex(_LENGTH + y, -x)
    ratio = complex(_LENGTH - y, x) / below
    series = complex(0.0, 0.0)
    for n in range(_TERMS - 1, -1, -1):
        series = series * ratio + _WEIDEMAN[n]
    w = (2.0 * series / below + INV_SQRT_PI) / below
    first = -2.0 * z * w + complex(0.0, 2.0 * INV_SQRT_PI)
    second = -2.0 * w - 2.0 * z * first
    third = -4.0 * first - 2.0 * z * second
    return first.real, third.real


@jit
def derivatives(x: float, y: float) -> tuple[float, float]:
    """First and third derivative of K(x, y) with respect to x; beyond |z| = 6 relative error below 2e-4."""
    r2 = x * x + y * y
    if r2 < _FAR2:
        return _near_derivatives(x, y)
    u = _inverse_square(x, y, r2)
    if r2 > _VERY_FAR2:
        first = u * (1.0 + 1.5 * u)
        third = u * u * (6.0 + 30.0 * u)
    else:
        first = u * (1.0 + u * (1.5 + u * (3.75 + u * (13.125 + u * (59.0625 + u * 324.84375)))))
        third = u * u * (6.0 + u * (30.0 + u * (157.5 + u * (945.0 + u * (6496.875 + u * 50675.625)))))
    return INV_SQRT_PI * first.imag, INV_SQRT_PI * third.imag
