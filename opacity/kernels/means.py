"""Sums over an evenly spaced spectrum that its Planck and Rosseland means are made of."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit

Array = NDArray[np.float64]

BLOCK = 32
"""Points between which the weights are interpolated, at most: they change over hundreds of cm-1, the spectrum at each
point."""
WIDEST = 2e-3
"""The largest change of c2 nu / T in which they are: its square over 12 is the relative error of a weight."""

_NEARLY_0 = 1e-320


@jit
def _planck(x: float, start: float) -> tuple[float, float]:
    """Planck's function and its slope in T at x = c2 nu / T, both without their constants and times exp(start)."""
    if x <= 0.0:
        return 0.0, 0.0
    share = -math.expm1(-x)
    planck = x * x * x * math.exp(start - x) / share
    return planck, planck * x / share


@jit
def _add_block(totals: Array, sigma: Array, planck: float, planck_step: float, slope: float, slope_step: float) -> None:
    """The sums over one block, its weights linear from point to point."""
    emitted, planck_sum, resistance, slope_sum = 0.0, 0.0, 0.0, 0.0
    for i in range(sigma.size):
        b, d = planck + i * planck_step, slope + i * slope_step
        emitted += b * sigma[i]
        planck_sum += b
        # Without a weight there is nothing to add, even where sigma is 0.
        resistance += d / max(sigma[i], _NEARLY_0)
        slope_sum += d
    totals[0] += emitted
    totals[1] += planck_sum
    totals[2] += resistance
    totals[3] += slope_sum


@jit
def add_mean_sums(sums: Array, sigma: Array, first: float, step: float, scale: float, start: float) -> None:
    """Add sums over points of B sigma, B, dB/dT / sigma and dB/dT times the widths of their cells to `sums` (4,).

    Point i lies at first + i step (cm-1); the cells of both ends are half as wide.  `scale` is c2 / T (cm); `start` is
    scale times the lowest wavenumber of a grid, so that no temperature is too low.  Where sigma is 0 and has weight
    the third sum is infinite, or too large for what it is compared with to matter.
    """
    size, block = sigma.size, BLOCK
    if scale * step * BLOCK > WIDEST:
        block = max(int(WIDEST / (scale * step)), 1)
    totals = np.zeros(4)
    for low in range(0, size, block):
        high = min(low + block, size)
        planck, slope = _planck(scale * (first + low * step), start)
        end_planck, end_slope = _planck(scale * (first + high * step), start)
        planck_step, slope_step = (end_planck - planck) / (high - low), (end_slope - slope) / (high - low)
        _add_block(totals, sigma[low:high], planck, planck_step, slope, slope_step)
    for end in (0, size - 1):
        planck, slope = _planck(scale * (first + end * step), start)
        _add_block(totals, sigma[end : end + 1], -0.5 * planck, 0.0, -0.5 * slope, 0.0)
    if math.isnan(totals[2]):  # infinite, less half of what is infinite at an end
        totals[2] = np.inf
    sums += step * totals
