"""Transitions of states: wavenumber, intensity and class of width, in one pass."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact
from opacity.kernels.line_strength import EIGHT_PI_C

Array = NDArray[np.float64]
Index = NDArray[np.int64]

GOOD, NO_UPPER, NO_LOWER, NO_WAVENUMBER, SWAPPED, BAD_A = 0, 1, 2, 3, 4, 5
BAD_ENERGY, BAD_STRENGTH = 6, 7

BRANCHES = 9
"""Classes of J' - J'' told apart: from -2 to 2 in halves; what lies beyond counts as the last."""

_LOG_8_PI_C = math.log(EIGHT_PI_C)


@jit_exact
def join_states(
    upper: Index,
    lower: Index,
    einstein_a: Array,
    energy: Array,
    weight: Array,
    twice_j: NDArray[np.int32],
    energies: tuple[float, float],
    log_intensities: tuple[float, float],
    wavenumber: Array,
    log_intensity: Array,
    width_key: NDArray[np.int64],
    status: NDArray[np.uint8],
) -> None:
    """Lines from the rows of their states (-1 for a state that is not there), all (n_lines,).

    ln I = ln(g' A / (8 pi c nu^2)), c in cm/s: S = I exp(-c2 E''/T) [1 - exp(-c2 nu/T)] / Q(T) (Rothman et al. 1998,
    JQSRT 60, 665, appendix, without abundance).  `energy` cm-1, `weight` g and `twice_j` 2J are those of all states.
    Lower-state energies are to lie within `energies`, the second of which is beyond, and ln I (unless I is 0) within
    `log_intensities`.  `width_key` is 2J'' times 9 plus the class of J' - J''.
    """
    for i in range(upper.size):
        u, low = upper[i], lower[i]
        status[i] = GOOD
        if u < 0 or low < 0:
            status[i] = NO_UPPER if u < 0 else NO_LOWER
            continue
        nu = energy[u] - energy[low]
        a = einstein_a[i]
        if nu == 0.0:
            status[i] = NO_WAVENUMBER
        elif nu < 0.0:
            status[i] = SWAPPED
        elif not (a >= 0.0 and a < np.inf):
            status[i] = BAD_A
        elif not (energies[0] <= energy[low] < energies[1]):
            status[i] = BAD_ENERGY
        if status[i] != GOOD:
            continue
        wavenumber[i] = nu
        log_intensity[i] = -np.inf
        if a > 0.0 and weight[u] > 0.0:
            strength = math.log(weight[u]) + math.log(a) - 2.0 * math.log(nu) - _LOG_8_PI_C
            if not (log_intensities[0] <= strength <= log_intensities[1]):
                status[i] = BAD_STRENGTH
                continue
            log_intensity[i] = strength
        branch = min(max(twice_j[u] - twice_j[low] + 4, 0), BRANCHES - 1)
        width_key[i] = twice_j[low] * BRANCHES + branch
