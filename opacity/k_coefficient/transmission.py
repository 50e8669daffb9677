"""Transmissions of bands, and the columns at which they are judged."""

from __future__ import annotations

import numpy as np

from opacity.grids import FloatArray
from opacity.k_coefficient.collapse import CELL_WIDTHS

N_COLUMNS = 64
THINNEST = 0.98
BLACK = 1e-3
COLUMN_A_BAR = 2.6e28
"""Largest column in molecules per cm2 and bar: a grazing path through an atmosphere under 10 m s-2."""

_ROWS = 64
_DEEPEST = 700.0


def transmission(k: FloatArray, weights: FloatArray, columns: FloatArray) -> FloatArray:
    """Mean of exp(-k u) over g for rows, (n_row, n_column).

    `k` (n_row, n) in cm2, `weights` (n,) or (n_row, n) with sum 1, `columns` u (n_row, n_column) in cm-2.
    """
    out = np.empty(columns.shape)
    weights = np.broadcast_to(weights, k.shape)
    # A few rows at a time: what lies between must fit into the cache.
    step = max(1, _ROWS * 16 // k.shape[1])
    for start in range(0, len(k), step):
        part = slice(start, start + step)
        # Beyond this nothing is left, and subnormal numbers are slow.
        depth = np.minimum(k[part, None, :] * columns[part, :, None], _DEEPEST)
        out[part] = (np.exp(-depth) @ weights[part, :, None])[..., 0]
    return out


def means_over_g(k: FloatArray, weights: FloatArray) -> FloatArray:
    """Means of rows (n_row, n) over g, (n_row,); `weights` (n,), or (n_row, n) where each row has its own."""
    return np.asarray(k @ weights if weights.ndim == 1 else np.sum(k * weights, axis=-1))


def columns_of(
    cells: FloatArray, pressure: FloatArray, weights: FloatArray = CELL_WIDTHS, count: int = N_COLUMNS
) -> FloatArray:
    """`count` columns a row, even in log from a transmission of 0.98 to one of 1e-3, (n_row, count), cm-2.

    `cells` (n_row, n) in cm2 with `weights` as in `transmission`, and `pressure` (n_row,) in bar: no column is above
    2.6e28 cm-2 for each bar, and for bands that stay clear the columns end where the transmission does.  Rows without
    opacity have columns of 0.
    """
    thin, thick = _column_of(cells, THINNEST, weights), _column_of(cells, BLACK, weights)
    most = COLUMN_A_BAR * pressure
    thin, thick = np.minimum(thin, most), np.minimum(thick, most)
    with np.errstate(divide="ignore", invalid="ignore"):
        span = np.where(thin > 0.0, np.log(thick / thin), 0.0)
    return np.asarray(thin[:, None] * np.exp(span[:, None] * np.linspace(0.0, 1.0, count)))


def _column_of(cells: FloatArray, level: float, weights: FloatArray) -> FloatArray:
    """Column (n_row,) at which a row's transmission falls to a level, or is within 1e-6 of what it ends in."""
    mean = means_over_g(cells, weights)
    clear = means_over_g((cells == 0.0).astype(np.float64), weights)
    level_of = np.maximum(level, clear + 1e-6 * (1.0 - clear))
    with np.errstate(divide="ignore"):
        start = np.where(mean > 0.0, 1.0 / mean, 0.0)
    low, high = np.full(len(cells), -5.0), np.full(len(cells), 60.0)
    for _ in range(24):
        middle = 0.5 * (low + high)
        above = transmission(cells, weights, (start * np.exp(middle))[:, None])[:, 0] > level_of
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    return np.asarray(start * np.exp(high))
