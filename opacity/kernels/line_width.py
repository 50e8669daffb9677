"""Doppler and pressure widths of lines, and where a line's centre is at a pressure."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.constants import DOPPLER_HWHM, REFERENCE_TEMPERATURE
from opacity.kernels.jit import jit

Array = NDArray[np.float64]

LOWEST_SHIFTED = 0.5
"""A shifted centre counts for the Doppler width as no lower than this share of the unshifted one."""


def shifted_centre(wavenumber: Array, shift: Array, pressure: float) -> Array:
    """nu0 + P sum_b x_b delta_b in cm-1, (n_lines,); `shift` is the sum in cm-1/bar, pressure in bar."""
    return wavenumber + pressure * shift


def doppler_share(temperature: float, mass: Array) -> Array:
    """1/c sqrt(2 ln2 k T/m): the Doppler half-width (HWHM) as a share of the wavenumber, (n_lines,); `mass` in g/mol.

    The wavenumber is the shifted centre; at pressures so high that the linear shift has lost its meaning, half of the
    unshifted one (`LOWEST_SHIFTED`).
    """
    return np.asarray(DOPPLER_HWHM * np.sqrt(temperature / mass))


def pressure_half_width(gamma: Array, exponent: Array, temperature: float, pressure: float) -> Array:
    """P sum_b gamma_b (296 K/T)^n_b, HWHM in cm-1, (n_lines,).

    `gamma` already holds the mole fraction, x_b gamma_b in cm-1/bar at 296 K; both (n_broadeners, n_lines)
    (Rothman et al. 1998, JQSRT 60, 665, appendix).
    """
    return np.asarray(pressure * np.sum(gamma * (REFERENCE_TEMPERATURE / temperature) ** exponent, axis=0))


@jit
def voigt_half_width(doppler: float, lorentz: float) -> float:
    """Half-width at half maximum of a Voigt profile from both half-widths, in their unit.

    Approximation with 0.02 % error: Olivero & Longbothum 1977, JQSRT 17, 233.
    """
    return 0.5346 * lorentz + math.sqrt(0.2166 * lorentz**2 + doppler**2)
