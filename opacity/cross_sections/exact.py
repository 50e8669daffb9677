"""The truth: the direct sum of Voigt profiles with scipy.special.wofz, written to be read, not to be fast."""

from __future__ import annotations

import math

import numpy as np
from scipy.special import wofz

from opacity.cross_sections.prepare import NodeLines
from opacity.grids import FloatArray

SQRT_LN2 = math.sqrt(math.log(2.0))


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
    """The same sum, (n_points,), point by point over the lines in reach: quicker for few points and many lines.

    The lines of `node` must be sorted by unshifted wavenumber; the points may stand in any order.
    """
    sigma = np.zeros(points.size)
    low = np.searchsorted(node.wavenumber, points - cutoff - 1e-6)
    high = np.searchsorted(node.wavenumber, points + cutoff + 1e-6)
    for i, point in enumerate(points):
        lines = np.arange(low[i], high[i])
        lines = lines[np.abs(point - node.wavenumber[lines]) <= cutoff]
        widths = node.doppler[lines], node.lorentz[lines]
        distance = point - node.centre[lines]
        profile = chi_factors(chi, distance) * voigt_profile(distance, *widths)
        if plinth:
            edge = np.full(lines.size, cutoff)
            profile = np.maximum(profile - chi_factors(chi, edge) * voigt_profile(edge, *widths), 0.0)
        sigma[i] = np.sum(node.strength[lines] * profile)
    return sigma
