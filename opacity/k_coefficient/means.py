"""Mean cross-sections at a temperature: Planck's for emission of thin gas, Rosseland's for diffusion in thick gas.

Planck     integral of sigma B over that of B (Mihalas 1978, Stellar Atmospheres, 2nd ed., section 3-2, from memory)
Rosseland  integral of dB/dT over that of (1 / sigma) dB/dT (Rosseland 1924, MNRAS 84, 525, from memory)

Both integrals are taken over the grid alone, by trapezoids: the weight is renormalised on the grid and what lies beyond
its ends is left out.
"""

from __future__ import annotations

import numpy as np

from opacity.arguments import as_number, shown
from opacity.constants import SECOND_RADIATION
from opacity.errors import InputError, problem
from opacity.grids import FloatArray, cell_widths
from opacity.k_coefficient.collapse import checked_spectra
from opacity.kernels.means import add_mean_sums


def planck_mean(sigma: FloatArray, wavenumber: FloatArray, temperature: float) -> FloatArray:
    """Planck mean of spectra (..., n_nu) at a rising `wavenumber` (n_nu,), cm-1; (...,), in the spectra's unit.

    `temperature` in K is that of the radiation.  The weight is Planck's function renormalised on the grid.
    Raises InputError for what cannot be right.
    """
    spectra = checked_spectra(sigma, wavenumber)
    weights = _weights(wavenumber, temperature, rosseland=False)
    return np.asarray(np.sum(spectra * weights, axis=-1).reshape(np.shape(sigma)[:-1]))


def rosseland_mean(sigma: FloatArray, wavenumber: FloatArray, temperature: float) -> FloatArray:
    """Rosseland mean, as `planck_mean`: the harmonic mean weighted by dB/dT renormalised on the grid.

    It is 0 where the spectrum is 0 at any point of the grid that has weight: radiation gets through there unhindered.
    """
    spectra = checked_spectra(sigma, wavenumber)
    weights = _weights(wavenumber, temperature, rosseland=True)
    with np.errstate(divide="ignore", over="ignore"):
        resistance = np.sum(np.where(weights > 0.0, 1.0 / spectra, 0.0) * weights, axis=-1)
    return np.asarray((1.0 / resistance).reshape(np.shape(sigma)[:-1]))


def mean_sums(sigma: FloatArray, wavenumber: FloatArray, temperature: float, reference: float) -> FloatArray:
    """What Planck and Rosseland means of a spectrum (n_nu,) are made of, (4,): sums over its points' cells of B sigma,
    B, dB/dT / sigma (infinite where sigma is 0) and dB/dT, in one unit for all stretches of a grid.

    Those of adjoining stretches may be added and `means_of_sums` makes the means.  `wavenumber` (n_nu,) is evenly
    spaced and `reference` (cm-1) the lowest one of all stretches.
    """
    scale, sums = SECOND_RADIATION / temperature, np.zeros(4)
    first, last = float(wavenumber[0]), float(wavenumber[-1])
    step = (last - first) / (wavenumber.size - 1)
    add_mean_sums(sums, sigma, first, step, scale, scale * reference)
    return sums


def means_of_sums(sums: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Planck and Rosseland means (...,) of sums (..., 4); 0 where the weights themselves are too small for a number."""
    with np.errstate(divide="ignore", invalid="ignore"):
        planck, rosseland = sums[..., 0] / sums[..., 1], sums[..., 3] / sums[..., 2]
    return np.nan_to_num(planck, posinf=0.0), np.nan_to_num(rosseland, posinf=0.0)


def _weights(wavenumber: FloatArray, temperature: float, *, rosseland: bool) -> FloatArray:
    """B or dB/dT times the widths of the points' cells, sum 1, (n_nu,)."""
    expected = "a number above 0 K"
    kelvin = as_number("temperature", temperature, expected)
    if kelvin <= 0.0 or wavenumber.size < 2:
        if wavenumber.size < 2:
            raise InputError(problem("wavenumber", "no range", expected="two or more points", found=wavenumber.size))
        raise InputError(problem("temperature", "impossible", expected=expected, found=shown(temperature)))
    x = SECOND_RADIATION * wavenumber / kelvin
    # In logarithms and relative to the largest, so that no temperature is too low; x = 0 has no weight.
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = 3.0 * np.log(x) - x - np.log(-np.expm1(-x))
        if rosseland:
            logs += np.log(x) - np.log(-np.expm1(-x))
    logs[x == 0.0] = -np.inf
    weights = np.exp(logs - logs.max()) * cell_widths(wavenumber)
    return np.asarray(weights / weights.sum())
