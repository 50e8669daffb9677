"""What lists say of their own uncertainty, weighted with line strengths; and states found again by their energies."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.accumulate import first_not_below
from opacity.kernels.jit import jit, jit_exact
from opacity.kernels.line_width import LOWEST_SHIFTED, voigt_half_width

Array = NDArray[np.float64]

SCALE = 1e60
"""Strengths (cm/molecule) are multiplied by this, so that squares of weak ones do not underflow."""
_SUM_ROUNDING = 1e-9


@jit
def add_strengths(ends: NDArray[np.int64], strength: Array, relative: Array, sums: Array) -> None:
    """Add to `sums` (n_bands, 4) by band sum S, and of the lines whose `relative` uncertainty u is stated (not NaN)
    sum S, sum S u and sum (S u)^2, S in 1e-60 cm/molecule.  Band k has the lines ends[k, 0] to ends[k, 1] - 1.
    """
    for band in range(ends.shape[0]):
        total, stated, linear, squares = 0.0, 0.0, 0.0, 0.0
        for i in range(ends[band, 0], ends[band, 1]):
            s, u = SCALE * strength[i], relative[i]
            total += s
            if u >= 0.0:
                stated += s
                linear += s * u
                squares += (s * u) ** 2
        sums[band, 0] += total
        sums[band, 1] += stated
        sums[band, 2] += linear
        sums[band, 3] += squares


@jit
def add_profiles(
    ends: NDArray[np.int64],
    strength: Array,
    wavenumber: Array,
    widths: tuple[Array, Array, Array],
    stated: tuple[Array, Array],
    pressure: float,
    sums: Array,
) -> None:
    """Add to `sums` (n_bands, 4) by band, of the lines whose width's uncertainty u is stated, sum S and sum S u w with
    Lorentz's share w of the half-width; of those whose position's is, sum S and sum S v / half-width.

    `widths` are shift (cm-1/bar), Doppler half-width as a share of the wavenumber and Lorentz's (cm-1/bar); `stated`
    are u, relative, and v, cm-1, NaN where not stated; all (n_lines,).  `pressure` bar.
    """
    shift, doppler, lorentz = widths
    relative, position = stated
    for band in range(ends.shape[0]):
        with_width, width, with_position, displaced = 0.0, 0.0, 0.0, 0.0
        for i in range(ends[band, 0], ends[band, 1]):
            u, v = relative[i], position[i]
            if u >= 0.0 or v >= 0.0:
                s, by_pressure = SCALE * strength[i], pressure * lorentz[i]
                centre = max(wavenumber[i] + pressure * shift[i], LOWEST_SHIFTED * wavenumber[i])
                half_width = voigt_half_width(doppler[i] * centre, by_pressure)
                if u >= 0.0:
                    with_width += s
                    width += s * u * by_pressure / half_width
                if v >= 0.0:
                    with_position += s
                    displaced += s * v / half_width
        sums[band, 0] += with_width
        sums[band, 1] += width
        sums[band, 2] += with_position
        sums[band, 3] += displaced


@jit_exact
def uncertainty_of_transitions(
    wavenumber: Array, lower_energy: Array, step: float, energy: Array, uncertainty: Array, found: Array
) -> None:
    """The two states' uncertainties in quadrature (cm-1) of each line, NaN where no two states are its own.

    `lower_energy` is known to `step`, `wavenumber` is the very difference of the states' energies (all cm-1): this
    tells states apart whose energies are as close as that.  Where several pairs serve, the largest is taken.  States
    are sorted by `energy` (n_states,); the lines' arrays are (n_lines,).
    """
    for i in range(wavenumber.size):
        best = -1.0
        low = first_not_below(energy, lower_energy[i] - step)
        while low < energy.size and energy[low] <= lower_energy[i] + step:
            upper = energy[low] + wavenumber[i]
            high = first_not_below(energy, upper - _SUM_ROUNDING)
            while high < energy.size and energy[high] <= upper + _SUM_ROUNDING:
                if energy[high] - energy[low] == wavenumber[i]:
                    best = max(best, math.sqrt(uncertainty[low] ** 2 + uncertainty[high] ** 2))
                high += 1
            low += 1
        found[i] = best if best >= 0.0 else math.nan
