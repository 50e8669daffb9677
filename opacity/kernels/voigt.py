"""The Voigt function K(x, y) = Re w(x + iy), w the Faddeeva function, added along stretches of a grid.

Four formulas, each where it is accurate; `cross_sections.tolerance` says where that is.
All of them add   max(amplitude K((nu - centre) scale, y) - plinth, 0)   to `out` for the points first <= i < last.

far    Gauss-Hermite quadrature of the Voigt integral with 2 points: relative error 2.7 / |z|^4
near   the same with 6 points: relative error 600 / |z|^12 for |z| >= 5
core   Weideman 1994 (SIAM J. Numer. Anal. 31, 1497), 24 terms: 5e-8 for y >= 0.05, |x| <= 7.5
narrow K = exp(y2 - x2) cos 2xy - 2/sqrt(pi) Im D(x + iy), with Dawson's function D expanded in y to the fifth
       order about the real axis from a table: 3e-8 for y <= 0.05, |x| <= 10, however small y
The exponential that quadrature misses at small y is the caller's to avoid: `near` and `far` only beyond
the x where exp(-x2) sqrt(pi) x2 / y is below the tolerance.  z = x + iy throughout.
The loops count unsigned: with a signed index, which could be negative, they do not vectorise (a factor of four).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import dawsn

from opacity.kernels.jit import jit

Array = NDArray[np.float64]

INV_SQRT_PI = 1.0 / math.sqrt(math.pi)
WEIDEMAN_TERMS = 24
NARROW_Y = 0.05
NARROW_X = 10.0
_PER_UNIT = 64


def weideman_coefficients(terms: int) -> tuple[Array, float]:
    """Coefficients a_1..a_N of Weideman's rational series, (N,), lowest power first, and its length L."""
    points = 2 * terms
    length = math.sqrt(terms / math.sqrt(2.0))
    angle = np.arange(-points + 1, points) * math.pi / points
    t = length * np.tan(0.5 * angle)
    samples = np.concatenate([[0.0], np.exp(-t * t) * (length * length + t * t)])
    series = np.real(np.fft.fft(np.fft.fftshift(samples))) / (2 * points)
    return np.ascontiguousarray(series[1 : terms + 1]), length


def dawson_derivatives() -> Array:
    """D', D'', ... D^(7) of Dawson's function at multiples of 1/64 up to 10, (641, 7).

    By the recurrence D^(n+1) = -2 x D^(n) - 2 n D^(n-1), D' = 1 - 2 x D.
    """
    x = np.arange(int(NARROW_X * _PER_UNIT) + 1) / _PER_UNIT
    table = np.empty((x.size, 8))
    table[:, 0] = dawsn(x)
    table[:, 1] = 1.0 - 2.0 * x * table[:, 0]
    for n in range(1, 7):
        table[:, n + 1] = -2.0 * x * table[:, n] - 2.0 * n * table[:, n - 1]
    return np.ascontiguousarray(table[:, 1:])


_WEIDEMAN, _LENGTH = weideman_coefficients(WEIDEMAN_TERMS)
_DAWSON = dawson_derivatives()
_T, _W = np.polynomial.hermite.hermgauss(6)
_T1, _T2, _T3 = (float(t * t) for t in _T[3:])
_W1, _W2, _W3 = (float(2.0 * w / math.sqrt(math.pi)) for w in _W[3:])


@jit
def add_far(
    out: Array, nu: Array, first: int, last: int, centre: float, scale: float, y: float, amplitude: float, plinth: float
) -> None:
    """Gauss-Hermite with 2 points at t = +-1/sqrt(2): K = y/sqrt(pi) A / (A^2 - 2 x2), A = x2 + y2 + 1/2."""
    shift = y * y + 0.5
    factor = amplitude * y * INV_SQRT_PI
    for i in range(np.uint64(first), np.uint64(last)):
        x = (nu[i] - centre) * scale
        x2 = x * x
        a = x2 + shift
        out[i] += max(factor * a / (a * a - 2.0 * x2) - plinth, 0.0)


@jit
def add_near(
    out: Array, nu: Array, first: int, last: int, centre: float, scale: float, y: float, amplitude: float, plinth: float
) -> None:
    """Gauss-Hermite with 6 points, +-t_k in pairs: w_k A_k / D_k, A_k = x2 + y2 + t2, D_k = A_k^2 - 4 t2 x2."""
    y2 = y * y
    factor = amplitude * y * INV_SQRT_PI
    for i in range(np.uint64(first), np.uint64(last)):
        x = (nu[i] - centre) * scale
        x2 = x * x
        r2 = x2 + y2
        a1 = r2 + _T1
        a2 = r2 + _T2
        a3 = r2 + _T3
        d1 = a1 * a1 - 4.0 * _T1 * x2
        d2 = a2 * a2 - 4.0 * _T2 * x2
        d3 = a3 * a3 - 4.0 * _T3 * x2
        d23 = d2 * d3
        value = (_W1 * a1 * d23 + d1 * (_W2 * a2 * d3 + _W3 * a3 * d2)) / (d1 * d23)
        out[i] += max(factor * value - plinth, 0.0)


@jit
def add_core(
    out: Array, nu: Array, first: int, last: int, centre: float, scale: float, y: float, amplitude: float, plinth: float
) -> None:
    """Weideman: w = 2 p(Z)/(L - iz)^2 + 1/(sqrt(pi)(L - iz)), Z = (L + iz)/(L - iz), p by Clenshaw's recurrence."""
    ly = _LENGTH + y
    for i in range(np.uint64(first), np.uint64(last)):
        x = (nu[i] - centre) * scale
        inverse = 1.0 / (ly * ly + x * x)
        z_re = ((_LENGTH - y) * ly - x * x) * inverse
        z_im = 2.0 * _LENGTH * x * inverse
        s = z_re + z_re
        q = z_re * z_re + z_im * z_im
        b1 = _WEIDEMAN[WEIDEMAN_TERMS - 1]
        b2 = 0.0
        for n in range(WEIDEMAN_TERMS - 2, 0, -1):
            b0 = _WEIDEMAN[n] + s * b1 - q * b2
            b2 = b1
            b1 = b0
        p_re = _WEIDEMAN[0] - q * b2 + z_re * b1
        p_im = z_im * b1
        r_re = ly * inverse
        r_im = x * inverse
        value = 2.0 * (p_re * (r_re * r_re - r_im * r_im) - p_im * 2.0 * r_re * r_im) + INV_SQRT_PI * r_re
        out[i] += max(amplitude * value - plinth, 0.0)


@jit
def add_narrow(
    out: Array, nu: Array, first: int, last: int, centre: float, scale: float, y: float, amplitude: float, plinth: float
) -> None:
    """Small y: exp(y2 - x2) cos 2xy - 2/sqrt(pi) (y D' - y3 D'''/6 + y5 D^(5)/120) at |x|, D by Taylor from a table."""
    y2 = y * y
    top = _DAWSON.shape[0] - 1
    for i in range(np.uint64(first), np.uint64(last)):
        x = abs((nu[i] - centre) * scale)
        k = min(int(x * _PER_UNIT + 0.5), top)
        h = x - k / _PER_UNIT
        d1, d2, d3, d4 = _DAWSON[k, 0], _DAWSON[k, 1], _DAWSON[k, 2], _DAWSON[k, 3]
        d5, d6, d7 = _DAWSON[k, 4], _DAWSON[k, 5], _DAWSON[k, 6]
        first_order = d1 + h * (d2 + h * (0.5 * d3 + h * (d4 / 6.0 + h * d5 / 24.0)))
        third_order = d3 + h * (d4 + h * (0.5 * d5 + h * d6 / 6.0))
        fifth_order = d5 + h * (d6 + 0.5 * h * d7)
        wing = y * (first_order - y2 * (third_order / 6.0 - y2 * fifth_order / 120.0))
        value = math.exp(y2 - x * x) * math.cos(2.0 * x * y) - 2.0 * INV_SQRT_PI * wing
        out[i] += max(amplitude * value - plinth, 0.0)
