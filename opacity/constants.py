"""Physical constants, each with its source.  All are exact in the SI of 2019 (CODATA 2018)."""

from __future__ import annotations

import math

PLANCK = 6.62607015e-34
"""Planck constant, J s (exact)."""

LIGHT_SPEED = 299792458.0
"""Speed of light in vacuum, m s-1 (exact)."""

BOLTZMANN = 1.380649e-23
"""Boltzmann constant, J K-1 (exact)."""

AVOGADRO = 6.02214076e23
"""Avogadro constant, mol-1 (exact)."""

SECOND_RADIATION = 100.0 * PLANCK * LIGHT_SPEED / BOLTZMANN
"""c2 = h c / k, cm K: 1.438776877..."""

STANDARD_ATMOSPHERE = 1.01325
"""One standard atmosphere, bar (exact by definition)."""

LOSCHMIDT = 101325.0 / (BOLTZMANN * 273.15) * 1e-6
"""Number density of an ideal gas at 273.15 K and 1 atm, cm-3: 2.686780111e19."""

REFERENCE_TEMPERATURE = 296.0
"""Temperature of strengths and widths in HITRAN-format lists, K (Rothman et al. 1998, JQSRT 60, 665)."""

DOPPLER_HWHM = math.sqrt(2.0 * math.log(2.0) * BOLTZMANN * AVOGADRO * 1e3) / LIGHT_SPEED
"""alpha_D = DOPPLER_HWHM * nu * sqrt(T[K] / M[g mol-1]): 3.581163e-7 (half-width at half maximum)."""
