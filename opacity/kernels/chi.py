"""Chi factors: how far wings fall below Lorentz's, as exponentials of the distance from the centre.

A table has a row for each stretch of distances, from the centre outwards: up to `limit` (cm-1, included; the last
is infinite) the factor is factor exp(-rate distance); (n_rows, 3).  No row means no factor.  It multiplies the
profile, which is not normalised again.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit

Array = NDArray[np.float64]


@jit
def chi_at(chi: Array, distance: float) -> float:
    """The factor at a distance (cm-1, not negative) from the centre; 1 where there is no row."""
    for row in range(chi.shape[0]):
        if distance <= chi[row, 0]:
            return float(chi[row, 1] * math.exp(-chi[row, 2] * distance))
    return 1.0


@jit
def weigh(out: Array, values: Array, nu: Array, centre: float, plinth: float, factor: float, rate: float) -> None:
    """Add values times factor exp(-rate |nu - centre|), less the plinth but not below 0; all (n_points,)."""
    for i in range(values.size):
        out[i] += max(values[i] * factor * math.exp(-rate * abs(nu[i] - centre)) - plinth, 0.0)
