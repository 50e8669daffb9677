"""Errors of transmission of weights in g, and the descent to weights of smaller ones, without leaving the kernel.

What is descended is a norm of the errors of all rows and columns: (sum |e|^p)^(1/p) with p = 3 2^squarings.  Most steps
that are tried make it larger, and mostly by the same few rows: a step is given up at the row where the sum is above the
best so far, and that row is looked at first in the next.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.absorption import add_transmission, weighted_sum
from opacity.kernels.jit import jit, jit_exact
from opacity.kernels.matched import cut, match_cut

Array = NDArray[np.float64]
Counts = NDArray[np.int64]

SMALLEST_WEIGHT = 1e-6
"""Least weight relative to the largest."""

_FIRST_STEP, _LAST_STEP, _GROWTH = 0.3, 0.005, 1.3
_LITTLE = 0.999


@jit_exact
def _row_errors(
    values: Array,
    mean: float,
    columns: Array,
    truth: Array,
    bounds: Array,
    cuts: tuple[Counts, Counts, Array],
    x0: float,
    room: tuple[Array, Array, Array],
    errors: Array,
) -> None:
    """Fill `errors` (n_column,) of one row; `cuts` as of `cut`, `room` for k, weights and `match_cut`."""
    k, weights, work = room
    match_cut(values, mean, bounds, cuts[0], cuts[1], cuts[2], x0, work, k)
    for j in range(errors.size):
        errors[j] = -truth[j]
    for i in range(weights.size):
        weights[i] = bounds[i + 1] - bounds[i]
    add_transmission(k, weights, columns, errors)


@jit_exact
def _cuts_for(n: int, m: int) -> tuple[Counts, Counts, Array]:
    return np.empty(n, dtype=np.int64), np.empty(n, dtype=np.int64), np.empty(m + n)


@jit_exact
def _room_for(n: int, m: int) -> tuple[Array, Array, Array]:
    return np.empty(n), np.empty(n), np.empty(m + 2 * n)


@jit_exact
def error_rows(
    values: Array, widths: Array, columns: Array, truth: Array, bounds: Array, x0: float, errors: Array
) -> None:
    """Fill `errors` (n_row, n_column): transmissions of matched intervals between `bounds` (n + 1,), less `truth`.

    `values` (n_row, m) rising, `widths` (m,) with sum 1, `columns` and `truth` (n_row, n_column).
    """
    n, m = bounds.size - 1, widths.size
    cuts, room = _cuts_for(n, m), _room_for(n, m)
    cut(widths, bounds, cuts[0], cuts[1], cuts[2])
    for row in range(values.shape[0]):
        mean = weighted_sum(values[row], widths)
        _row_errors(values[row], mean, columns[row], truth[row], bounds, cuts, x0, room, errors[row])


@jit
def _power_sum(errors: Array, scale: float, squarings: int) -> float:
    """Sum of |e / scale|^(3 2^squarings)."""
    total = 0.0
    for j in range(errors.size):
        share = abs(errors[j]) * scale
        power = share * share * share
        for _ in range(squarings):
            power *= power
        total += power
    return total


@jit_exact
def _fill_bounds(logs: Array, bounds: Array) -> None:
    """Bounds (n + 1,) of intervals whose weights have these logarithms, (n,), up to a factor."""
    top = np.max(logs)
    total = 0.0
    for i in range(logs.size):
        total += max(math.exp(logs[i] - top), SMALLEST_WEIGHT)
    bounds[0] = 0.0
    for i in range(logs.size):
        bounds[i + 1] = bounds[i] + max(math.exp(logs[i] - top), SMALLEST_WEIGHT) / total
    bounds[logs.size] = 1.0


@jit_exact
def bounds_of_logs(logs: Array) -> Array:
    """Bounds in g (n + 1,), from 0 to 1, of intervals whose weights have these logarithms, (n,), up to a factor."""
    bounds = np.empty(logs.size + 1)
    _fill_bounds(logs, bounds)
    return bounds


@jit_exact
def _total(
    rows: tuple[Array, Array, Array, Array],
    widths: Array,
    bounds: Array,
    x0: float,
    scale: float,
    squarings: int,
    order: Counts,
    cuts: tuple[Counts, Counts, Array],
    room: tuple[Array, Array, Array],
    errors: Array,
) -> float:
    """Sum of |e / scale|^p over rows (values, means, columns, truth) in an order, or 1 or more where it gets there.

    The row where it does is put first in the order.
    """
    values, means, columns, truth = rows
    cut(widths, bounds, cuts[0], cuts[1], cuts[2])
    total = 0.0
    for place in range(order.size):
        row = order[place]
        _row_errors(values[row], means[row], columns[row], truth[row], bounds, cuts, x0, room, errors)
        total += _power_sum(errors, 1.0 / scale, squarings)
        if not total < 1.0:
            for back in range(place, 0, -1):
                order[back] = order[back - 1]
            order[0] = row
            break
    return total


@jit_exact
def _first_norm(errors: Array, squarings: int) -> float:
    largest = 0.0
    for row in range(errors.shape[0]):
        for j in range(errors.shape[1]):
            largest = max(largest, abs(errors[row, j]))
    if largest == 0.0:
        return 0.0
    total = 0.0
    for row in range(errors.shape[0]):
        total += _power_sum(errors[row], 1.0 / largest, squarings)
    return float(largest * total ** (1.0 / (3 * 2**squarings)))


@jit_exact
def descend(
    values: Array,
    widths: Array,
    columns: Array,
    truth: Array,
    x0: float,
    squarings: int,
    turns: Counts,
    logs: Array,
) -> None:
    """Change `logs` (n,), logarithms of weights, until no step of one of them alone makes the norm of the errors less.

    Rows as of `error_rows`; `turns` (n_sweep, n) are the orders in which a sweep takes the weights.
    """
    n, m, n_row = logs.size, widths.size, values.shape[0]
    cuts, room = _cuts_for(n, m), _room_for(n, m)
    means, order, steps, bounds = np.empty(n_row), np.arange(n_row), np.full(n, _FIRST_STEP), bounds_of_logs(logs)
    for row in range(n_row):
        means[row] = weighted_sum(values[row], widths)
    rows = (values, means, columns, truth)
    all_errors = np.empty(columns.shape)
    error_rows(values, widths, columns, truth, bounds, x0, all_errors)
    best = _first_norm(all_errors, squarings)
    errors = all_errors[0]
    for sweep in range(turns.shape[0]):
        if best == 0.0:
            break
        before = best
        for i in turns[sweep]:
            stood, moved = logs[i], False
            for sign in (1.0, -1.0):
                logs[i] = stood + sign * steps[i]
                _fill_bounds(logs, bounds)
                total = _total(rows, widths, bounds, x0, best, squarings, order, cuts, room, errors)
                if total < 1.0:
                    best *= total ** (1.0 / (3 * 2**squarings))
                    moved = True
                    break
                logs[i] = stood
            steps[i] *= _GROWTH if moved else 0.5
        largest = np.max(steps)
        if largest < _LAST_STEP or (best > _LITTLE * before and largest < 4.0 * _LAST_STEP):
            break
