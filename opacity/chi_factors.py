"""Published chi factors: how far the wings of a molecule's lines fall below Lorentz's.

Each is a chain of exponentials of the distance from the line's centre (as `kernels.chi` takes them): rows of the
distance up to which a row holds (cm-1, included), a factor and a rate (cm), chi = factor exp(-rate distance).
The constants were written down from memory and checked for continuity alone: look them up in print before a table
made with them is used.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from opacity.grids import FloatArray


@dataclass(frozen=True)
class ChiFactors:
    """A published set: what it is for, where it was published, and its rows."""

    molecule: str
    measured_for: str
    source: str
    rows: tuple[tuple[float, float, float], ...]

    def table(self) -> FloatArray:
        """Rows as an array, (n_rows, 3)."""
        return np.array(self.rows)


CHI_FACTORS = {
    "Tonkov-1996": ChiFactors(
        "CO2",
        "pure CO2",
        "Tonkov et al. 1996, Appl. Opt. 35, 4863 (constants from memory)",
        (
            (3.0, 1.0, 0.0),
            (150.0, 1.084, 0.027),
            (300.0, 0.208, 0.016),
            (math.inf, 0.025, 0.009),
        ),
    ),
    "Hartmann-2002": ChiFactors(
        "CH4",
        "CH4 in H2",
        "Hartmann et al. 2002, JQSRT 72, 117 (constants from memory)",
        (
            (26.0, 1.0, 0.0),
            (60.0, 8.72, 1.0 / 12.0),
            (math.inf, 0.0684, 1.0 / 393.0),
        ),
    ),
}
"""Sets by the name that a recipe gives."""

NO_CHI = np.zeros((0, 3))


def chi_table(name: str | None) -> FloatArray:
    """The rows of a set, (n_rows, 3); none for None."""
    return NO_CHI if name is None else CHI_FACTORS[name].table()
