"""The slow account of a node's lines, written to be read: numpy and scipy's wofz, line by line in arrays.

The kernels of `opacity.kernels.closure` are held against it.
"""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
from scipy.special import wofz

from opacity.check.closure import ClosureSums
from opacity.cross_sections.exact import SQRT_LN2, chi_factors, voigt_profile
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


def closure_sums(
    node: NodeLines,
    wavenumber: FloatArray,
    cutoff: float,
    plinth: bool,
    uniform: bool,
    chi: FloatArray | None = None,
) -> ClosureSums:
    """What the lines of a node, or some of them, add up to on a grid."""
    share = share_within(node, float(wavenumber[0]), float(wavenumber[-1]), cutoff, plinth, chi)
    weighed = node.strength * (share > 0.0)
    risk = sampling_risk(node, wavenumber)
    inside = (node.centre > wavenumber[0]) & (node.centre < wavenumber[-1])
    return ClosureSums(
        strength=float(np.sum(node.strength)),
        in_reach=float(np.sum(node.strength * share)),
        inside=float(np.sum(weighed * inside)),
        risk=float(np.sum(weighed * risk * inside)),
        sampling=_predicted_sampling(node, wavenumber, inside) if uniform else None,
        allowance=_ends_allowance(node, wavenumber, cutoff, risk, chi),
    )


def share_within(
    node: NodeLines, first: float, last: float, cutoff: float, plinth: bool, chi: FloatArray | None = None
) -> FloatArray:
    """Share of each line's profile, times its chi factors, that lies inside its cut-off and between two wavenumbers,
    (n_lines,).
    """
    lower = np.maximum(node.wavenumber - cutoff, first)
    upper = np.minimum(node.wavenumber + cutoff, last)
    if plinth:
        # The cut-off counts from the unshifted wavenumber; further than it from the centre the floor holds.
        lower, upper = np.maximum(lower, node.centre - cutoff), np.minimum(upper, node.centre + cutoff)
    if chi is None or not len(chi):
        share = share_between(node, lower, upper)
    else:
        share = weighted_share_between(node, lower, upper, chi)
    if plinth:
        at = np.full(node.centre.size, cutoff)
        edge = chi_factors(chi, at) * _at_distance(node, at)
        share = np.maximum(share - edge * np.maximum(upper - lower, 0.0), 0.0)
    return share


def _predicted_sampling(node: NodeLines, wavenumber: FloatArray, inside: np.ndarray) -> float | None:
    """What sampling on an even grid adds to the sum, cm/molecule; None where it can't be predicted for some line."""
    offset = sampling_offset(node, float(wavenumber[0]), float(wavenumber[1] - wavenumber[0]))[inside]
    if not np.all(np.isfinite(offset[node.strength[inside] > 0.0])):
        return None
    return float(np.sum(node.strength[inside] * np.nan_to_num(offset)))


def _at_distance(node: NodeLines, distance: FloatArray) -> FloatArray:
    """Each line's profile (per cm-1) at a distance from its centre, (n_lines,)."""
    return voigt_profile(distance, node.doppler, node.lorentz)


def _ends_allowance(
    node: NodeLines, wavenumber: FloatArray, cutoff: float, risk: FloatArray, chi: FloatArray | None
) -> float:
    """How far the trapezoid sum may be off at the cut-off's steps and at lines across the grid's ends, cm/molecule.

    Half a cell of the profile's value at each cut.  At the grid's ends the terms of Euler and Maclaurin's formula,
    h^2/12 of the first and h^4/720 of the third derivative, with room to spare; lines of which an end cuts the
    unresolved core count whole.
    """
    if wavenumber.size < 2:
        return float(np.sum(node.strength))
    step = spacing_at(wavenumber, node.centre)
    at_cut = np.zeros(node.centre.size)
    for side in (-1.0, 1.0):
        edge = node.wavenumber + side * cutoff
        within = (edge >= wavenumber[0]) & (edge <= wavenumber[-1])
        distance = np.abs(edge - node.centre)
        at_cut += np.where(within, 0.5 * step * chi_factors(chi, distance) * _at_distance(node, distance), 0.0)
    near_end = np.zeros(node.centre.size)
    for end in (wavenumber[0], wavenumber[-1]):
        distance = np.abs(node.centre - end)
        first, third = voigt_derivatives(distance, node.doppler, node.lorentz)
        term = step**2 / 12.0 * np.abs(first) + step**4 / 360.0 * np.abs(third)
        near_end += np.minimum(1.1 * term, 1.0)
        near_end += np.where(distance < 5.0 * np.maximum(node.doppler + node.lorentz, step), risk, 0.0)
    return float(np.sum(node.strength * (at_cut + near_end + _chi_steps(node, wavenumber, cutoff, step, chi))))


def _chi_steps(
    node: NodeLines, wavenumber: FloatArray, cutoff: float, step: FloatArray, chi: FloatArray | None
) -> FloatArray:
    """Jumps and bends where rows of chi factors meet, inside grid and cut-off, (n_lines,)."""
    found = np.zeros(node.centre.size)
    for inner, outer in pairwise([] if chi is None else chi):
        limit = inner[0]
        before, after = (row[1] * np.exp(-row[2] * limit) for row in (inner, outer))
        bend = abs(outer[2] * after - inner[2] * before)
        height = _at_distance(node, np.full(node.centre.size, limit))
        for side in (-1.0, 1.0):
            place = node.centre + side * limit
            within = (place >= wavenumber[0]) & (place <= wavenumber[-1]) & (np.abs(place - node.wavenumber) <= cutoff)
            found += np.where(within, step * height * (0.6 * abs(after - before) + 0.1 * step * bend), 0.0)
    return found


def voigt_derivatives(distance: FloatArray, doppler: FloatArray, lorentz: FloatArray) -> tuple[FloatArray, FloatArray]:
    """First and third derivative of the Voigt profile with respect to wavenumber, cm2 and cm4, (n,) each.

    From w' = -2 z w + 2i/sqrt(pi) and its derivatives (Abramowitz & Stegun 7.1.20), z = x + iy; beyond |z| = 8, where
    these lose their digits, from w = i/pi times the integral of exp(-t2)/(z - t) by Gauss-Hermite with 40 points.
    """
    scale = SQRT_LN2 / doppler
    z = scale * (distance + 1j * lorentz)
    w = wofz(z)
    first = -2.0 * z * w + 2j / math.sqrt(math.pi)
    second = -2.0 * w - 2.0 * z * first
    third = -4.0 * first - 2.0 * z * second
    t, weights = np.polynomial.hermite.hermgauss(40)
    poles = z[:, None] - t
    far = np.abs(z) > 8.0
    first = np.where(far, -1j / math.pi * (weights / poles**2).sum(axis=1), first)
    third = np.where(far, -6j / math.pi * (weights / poles**4).sum(axis=1), third)
    height = scale / math.sqrt(math.pi)
    return height * scale * first.real, height * scale**3 * third.real
