"""Weights of matched intervals made to fit: the fewest points, shared, that keep every transmission within a target.

The largest error of transmission over all nodes, bands and columns is made small by a descent coordinate by
coordinate on the logarithms of the weights.  What is descended is a q = 24 norm of the errors of a few rows, the worst
ones; a row is a band at a node.  When it descends no further, the worst of all other rows are added and it goes on.
This is the project's own way; no published one is followed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.collapse import CELL_WIDTHS, N_CELLS
from opacity.k_coefficient.quadrature import MOST_POINTS, GPoints, g_points, k_from_cells, points_of_bounds
from opacity.k_coefficient.transmission import columns_of, transmission

NORM = 24.0
ACCEPTED = 0.6
"""Share of the target that the rows trained on must keep: others were seen to have up to 1.7 times their error."""

_ROUNDS = 12
_SWEEPS = 40
_FIRST_STEP, _LAST_STEP = 0.3, 0.01
_SMALLEST_WEIGHT = 1e-6


@dataclass(frozen=True)
class Rows:
    """Bands at nodes: `cells` (n_row, N_CELLS), `columns` and the transmissions there, `truth` (n_row, 64)."""

    cells: FloatArray
    columns: FloatArray
    truth: FloatArray

    def part(self, which: NDArray[np.int64]) -> Rows:
        """The rows of some numbers."""
        return Rows(self.cells[which], self.columns[which], self.truth[which])

    def errors(self, points: GPoints) -> FloatArray:
        """Error of transmission of a quadrature shared by all rows, (n_row, 64)."""
        k = k_from_cells(self.cells, points)
        return transmission(k, points.weights, self.columns) - self.truth


def rows_of(cells: FloatArray, pressure: FloatArray) -> Rows:
    """Rows out of fine cells (n_node, n_band, N_CELLS), cm2, of nodes at `pressure` (n_node,), bar; empty ones left out.

    Raises InputError where the two do not fit.
    """
    if cells.ndim != 3 or cells.shape[2] != N_CELLS or cells.shape[0] != pressure.size:
        expected = f"({pressure.size}, n_band, {N_CELLS}) for {pressure.size} pressures"
        raise InputError(problem("cells", "of another shape", expected=expected, found=f"shape {cells.shape}"))
    flat = cells.reshape(-1, N_CELLS)
    filled = np.flatnonzero(flat[:, -1] > 0.0)
    rows, pressures = flat[filled], np.repeat(pressure, cells.shape[1])[filled]
    columns = columns_of(rows, pressures)
    return Rows(rows, columns, transmission(rows, CELL_WIDTHS, columns))


def joined(parts: Sequence[Rows]) -> Rows:
    """The rows of several species, for weights that serve all of them."""
    return Rows(
        np.concatenate([one.cells for one in parts]),
        np.concatenate([one.columns for one in parts]),
        np.concatenate([one.truth for one in parts]),
    )


def rows_by_band(cells: FloatArray, pressure: FloatArray) -> list[Rows]:
    """The rows of each band, for weights of its own; arguments as those of `rows_of`."""
    return [rows_of(cells[:, band : band + 1], pressure) for band in range(cells.shape[1])]


def training_nodes(temperature: FloatArray, pressure: FloatArray, count: int, seed: int) -> NDArray[np.int64]:
    """Numbers of nodes to train on, rising: all extremes and others drawn by `seed`, up to `count` where there are more.

    `temperature` and `pressure` (n_node,) of each node.  The extremes are the lowest and highest pressures of the
    lowest and highest temperatures, and the other way round.
    """
    chosen: set[int] = set()
    for outer, inner in ((temperature, pressure), (pressure, temperature)):
        for at in (outer.min(), outer.max()):
            nodes = np.flatnonzero(outer == at)
            chosen |= {int(nodes[np.argmin(inner[nodes])]), int(nodes[np.argmax(inner[nodes])])}
    others = np.setdiff1d(np.arange(temperature.size), sorted(chosen))
    drawn = np.random.default_rng(seed).permutation(others)[: max(0, count - len(chosen))]
    return np.sort(np.concatenate([np.array(sorted(chosen), dtype=np.int64), drawn]))


@dataclass(frozen=True)
class Optimised:
    """Matched intervals made to fit, the largest `error` of the rows trained on, and the rows that decided it."""

    points: GPoints
    error: float
    worst: NDArray[np.int64]


def optimise_weights(rows: Rows, count: int, seed: int = 0, start: GPoints | None = None) -> Optimised:
    """Matched intervals, `count` of them, of the smallest largest error of transmission over all rows that is found.

    Begins at `start`, or at the fixed bounds of `g_points`.  The same arguments give the same weights.
    """
    points = g_points(count) if start is None else start
    worst = np.max(np.abs(rows.errors(points)), axis=1, initial=0.0)
    best = Optimised(points, float(np.max(worst, initial=0.0)), np.empty(0, dtype=np.int64))
    active = np.empty(0, dtype=np.int64)
    random = np.random.default_rng(seed)
    for _ in range(_ROUNDS if count > 1 else 0):
        new = _violators(worst, active, max(8, count))
        if not new.size:
            break
        active = np.concatenate([active, new])
        points = _descend(rows.part(active), points, random)
        worst = np.max(np.abs(rows.errors(points)), axis=1)
        if worst.max() < best.error:
            best = Optimised(points, float(worst.max()), active)
    return best


def _violators(worst: FloatArray, active: NDArray[np.int64], most: int) -> NDArray[np.int64]:
    """The worst rows that are not active yet, those whose error is near the largest of the active ones."""
    others = np.setdiff1d(np.arange(worst.size), active)
    level = 1.01 * worst[active].max() if active.size else 0.0
    others = others[worst[others] > level]
    return others[np.argsort(-worst[others], kind="stable")][:most]


def _descend(rows: Rows, points: GPoints, random: np.random.Generator) -> GPoints:
    logs = np.log(points.weights)
    steps = np.full(logs.size, _FIRST_STEP)
    best = _norm(rows, logs)
    for _ in range(_SWEEPS):
        before = best
        for i in random.permutation(logs.size):
            moved = False
            for sign in (1.0, -1.0):
                trial = logs.copy()
                trial[i] += sign * steps[i]
                value = _norm(rows, trial)
                if value < best:
                    logs, best, moved = trial, value, True
                    break
            if not moved:
                steps[i] *= 0.5
        if np.all(steps < _LAST_STEP) or (best > 0.999 * before and np.all(steps < 4.0 * _LAST_STEP)):
            break
    return _points(logs)


def _points(logs: FloatArray) -> GPoints:
    weights = np.maximum(np.exp(logs - logs.max()), _SMALLEST_WEIGHT)
    bounds = np.concatenate([[0.0], np.cumsum(weights / weights.sum())])
    bounds[-1] = 1.0
    return points_of_bounds(bounds)


def _norm(rows: Rows, logs: FloatArray) -> float:
    errors = np.abs(rows.errors(_points(logs)))
    largest = float(errors.max())
    return largest * float(np.sum((errors / largest) ** NORM) ** (1.0 / NORM)) if largest > 0.0 else 0.0
