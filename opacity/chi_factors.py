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

from opacity.errors import InputError, problem
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
        return checked_rows(np.array(self.rows))


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

MOST_UPWARD = 1e-3
"""Published constants are rounded: where rows meet a factor may jump upwards by so much of itself."""
NO_CHI = np.zeros((0, 3))


def checked_rows(rows: FloatArray) -> FloatArray:
    """Rows that sums can be made with, (n_rows, 3), or none.

    Raises InputError unless distances rise to infinity, the first row has no rate (which would be a kink at the
    centre), no rate is below 0 and no factor jumps upwards: wings fall.
    """
    if not len(rows):
        return rows
    if rows.ndim != 2 or rows.shape[1] != 3 or not _fall(rows):
        expected = "distances that rise to infinity, factors that fall, and no rate in the first row"
        raise InputError(problem("chi", "impossible rows", expected=expected, found=rows.tolist()))
    return rows


def _fall(rows: FloatArray) -> bool:
    at = rows[:-1, 0]
    before, after = (part[:, 1] * np.exp(-part[:, 2] * at) for part in (rows[:-1], rows[1:]))
    rises = rows[0, 0] > 0.0 and np.all(np.diff(rows[:, 0]) > 0.0) and rows[-1, 0] == np.inf
    falls = np.all(rows[:, 1:] >= 0.0) and np.all(after <= before * (1.0 + MOST_UPWARD))
    return bool(rises and falls and rows[0, 2] == 0.0)


def chi_table(name: str | None) -> FloatArray:
    """The rows of a set, (n_rows, 3); none for None."""
    return NO_CHI if name is None else CHI_FACTORS[name].table()
