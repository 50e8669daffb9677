"""Weights of matched intervals made to fit: the fewest points, shared, that keep every transmission within a target.

The largest error of transmission over all nodes, bands and columns is made small by a descent coordinate by
coordinate on the logarithms of the weights.  What is descended is a norm of high power of the errors of a few rows,
the worst ones; a row is a band at a node.  When it descends no further, the worst of all other rows are added and it
goes on.
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
from opacity.kernels.fit import bounds_of_logs, descend, error_rows

NORMS = (2, 4)
"""The norms descended, of powers 12 and 48 (3 times 2 to these): the flatter first, which leads past small hollows."""
TRIALS = 12
TRIALS_FROM_FITTED = 3
"""As many trials are enough from weights that were fitted to most of the rows before."""
ACCEPTED = 0.6
"""Share of the target that the rows trained on must keep: others were seen to have up to 1.7 times their error."""

_POWERS = (2, 3)
_ROUNDS = 8
_SWEEPS = 40
_THROWS = (2.0, 1.0, 0.5)
_ADDED = 64
_HOPELESS = 1.1


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
        if points.quadrature != "matched":
            return transmission(k_from_cells(self.cells, points), points.weights, self.columns) - self.truth
        errors = np.empty(self.truth.shape)
        error_rows(self.cells, CELL_WIDTHS, self.columns, self.truth, points.bounds, points.depth, errors)
        return errors


def rows_of(cells: FloatArray, pressure: FloatArray) -> Rows:
    """Rows out of fine cells (n_node, n_band, N_CELLS), cm2, of nodes at `pressure` (n_node,), bar, without empty ones.

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
    """Numbers of nodes to train on, rising: all extremes, then others drawn by `seed`, up to `count`.

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


def optimise_weights(
    rows: Rows, count: int, seed: int = 0, start: GPoints | None = None, trials: int = TRIALS
) -> Optimised:
    """Matched intervals, `count` of them, of the smallest largest error of transmission over all rows that is found.

    Begins at `start`, or at the fixed bounds of `g_points` and then at g_i = 1 - (1 - i/n)^2 and ^3; further `trials`
    begin at the best weights so far, thrown off by random factors, since the descent may end where there is better
    beyond.  The same arguments give the same
    weights.
    """
    points = g_points(count) if start is None else start
    errors = np.max(np.abs(rows.errors(points)), axis=1, initial=0.0)
    best = Optimised(points, float(np.max(errors, initial=0.0)), np.empty(0, dtype=np.int64))
    if count == 1 or best.error == 0.0:
        return best
    random = np.random.default_rng(seed)
    active = _worst_others(errors, best.worst, max(8, count))
    for trial in range(trials):
        logs = np.log(best.points.weights)
        if start is None and trial in _POWERS:
            logs = np.log(np.diff(1.0 - (1.0 - np.arange(count + 1) / count) ** trial))
        elif trial:
            logs = logs + random.normal(0.0, _THROWS[trial % len(_THROWS)], logs.size)
        for _ in range(_ROUNDS):
            for norm in NORMS:
                logs = _descend(rows.part(active), logs, norm, random)
            points = points_of_bounds(bounds_of_logs(logs))
            errors = np.max(np.abs(rows.errors(points)), axis=1)
            if errors.max() < best.error:
                best = Optimised(points, float(errors.max()), active)
            new = _worst_others(errors, active, max(8, count))
            # Not worth going on where the active rows alone do no better than the best so far.
            hopeless = errors[active].max() > _HOPELESS * best.error
            active = np.concatenate([active, new])
            if not new.size or hopeless:
                break
    return best


def _worst_others(errors: FloatArray, active: NDArray[np.int64], most: int) -> NDArray[np.int64]:
    """The worst rows that are not active yet, of those whose error is above that of the active ones."""
    others = np.setdiff1d(np.arange(errors.size), active)
    level = 1.01 * errors[active].max() if active.size else 0.0
    others = others[errors[others] > level]
    return others[np.argsort(-errors[others], kind="stable")][:most]


def _descend(rows: Rows, logs: FloatArray, squarings: int, random: np.random.Generator) -> FloatArray:
    """Logarithms of weights from which no step of one of them alone makes the norm of the errors less."""
    turns = random.permuted(np.tile(np.arange(logs.size), (_SWEEPS, 1)), axis=1)
    logs = logs.copy()
    depth = points_of_bounds(bounds_of_logs(logs)).depth
    descend(rows.cells, CELL_WIDTHS, rows.columns, rows.truth, depth, squarings, turns, logs)
    return logs


@dataclass(frozen=True)
class Chosen:
    """The points chosen for a target: largest errors of the rows trained on and of all, and how many there were."""

    points: GPoints
    target: float
    trained_error: float
    error: float
    trained_rows: int
    rows: int
    seed: int


def choose_g_points(
    transmission_error: float,
    training: Rows,
    everything: Rows,
    seed: int = 0,
    accepted: float = ACCEPTED,
    start: GPoints | None = None,
) -> Chosen:
    """The fewest matched intervals found that keep every transmission within `transmission_error`.

    The weights are fitted to the rows `training` until their largest error is within the share `accepted` of the
    target, and certified at the rows `everything`; where that fails its violators are trained on as well.  With points
    to `start` from, found for fewer rows, none fewer than those are looked for.
    Raises InputError for a target that 200 points do not meet.
    """
    if not 0.0 < transmission_error < 1.0:
        expected = "a number between 0 and 1"
        raise InputError(problem("transmission_error", "impossible", expected=expected, found=transmission_error))
    goal = accepted * transmission_error
    found = _fewest(goal, training, seed) if start is None else _upwards(goal, training, seed, start)
    while found is not None:
        errors = np.max(np.abs(everything.errors(found.points)), axis=1, initial=0.0)
        error = float(np.max(errors, initial=0.0))
        if error <= transmission_error:
            sizes = (len(training.cells), len(everything.cells))
            return Chosen(found.points, transmission_error, found.error, error, *sizes, seed)
        violators = np.flatnonzero(errors > goal)
        violators = violators[np.argsort(-errors[violators], kind="stable")][:_ADDED]
        training = joined([training, everything.part(violators)])
        found = _upwards(goal, training, seed, found.points)
    expected = f"an error that {MOST_POINTS} points can meet"
    raise InputError(problem("transmission_error", "too small", expected=expected, found=transmission_error))


def _fewest(goal: float, rows: Rows, seed: int) -> Optimised | None:
    """The fewest points found that meet the goal, by doubling and halving and then downwards; None where none do.

    Each number of points begins at the weights of the one before.
    """
    low, high, best = 0, 1, optimise_weights(rows, 1, seed)
    while best.error > goal and high < MOST_POINTS:
        low, high = high, min(2 * high, MOST_POINTS)
        best = optimise_weights(rows, high, seed, _resampled(best.points, high), trials=2)
    if best.error > goal:
        return None
    while high - low > 1:
        middle = (low + high) // 2
        found = optimise_weights(rows, middle, seed, _resampled(best.points, middle), trials=2)
        if found.error <= goal:
            high, best = middle, found
        else:
            low = middle
    # More trials may do with less.
    while high > 1:
        found = optimise_weights(rows, high - 1, seed, _resampled(best.points, high - 1))
        if found.error > goal:
            break
        high, best = high - 1, found
    return best


def _upwards(goal: float, rows: Rows, seed: int, points: GPoints) -> Optimised | None:
    """Points that meet the goal, as few more than those given as do."""
    for count in range(points.count, MOST_POINTS + 1):
        if count == points.count:
            found = optimise_weights(rows, count, seed, points, TRIALS_FROM_FITTED)
        else:
            found = optimise_weights(rows, count, seed, _resampled(points, count))
        if found.error <= goal:
            return found
    return None


def _resampled(points: GPoints, count: int) -> GPoints:
    """As many intervals, as dense in g as some others; the fixed ones for want of any shape."""
    if points.count < 4:
        return g_points(count)
    places = np.linspace(0.0, 1.0, points.count + 1)
    # The distance from the top in logarithms, since the last intervals are small.
    room = np.interp(np.linspace(0.0, 1.0, count + 1)[:-1], places[:-1], np.log(1.0 - points.bounds[:-1]))
    bounds = np.concatenate([1.0 - np.exp(room), [1.0]])
    bounds[0] = 0.0
    return points_of_bounds(bounds) if np.all(np.diff(bounds) > 0.0) else g_points(count)
