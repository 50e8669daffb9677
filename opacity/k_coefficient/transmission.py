"""Transmissions of bands, and the columns at which they are judged."""

from __future__ import annotations

import numpy as np

from opacity.grids import FloatArray
from opacity.k_coefficient.collapse import CELL_WIDTHS
from opacity.kernels.absorption import column_rows, transmission_rows

N_COLUMNS = 64
THINNEST = 0.98
BLACK = 1e-3
COLUMN_A_BAR = 2.6e28
"""Largest column in molecules per cm2 and bar: a grazing path through an atmosphere under 10 m s-2."""

_NEARLY_CLEAR = 1e-6
"""Share of what a band absorbs that is left where its transmission is said to end."""


def transmission(k: FloatArray, weights: FloatArray, columns: FloatArray) -> FloatArray:
    """Mean of exp(-k u) over g for rows, (n_row, n_column), good to 1e-14 and never below 1e-304.

    `k` (n_row, n) in cm2, `weights` (n,) or (n_row, n) with sum 1, `columns` u (n_row, n_column) in cm-2.
    """
    out = np.empty(columns.shape)
    transmission_rows(_rows(k), np.atleast_2d(_rows(weights)), _rows(columns), out)
    return out


def means_over_g(k: FloatArray, weights: FloatArray) -> FloatArray:
    """Means of rows (n_row, n) over g, (n_row,); `weights` (n,), or (n_row, n) where each row has its own."""
    # Not by the matrix product, whose last bits may depend on the threads that BLAS gets.
    return np.asarray(np.sum(k * weights, axis=-1))


def columns_of(
    cells: FloatArray, pressure: FloatArray, weights: FloatArray = CELL_WIDTHS, count: int = N_COLUMNS
) -> FloatArray:
    """`count` columns a row, even in log from a transmission of 0.98 to one of 1e-3, (n_row, count), cm-2.

    `cells` (n_row, n) in cm2 with `weights` as in `transmission`, and `pressure` (n_row,) in bar: no column is above
    2.6e28 cm-2 for each bar, and for bands that stay clear the columns end where the transmission does.  Rows without
    opacity have columns of 0.
    """
    thin, thick = np.zeros(len(cells)), np.zeros(len(cells))
    levels, rows, shares = np.array([THINNEST, BLACK]), _rows(cells), np.atleast_2d(_rows(weights))
    if len(shares) == 1:
        column_rows(rows, shares[0], levels, _NEARLY_CLEAR, thin, thick)
    else:
        for row, own in enumerate(shares):
            part = slice(row, row + 1)
            column_rows(rows[part], own, levels, _NEARLY_CLEAR, thin[part], thick[part])
    most = COLUMN_A_BAR * pressure
    thin, thick = np.minimum(thin, most), np.minimum(thick, most)
    with np.errstate(divide="ignore", invalid="ignore"):
        span = np.where(thin > 0.0, np.log(thick / thin), 0.0)
    return np.asarray(thin[:, None] * np.exp(span[:, None] * np.linspace(0.0, 1.0, count)))


def _rows(values: FloatArray) -> FloatArray:
    return np.ascontiguousarray(values, dtype=np.float64)
