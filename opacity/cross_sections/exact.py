"""The truth: the direct sum of Voigt profiles with scipy.special.wofz, written to be read, not to be fast."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import wofz

from opacity.cross_sections.prepare import NodeLines
from opacity.grids import FloatArray

SQRT_LN2 = math.sqrt(math.log(2.0))
PAIRS_AT_ONCE = 20_000
"""Pairs of a point and a line that are computed at once."""


def voigt_profile(distance: FloatArray, doppler: FloatArray | float, lorentz: FloatArray | float) -> FloatArray:
    """V = sqrt(ln2/pi)/alpha Re w(x + iy), x = sqrt(ln2) distance/alpha, y = sqrt(ln2) gamma/alpha; per cm-1.

    `distance` from the centre (n,), `doppler` (alpha) and `lorentz` (gamma) HWHM, numbers or (n,), all cm-1.
    """
    x = SQRT_LN2 * distance / doppler
    y = SQRT_LN2 * lorentz / doppler
    return np.asarray(SQRT_LN2 / math.sqrt(math.pi) / doppler * wofz(x + 1j * y).real)


def chi_factors(chi: FloatArray | None, distance: FloatArray) -> FloatArray:
    """The chi factor at distances (cm-1) from the centre, (n,), by a table as in `kernels.chi`; 1 without one."""
    if chi is None or not len(chi):
        return np.ones_like(distance)
    row = np.searchsorted(chi[:, 0], np.abs(distance), side="left")
    return np.asarray(chi[row, 1] * np.exp(-chi[row, 2] * np.abs(distance)))


def exact_spectrum(
    node: NodeLines, wavenumber: FloatArray, cutoff: float, plinth: bool = False, chi: FloatArray | None = None
) -> FloatArray:
    """Cross-section (cm2/molecule) at each wavenumber, (n_nu,): each line within |nu - nu0| <= cutoff of its
    unshifted wavenumber nu0, its profile about the shifted centre.

    `chi` is a table of chi factors, which multiply the profile at the distance from the shifted centre.  With `plinth`
    the profile's value at the distance `cutoff` from its centre is subtracted inside it, floor 0.
    `wavenumber` must rise (it may have gaps).
    """
    sigma = np.zeros(wavenumber.size)
    low = np.searchsorted(wavenumber, node.wavenumber - cutoff - 1e-6)
    high = np.searchsorted(wavenumber, node.wavenumber + cutoff + 1e-6)
    for line in np.flatnonzero(high > low):
        near = slice(low[line], high[line])
        within = np.abs(wavenumber[near] - node.wavenumber[line]) <= cutoff
        distance = wavenumber[near][within] - node.centre[line]
        profile = chi_factors(chi, distance) * voigt_profile(distance, node.doppler[line], node.lorentz[line])
        if plinth:
            edge = np.array([cutoff])
            level = chi_factors(chi, edge) * voigt_profile(edge, node.doppler[line], node.lorentz[line])
            profile = np.maximum(profile - level, 0.0)
        sigma[near][within] += node.strength[line] * profile
    return sigma


def exact_at(
    node: NodeLines, points: FloatArray, cutoff: float, plinth: bool = False, chi: FloatArray | None = None
) -> FloatArray:
    """The same sum, (n_points,), over pairs of a point and a line in its reach: quicker for few points and many lines.

    The lines of `node` must be sorted by unshifted wavenumber; the points may stand in any order.
    """
    sigma = np.zeros(points.size)
    low = np.searchsorted(node.wavenumber, points - cutoff - 1e-6)
    count = np.searchsorted(node.wavenumber, points + cutoff + 1e-6) - low
    # Points together that make long enough arrays of pairs: numpy's work on each array is worth its start then.
    batch = np.cumsum(count) // PAIRS_AT_ONCE
    for group in np.split(np.arange(points.size), np.flatnonzero(np.diff(batch)) + 1):
        point = np.repeat(group, count[group])
        place = np.arange(point.size) - np.repeat(np.cumsum(count[group]) - count[group], count[group])
        line = low[point] + place
        within = np.abs(points[point] - node.wavenumber[line]) <= cutoff
        point, line = point[within], line[within]
        profile = _profiles(node, line, points[point] - node.centre[line], cutoff, plinth, chi)
        sigma += np.bincount(point, node.strength[line] * profile, points.size)
    return sigma


def exact_parts(
    node: NodeLines, point: float, cutoff: float, plinth: bool = False, chi: FloatArray | None = None
) -> tuple[NDArray[np.intp], FloatArray]:
    """The lines in reach of one point (cm-1), (n,) as indices, and what each adds there, (n,), cm2/molecule.

    Their sum is what `exact_at` gives.  The lines of `node` must be sorted by unshifted wavenumber.
    """
    low, high = np.searchsorted(node.wavenumber, [point - cutoff - 1e-6, point + cutoff + 1e-6])
    line = np.arange(low, high)
    line = line[np.abs(point - node.wavenumber[line]) <= cutoff]
    return line, node.strength[line] * _profiles(node, line, point - node.centre[line], cutoff, plinth, chi)


def _profiles(
    node: NodeLines,
    line: NDArray[np.intp],
    distance: FloatArray,
    cutoff: float,
    plinth: bool,
    chi: FloatArray | None,
) -> FloatArray:
    """The profiles (per cm-1) of lines at distances (cm-1) from their shifted centres, (n,) all."""
    widths = node.doppler[line], node.lorentz[line]
    profile = chi_factors(chi, distance) * voigt_profile(distance, *widths)
    if not plinth:
        return profile
    edge = np.full(line.size, cutoff)
    return np.maximum(profile - chi_factors(chi, edge) * voigt_profile(edge, *widths), 0.0)
