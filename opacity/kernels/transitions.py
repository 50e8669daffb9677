"""Transitions of states: wavenumber, intensity and class of width, in one pass."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact
from opacity.kernels.line_strength import EIGHT_PI_C
from opacity.kernels.text import READ, UNREADABLE

Array = NDArray[np.float64]
Index = NDArray[np.int64]

GOOD = READ
NO_UPPER, NO_LOWER, NO_WAVENUMBER, SWAPPED, BAD_A, BAD_ENERGY, BAD_STRENGTH, OUTSIDE = range(
    UNREADABLE + 1, UNREADABLE + 9
)

BRANCHES = 9
"""Classes of J' - J'' told apart: from -2 to 2 in halves; what lies beyond counts as the last."""

_LOG_8_PI_C = math.log(EIGHT_PI_C)
_ENERGY, _LOG_WEIGHT, _TWICE_J = 0, 1, 2


@jit_exact
def state_table(energy: Array, weight: Array, twice_j: NDArray[np.int32], table: Array) -> None:
    """What lines take from their states, side by side: energy, ln g and 2J; `table` (n_states, 3).

    Rows of states come in any order: side by side, one costs a single trip to memory.
    """
    for i in range(energy.size):
        table[i, _ENERGY], table[i, _TWICE_J] = energy[i], twice_j[i]
        table[i, _LOG_WEIGHT] = math.log(weight[i]) if weight[i] > 0.0 else -np.inf


@jit_exact
def find_rows(ids: Index, first: int, count: int, table: NDArray[np.int32], rows: Index) -> None:
    """Row of each id from `first` to `first + count - 1`, by a table (count,) or, where it is empty, as they come.

    -1 for any other id; `ids` and `rows` are (n,).
    """
    listed = table.size > 0
    for i in range(ids.size):
        # Compared before it is subtracted: the difference of two ids may overflow.
        if ids[i] < first or ids[i] >= first + count:
            rows[i] = -1
        else:
            rows[i] = table[ids[i] - first] if listed else ids[i] - first


@jit_exact
def join_states(
    upper: Index,
    lower: Index,
    einstein_a: Array,
    states: Array,
    limits: tuple[float, float, float, float, float, float],
    wavenumber: Array,
    log_intensity: Array,
    lower_energy: Array,
    width_key: NDArray[np.uint32],
    status: NDArray[np.uint8],
) -> None:
    """Lines from the rows of their states (-1 for a state that is not there), all (n_lines,), where `status` is GOOD.

    ln I = ln(g' A / (8 pi c nu^2)), c in cm/s: S = I exp(-c2 E''/T) [1 - exp(-c2 nu/T)] / Q(T) (Rothman et al. 1998,
    JQSRT 60, 665, appendix, without abundance).  `states` is the table of all states.  `limits` are three pairs:
    lower-state energies (cm-1), the second of which is beyond; ln I, unless I is 0; wavenumbers (cm-1) asked for.
    `width_key` is 2J'' times 9 plus the class of J' - J''.
    """
    # What lies far apart in memory is fetched first, by a loop so short that many fetches are under way at once.
    for i in range(upper.size):
        u, low = upper[i], lower[i]
        if status[i] == GOOD and (u < 0 or low < 0):
            status[i] = NO_UPPER if u < 0 else NO_LOWER
        if status[i] == GOOD:
            lower_energy[i] = states[low, _ENERGY]
            wavenumber[i] = states[u, _ENERGY] - states[low, _ENERGY]
            log_intensity[i] = states[u, _LOG_WEIGHT]
            branch = min(max(int(states[u, _TWICE_J]) - int(states[low, _TWICE_J]) + 4, 0), BRANCHES - 1)
            width_key[i] = int(states[low, _TWICE_J]) * BRANCHES + branch
    for i in range(upper.size):
        if status[i] != GOOD:
            continue
        nu, a = wavenumber[i], einstein_a[i]
        if nu == 0.0:
            status[i] = NO_WAVENUMBER
        elif nu < 0.0:
            status[i] = SWAPPED
        elif not (a >= 0.0 and a < np.inf):
            status[i] = BAD_A
        elif not (limits[0] <= lower_energy[i] < limits[1]):
            status[i] = BAD_ENERGY
        if status[i] != GOOD:
            continue
        strength = -np.inf
        if a > 0.0 and log_intensity[i] > -np.inf:
            strength = log_intensity[i] + math.log(a) - 2.0 * math.log(nu) - _LOG_8_PI_C
            if not (limits[2] <= strength <= limits[3]):
                status[i] = BAD_STRENGTH
                continue
        log_intensity[i] = strength
        if not (limits[4] <= nu <= limits[5]):
            status[i] = OUTSIDE
