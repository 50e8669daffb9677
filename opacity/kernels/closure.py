"""What the lines of a node add up to on a grid, in one pass: how much of each profile lies in reach, what sampling
makes of its sum, and what the grid's ends and the cut-off leave open.

x = (nu - centre) scale and y as in `voigt`; a step h of the grid is s = h scale.  By Poisson's summation the sum over
points is the integral plus harmonics 2 exp(-2 pi k y/s - (pi k/s)^2) cos(k phase), k = 1, 2, ...
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.accumulate import first_not_below
from opacity.kernels.chi import chi_at
from opacity.kernels.jit import jit, jit_exact
from opacity.kernels.line_width import LOWEST_SHIFTED, voigt_half_width
from opacity.kernels.node_line import SQRT_LN2, LineColumns
from opacity.kernels.profile_tail import VERY_FAR, derivatives, share, tail, value, very_far
from opacity.kernels.voigt import INV_SQRT_PI

Array = NDArray[np.float64]

MAX_HARMONICS = 200
_NEGLIGIBLE = 32.0
"""A harmonic with a larger exponent is below 3e-14 and left out."""
_HOPELESS = 20.0
"""Where the last harmonic's exponent is smaller than this the sum is not predicted."""
_FAR2 = 1e4
_AT_ONCE = 512
"""Lines that are added up before they are added to the rest, which keeps rounding below 1e-12."""
_LOG_NODES, _LOG_WEIGHTS = np.polynomial.legendre.leggauss(48)


class Reach(NamedTuple):
    """Between which wavenumbers (cm-1) profiles count: the grid's ends, the cut-off from the unshifted wavenumber.

    With `plinth` the profile's value at the cut-off is subtracted, floor 0.
    """

    first: float
    last: float
    cutoff: float
    plinth: bool


class Centred(NamedTuple):
    """A line at a node: nu0 and centre in cm-1; x = (nu - centre) scale, y."""

    nu0: float
    centre: float
    scale: float
    y: float


class Part(NamedTuple):
    """What of a profile is in reach, and the sum of K where the cut-off cuts it inside the grid."""

    share: float
    at_cut: float


class Sampled(NamedTuple):
    """Relative to a line's integral: how far its sum over points may be off, and how far it is; NaN if not known."""

    risk: float
    offset: float


@jit
def centred(nu0: float, shift: float, lorentz: float, doppler: float, pressure: float) -> Centred:
    """A line of `LineColumns` at a pressure (bar)."""
    centre = nu0 + pressure * shift
    scale = SQRT_LN2 / (doppler * max(centre, LOWEST_SHIFTED * nu0))
    return Centred(nu0, centre, scale, pressure * lorentz * scale)


@jit
def share_within(line: Centred, reach: Reach, chi: Array) -> float:
    """Share of a profile, times its chi factors, inside cut-off and limits; less the plinth."""
    lower = max(line.nu0 - reach.cutoff, reach.first)
    upper = min(line.nu0 + reach.cutoff, reach.last)
    if reach.plinth:
        # The cut-off counts from the unshifted wavenumber; further than it from the centre the floor holds.
        lower, upper = max(lower, line.centre - reach.cutoff), min(upper, line.centre + reach.cutoff)
    if not upper > lower:
        return 0.0
    if chi.shape[0] == 0:
        found = share((lower - line.centre) * line.scale, (upper - line.centre) * line.scale, line.y)
    else:
        found = weighted_share(line, lower, upper, chi)
    if reach.plinth:
        edge = chi_at(chi, reach.cutoff) * line.scale * INV_SQRT_PI * value(reach.cutoff * line.scale, line.y)
        found = max(found - edge * (upper - lower), 0.0)
    return found


@jit
def weighted_share(line: Centred, lower: float, upper: float, chi: Array) -> float:
    """Integral of a profile times chi factors, a table as in `chi`, between two wavenumbers.

    A row without a rate is a share of the profile itself; the others are integrated in the logarithm of the distance.
    """
    total, inner = 0.0, 0.0
    for row in range(chi.shape[0]):
        limit, factor, rate = chi[row, 0], chi[row, 1], chi[row, 2]
        for side in range(2):
            start = max(lower - line.centre if side else line.centre - upper, inner)
            stop = min(upper - line.centre if side else line.centre - lower, limit)
            if not stop > start:
                continue
            if rate == 0.0:
                total += factor * (tail(start * line.scale, line.y) - tail(stop * line.scale, line.y))
            else:
                total += factor * _decaying_share(line, start, stop, rate)
        inner = limit
    return total


@jit
def _decaying_share(line: Centred, start: float, stop: float, rate: float) -> float:
    """Integral of a profile times exp(-rate distance) between distances above 0, by 48-point Gauss-Legendre."""
    half = 0.5 * math.log(stop / start)
    total = 0.0
    for i in range(_LOG_NODES.size):
        distance = start * math.exp(half * (_LOG_NODES[i] + 1.0))
        total += _LOG_WEIGHTS[i] * distance * math.exp(-rate * distance) * value(distance * line.scale, line.y)
    return total * half * line.scale * INV_SQRT_PI


@jit
def sampled(s: float, y: float, phase: float) -> Sampled:
    """What points a step s apart make of a profile; `phase` is how many steps its centre lies from a point."""
    rate, square = 2.0 * math.pi * y / s, (math.pi / s) ** 2
    if rate + square > _NEGLIGIBLE:
        return Sampled(0.0, 0.0)
    height = math.exp(-(rate + square))
    risk = min(2.0 * height, 1.0)
    if rate * MAX_HARMONICS + square * MAX_HARMONICS**2 < _HOPELESS:
        return Sampled(risk, np.nan)
    cosine = math.cos(2.0 * math.pi * (phase - math.floor(phase)))
    offset = 2.0 * height * cosine
    if 2.0 * rate + 4.0 * square > _NEGLIGIBLE:
        return Sampled(risk, offset)
    # Each height is the last one times a ratio, which itself falls by one factor; cosines by their recurrence.
    fall = math.exp(-2.0 * square)
    ratio = height * fall
    before, now = 1.0, cosine
    for _ in range(MAX_HARMONICS - 1):
        height *= ratio
        ratio *= fall
        if height < 1e-14:
            break
        before, now = now, 2.0 * cosine * now - before
        offset += 2.0 * height * now
    return Sampled(risk, offset)


@jit
def _risk(s: float, y: float) -> float:
    decay = 2.0 * math.pi * y / s + (math.pi / s) ** 2
    return min(2.0 * math.exp(-decay), 1.0) if decay < _NEGLIGIBLE else 0.0


@jit
def _part(line: Centred, reach: Reach, chi: Array) -> Part:
    """What of a profile is in reach, and its K at the cuts."""
    low, high = line.nu0 - reach.cutoff, line.nu0 + reach.cutoff
    left = (line.centre - max(low, reach.first)) * line.scale
    right = (min(high, reach.last) - line.centre) * line.scale
    if min(left, right) >= VERY_FAR and chi.shape[0] == 0 and not reach.plinth:
        left_tail, left_value = very_far(left, line.y)
        right_tail, right_value = very_far(right, line.y)
        at_cut = (left_value if low >= reach.first else 0.0) + (right_value if high <= reach.last else 0.0)
        return Part(1.0 - left_tail - right_tail, at_cut)
    at_cut = 0.0
    for edge in (low, high):
        if reach.first <= edge <= reach.last:
            at_cut += chi_at(chi, abs(edge - line.centre)) * value((edge - line.centre) * line.scale, line.y)
    return Part(share_within(line, reach, chi), at_cut)


@jit
def _ends(line: Centred, reach: Reach, at_cut: float, step: float, risk: float) -> float:
    """How far the trapezoid sum of a profile may be off at the cut-off's steps and across the grid's ends.

    Half a cell of the profile's value at each cut, `at_cut`.  At the grid's ends the terms of Euler and Maclaurin's
    formula, h^2/12 of the first and h^4/720 of the third derivative, with room to spare; lines of which an end cuts
    the unresolved core count whole.
    """
    s = step * line.scale
    found = 0.5 * s * INV_SQRT_PI * at_cut
    core = 5.0 * max(SQRT_LN2 + line.y, s)
    # So far out the profile is Lorentz's and the third derivative adds nothing; no line so broad is unresolved.
    far = _FAR2 * max(1.0, s * s)
    for end in (reach.first, reach.last):
        x = abs(end - line.centre) * line.scale
        r2 = x * x + line.y * line.y
        if r2 > far:
            found += 1.1 / (6.0 * math.pi) * s * s * x * line.y / (r2 * r2)
            continue
        first, third = derivatives(x, line.y)
        found += min(1.1 * INV_SQRT_PI * s * s * (abs(first) / 12.0 + s * s * abs(third) / 360.0), 1.0)
        if x < core:
            found += risk
    return found


@jit
def _chi_steps(line: Centred, reach: Reach, step: float, chi: Array) -> float:
    """How far the sum of a profile may be off where rows of chi factors meet: half a cell of the jump, and a twelfth of
    h^2 of the change of slope, each with room for steps that widen along the grid.
    """
    found = 0.0
    for row in range(chi.shape[0] - 1):
        limit = chi[row, 0]
        before = chi[row, 1] * math.exp(-chi[row, 2] * limit)
        after = chi[row + 1, 1] * math.exp(-chi[row + 1, 2] * limit)
        bend = abs(chi[row + 1, 2] * after - chi[row, 2] * before)
        for side in (-1.0, 1.0):
            place = line.centre + side * limit
            if reach.first <= place <= reach.last and abs(place - line.nu0) <= reach.cutoff:
                height = line.scale * INV_SQRT_PI * value(limit * line.scale, line.y)
                found += step * height * (0.6 * abs(after - before) + 0.1 * step * bend)
    return found


@jit_exact
def gap_at(nu: Array, at: float, guess: int) -> int:
    """Index of the gap of a grid that holds a wavenumber, above its lower end; that of the nearest end outside it."""
    if nu[guess] < at <= nu[guess + 1]:
        return guess
    if guess + 2 < nu.size and nu[guess + 1] < at <= nu[guess + 2]:
        return guess + 1
    return min(max(first_not_below(nu, at) - 1, 0), nu.size - 2)


@jit
def add_closure(
    sums: Array, nu: Array, lines: LineColumns, pressure: float, reach: Reach, even: bool, chi: Array
) -> None:
    """Add up what lines have in `reach`, inside the grid, of that unresolved, by sampling and open at the ends, (5,),
    cm/molecule; `check.closure.ClosureSums` says what they are.

    `nu` (n_nu,) of two points or more; sampling counts on an `even` grid alone and is NaN where it can't be predicted.
    `pressure` in bar; `chi` a table as in `chi`.
    """
    wavenumber, shift, strength, lorentz, doppler = lines
    gap, step = 0, (nu[nu.size - 1] - nu[0]) / (nu.size - 1)
    for start in range(0, wavenumber.size, _AT_ONCE):
        in_reach, inside, unresolved, sampling, allowance = 0.0, 0.0, 0.0, 0.0, 0.0
        for j in range(start, min(start + _AT_ONCE, wavenumber.size)):
            weight = strength[j]
            if weight == 0.0:
                continue
            line = centred(wavenumber[j], shift[j], lorentz[j], doppler[j], pressure)
            part = _part(line, reach, chi)
            within = reach.first < line.centre < reach.last
            if even and within:
                found = sampled(step * line.scale, line.y, (line.centre - reach.first) / step)
                risk = found.risk
                sampling += weight * found.offset
            else:
                if not even:
                    gap = gap_at(nu, line.centre, gap)
                    step = nu[gap + 1] - nu[gap]
                risk = _risk(step * line.scale, line.y)
            in_reach += weight * part.share
            if within and part.share > 0.0:
                inside += weight
                unresolved += weight * risk
            allowance += weight * _ends(line, reach, part.at_cut, step, risk)
            if chi.shape[0] > 0:
                allowance += weight * _chi_steps(line, reach, step, chi)
        sums[0] += in_reach
        sums[1] += inside
        sums[2] += unresolved
        sums[3] += sampling
        sums[4] += allowance


@jit
def strength_in_reach(lines: LineColumns, pressure: float, reach: Reach, chi: Array) -> float:
    """Sum of strengths times shares in reach, cm/molecule; arguments as those of `add_closure`."""
    wavenumber, shift, strength, lorentz, doppler = lines
    total = 0.0
    for start in range(0, wavenumber.size, _AT_ONCE):
        part = 0.0
        for j in range(start, min(start + _AT_ONCE, wavenumber.size)):
            if strength[j] != 0.0:
                line = centred(wavenumber[j], shift[j], lorentz[j], doppler[j], pressure)
                part += strength[j] * share_within(line, reach, chi)
        total += part
    return total


@jit
def resolution(nu: Array, lines: LineColumns, pressure: float) -> tuple[float, float, float]:
    """Of the lines centred on the grid: their strength, what of it the step does not resolve, and the narrowest
    half-width (cm-1), infinite without lines.
    """
    wavenumber, shift, strength, lorentz, doppler = lines
    total, unresolved, narrowest, gap = 0.0, 0.0, np.inf, 0
    for j in range(wavenumber.size):
        line = centred(wavenumber[j], shift[j], lorentz[j], doppler[j], pressure)
        if not nu[0] <= line.centre <= nu[nu.size - 1]:
            continue
        risk = 1.0
        if nu.size > 1:
            gap = gap_at(nu, line.centre, gap)
            risk = _risk((nu[gap + 1] - nu[gap]) * line.scale, line.y)
        total += strength[j]
        unresolved += strength[j] * risk
        narrowest = min(narrowest, voigt_half_width(SQRT_LN2, line.y) / line.scale)
    return total, unresolved, narrowest
