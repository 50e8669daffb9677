"""Line strength at a temperature."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.constants import LIGHT_SPEED, REFERENCE_TEMPERATURE, SECOND_RADIATION
from opacity.kernels.jit import jit

Array = NDArray[np.float64]

_NO_EMISSION = 40.0
"""Beyond this c2 nu / T the factor of stimulated emission is 1 in f8."""

EIGHT_PI_C = 8.0 * np.pi * 100.0 * LIGHT_SPEED
"""8 pi c, c in cm/s: S and A of a line are related by it."""


def strength_ratio(
    wavenumber: Array,
    lower_energy: Array,
    temperature: float,
    partition_ratio: Array,
    reference: float | Array = REFERENCE_TEMPERATURE,
) -> Array:
    """S(T) / S(T0) of lines, (n_lines,).

    S(T)/S0 = Q(T0)/Q(T) exp[-c2 E''(1/T - 1/T0)] [1 - exp(-c2 nu/T)] / [1 - exp(-c2 nu/T0)]
    (Rothman et al. 1998, JQSRT 60, 665, appendix).  `wavenumber` and `lower_energy` in cm-1, (n_lines,);
    `partition_ratio` is Q(T0)/Q(T), (n_lines,); `reference` is T0, 296 K or (n_lines,).
    """
    boltzmann = np.exp(-SECOND_RADIATION * lower_energy * (1.0 / temperature - 1.0 / reference))
    emission = np.expm1(-SECOND_RADIATION * wavenumber / temperature)
    emission_reference = np.expm1(-SECOND_RADIATION * wavenumber / reference)
    return np.asarray(partition_ratio * boltzmann * (emission / emission_reference))


def strength_from_einstein_a(
    wavenumber: Array,
    lower_energy: Array,
    einstein_a: Array,
    upper_weight: Array,
    abundance: Array,
    temperature: float,
    partition: Array,
) -> Array:
    """S(T) in cm/molecule from the Einstein coefficient, (n_lines,).

    S = Ia g' A exp(-c2 E''/T) [1 - exp(-c2 nu/T)] / (8 pi c nu^2 Q(T)) (Rothman et al. 1998, appendix);
    A in s-1, c in cm/s, `partition` Q(T), `abundance` Ia; all (n_lines,).
    """
    population = np.exp(-SECOND_RADIATION * lower_energy / temperature) / partition
    emission = -np.expm1(-SECOND_RADIATION * wavenumber / temperature)
    scale = EIGHT_PI_C * wavenumber**2
    return np.asarray(abundance * upper_weight * einstein_a * population * emission / scale)


@jit
def strengths_in_one_pass(
    out: Array,
    temperature: Array,
    wavenumber: Array,
    lower_energy: Array,
    strength: Array,
    isotopologue: NDArray[np.int16],
    reference: Array,
    ratio: Array,
) -> None:
    """S(T) of each line at each temperature into `out` (n_T, n_lines): the formula of `strength_ratio`, each line read
    once.

    `strength` is S0, `isotopologue` an index; by isotopologue the temperature T0 that S0 stands for, `reference`
    (n_iso,), and Q(T0)/Q(T), `ratio` (n_iso, n_T).  A strength of 0 stays 0 however large the factor of its energy.
    """
    for j in range(wavenumber.size):
        if strength[j] == 0.0:
            out[:, j] = 0.0
            continue
        which = isotopologue[j]
        start = reference[which]
        at_start = SECOND_RADIATION * wavenumber[j] / start
        emission_start = -1.0 if at_start > _NO_EMISSION else math.expm1(-at_start)
        for i in range(temperature.size):
            t = temperature[i]
            at = SECOND_RADIATION * wavenumber[j] / t
            emission = -1.0 if at > _NO_EMISSION else math.expm1(-at)
            boltzmann = math.exp(-SECOND_RADIATION * lower_energy[j] * (1.0 / t - 1.0 / start))
            out[i, j] = strength[j] * (ratio[which, i] * boltzmann * (emission / emission_start))
