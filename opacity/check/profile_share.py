"""Integrals of Voigt profiles between limits, and what sampling on a grid makes of them."""

from __future__ import annotations

import math

import numpy as np
from scipy.special import wofz

from opacity.cross_sections.exact import SQRT_LN2, voigt_profile
from opacity.cross_sections.prepare import NodeLines
from opacity.grids import FloatArray

_FAR = 6.0
_T, _W = np.polynomial.hermite.hermgauss(6)
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(48)
MAX_HARMONICS = 200


def upper_tail(x: FloatArray, y: FloatArray) -> FloatArray:
    """Integral of K(t, y)/sqrt(pi) from x to infinity, (n,): 1/2 at x = 0, 1 at -infinity.

    Beyond |x| = 6 the Voigt integral by Gauss-Hermite with 6 points, of which each term is an arc tangent
    (relative error 2e-7); inside, Gauss-Legendre with 48 points of wofz up to there.
    """
    distance = np.abs(x)
    outer = np.maximum(distance, _FAR)
    tail = np.zeros_like(distance)
    for t, weight in zip(_T, _W, strict=True):
        tail += weight / math.sqrt(math.pi) * np.arctan2(y, outer - t) / math.pi
    inside = np.flatnonzero(distance < _FAR)
    if inside.size:
        half = 0.5 * (_FAR - distance[inside])
        points = distance[inside][:, None] + half[:, None] * (_NODES + 1.0)
        values = wofz(points + 1j * y[inside][:, None]).real @ _WEIGHTS
        tail[inside] += half * values / math.sqrt(math.pi)
    return np.where(x >= 0.0, tail, 1.0 - tail)


def share_between(node: NodeLines, lower: FloatArray, upper: FloatArray) -> FloatArray:
    """Share of each line's profile between two wavenumbers, (n_lines,); 0 where `upper` <= `lower`."""
    scale = SQRT_LN2 / node.doppler
    y = node.lorentz * scale
    start, stop = (lower - node.centre) * scale, (upper - node.centre) * scale
    # The profile is even: below its centre the mirrored limits keep the digits that 1 - tail would lose.
    mirrored = stop < 0.0
    start, stop = np.where(mirrored, -stop, start), np.where(mirrored, -start, stop)
    share = upper_tail(start, y) - upper_tail(stop, y)
    return np.where(upper > lower, np.maximum(share, 0.0), 0.0)


def weighted_share_between(node: NodeLines, lower: FloatArray, upper: FloatArray, chi: FloatArray) -> FloatArray:
    """As `share_between`, of the profile times chi factors, a table as in `kernels.chi`, (n_lines,).

    A row without a rate is a share of the profile itself; the others are integrated in the logarithm of the distance.
    """
    total = np.zeros(node.centre.size)
    inner = 0.0
    for limit, factor, rate in chi:
        for side in (-1.0, 1.0):
            ends = side * (lower - node.centre), side * (upper - node.centre)
            start = np.maximum(np.minimum(*ends), inner)
            stop = np.minimum(np.maximum(*ends), limit)
            if rate == 0.0:
                between = np.sort(np.stack([node.centre + side * start, node.centre + side * stop]), axis=0)
                total += factor * np.where(stop > start, share_between(node, *between), 0.0)
            else:
                total += factor * _decaying_share(node, start, stop, rate)
        inner = limit
    return np.where(upper > lower, total, 0.0)


def _decaying_share(node: NodeLines, start: FloatArray, stop: FloatArray, rate: float) -> FloatArray:
    """Integral of the profile times exp(-rate distance) between two distances above 0, by 48-point Gauss-Legendre."""
    found = np.zeros(node.centre.size)
    here = np.flatnonzero(stop > start)
    if not here.size:
        return found
    span = np.log(stop[here] / start[here])[:, None]
    distance = start[here][:, None] * np.exp(0.5 * span * (_NODES + 1.0))
    profile = voigt_profile(distance, node.doppler[here][:, None], node.lorentz[here][:, None])
    found[here] = (profile * np.exp(-rate * distance) * distance * 0.5 * span) @ _WEIGHTS
    return found


def spacing_at(wavenumber: FloatArray, at: FloatArray) -> FloatArray:
    """The grid's spacing (cm-1) around each wavenumber, that of the nearest end outside it."""
    gaps = np.diff(wavenumber)
    place = np.clip(np.searchsorted(wavenumber, at) - 1, 0, gaps.size - 1)
    return np.asarray(gaps[place])


def sampling_risk(node: NodeLines, wavenumber: FloatArray) -> FloatArray:
    """How far, relative to its strength, the sum over grid points can be off a line's integral, (n_lines,), 0 to 1.

    By Poisson's summation the sum over points of spacing h is the integral plus harmonics whose first has the
    amplitude 2 exp(-2 pi gamma/h - pi^2 alpha^2/(ln2 h^2)), gamma and alpha the HWHM.
    """
    if wavenumber.size < 2:
        return np.ones(node.centre.size)
    step = spacing_at(wavenumber, node.centre)
    return np.minimum(2.0 * np.exp(-_decay(node, step, 1)), 1.0)


def _decay(node: NodeLines, step: FloatArray, harmonic: int) -> FloatArray:
    k = harmonic / step
    return np.asarray(2.0 * math.pi * node.lorentz * k + (math.pi * node.doppler * k) ** 2 / math.log(2.0))


def sampling_offset(node: NodeLines, start: float, step: float) -> FloatArray:
    """Sum over the points start + i step, times step, less the integral, of each whole profile, (n_lines,).

    NaN where more than 200 harmonics would count: the step is hopeless for the line.
    """
    steps = np.full(node.centre.size, step)
    phase = 2.0 * math.pi * np.mod((node.centre - start) / step, 1.0)
    total = np.zeros(node.centre.size)
    for k in range(1, MAX_HARMONICS + 1):
        decay = _decay(node, steps, k)
        count = np.flatnonzero(decay < 40.0)
        if not count.size:
            break
        total[count] += 2.0 * np.exp(-decay[count]) * np.cos(k * phase[count])
    return np.where(_decay(node, steps, MAX_HARMONICS) < 20.0, np.nan, total)
