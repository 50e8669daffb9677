"""The points in g of a table, as a recipe asks for them: fixed, made to fit all nodes and bands, or each band."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.optimise import (
    ACCEPTED,
    TRIALS,
    TRIALS_FROM_FITTED,
    Optimised,
    Rows,
    choose_g_points,
    joined,
    optimise_weights,
    rows_by_band,
    rows_of,
)
from opacity.k_coefficient.quadrature import MOST_POINTS, GPoints, g_points, points_of_bounds

TRAINING_NODES = 18
MOST_ROWS = 4000
"""Bands at nodes that weights are fitted to, at most: of more bands than that allows some are drawn."""


@dataclass(frozen=True)
class Wanted:
    """What is asked for: `count` points, None for as many as `transmission_error` needs; `weights` are "optimised",
    "optimised-per-band" or "fixed".
    """

    count: int | None
    transmission_error: float
    quadrature: str
    weights: str

    @property
    def needs_cells(self) -> bool:
        """Whether fine cells decide."""
        return self.count is None or self.weights != "fixed"


@dataclass(frozen=True)
class Training:
    """Fine `cells` (n_node, n_band, N_CELLS), cm2, of one species at some nodes, at `pressure` (n_node,), bar."""

    cells: FloatArray
    pressure: FloatArray


def choose(
    wanted: Wanted,
    training: Sequence[Training],
    seed: int,
    start: GPoints | None = None,
    executor: Executor | None = None,
) -> tuple[GPoints, dict[str, Any]]:
    """The points in g and, as plain values, how they were chosen: "weights", "trained_error", and "target" if any.

    With several species, all of the same bands, the points serve all of them.  `training` is not looked at for a fixed
    number of fixed points.  Points found for some of the training before are where to `start`.  With an executor of
    threads bands of weights of their own are fitted side by side, to the same bits.  Raises InputError for a target
    that cannot be met.
    """
    target = {} if wanted.count is not None else {"target": wanted.transmission_error}
    how: dict[str, Any] = {"weights": wanted.weights, **target}
    if not wanted.needs_cells:
        assert wanted.count is not None
        return g_points(wanted.count, wanted.quadrature), how
    if wanted.weights == "optimised-per-band":
        points, error = _per_band(wanted, training, seed, start, executor)
    else:
        rows = joined([rows_of(one.cells, one.pressure) for one in training])
        points, error = _shared(wanted, rows, seed, start)
    return points, {**how, "trained_error": error}


def some_bands(nodes: int, bands: int, seed: int) -> NDArray[np.int64]:
    """Numbers of the bands, rising, that weights are fitted to at so many nodes: all, or some drawn by `seed`."""
    most = max(MOST_ROWS // max(nodes, 1), 1)
    if bands <= most:
        return np.arange(bands)
    return np.sort(np.random.default_rng(seed).permutation(bands)[:most])


def _shared(wanted: Wanted, rows: Rows, seed: int, start: GPoints | None) -> tuple[GPoints, float]:
    """Points shared by all nodes and bands, and their largest error there."""
    if not len(rows.cells):
        return g_points(wanted.count or 1), 0.0
    if wanted.weights == "fixed":
        return _fewest_fixed(rows, wanted.transmission_error)
    if wanted.count is not None:
        found = optimise_weights(rows, wanted.count, seed, start, _trials(start))
        return found.points, found.error
    chosen = choose_g_points(wanted.transmission_error, rows, rows, seed, start=start)
    return chosen.points, chosen.trained_error


def _trials(start: GPoints | None) -> int:
    return TRIALS if start is None else TRIALS_FROM_FITTED


def _fewest_fixed(rows: Rows, target: float) -> tuple[GPoints, float]:
    for count in range(1, MOST_POINTS + 1):
        points = g_points(count)
        error = float(np.max(np.abs(rows.errors(points)), initial=0.0))
        if error <= ACCEPTED * target:
            return points, error
    expected = f"an error that {MOST_POINTS} points can meet"
    raise InputError(problem("transmission_error", "too small", expected=expected, found=target))


def _per_band(
    wanted: Wanted, training: Sequence[Training], seed: int, start: GPoints | None, executor: Executor | None
) -> tuple[GPoints, float]:
    """As many points for every band, at bounds of each band's own, and the largest error of any."""
    side_by_side: Callable[..., Iterable[Any]] = map if executor is None else executor.map
    by_species = [rows_by_band(one.cells, one.pressure) for one in training]
    bands = [joined(parts) for parts in zip(*by_species, strict=True)]
    starts: list[GPoints | None] = [None] * len(bands)
    if start is not None:
        starts = [points_of_bounds(bounds) for bounds in start.bounds]

    def needed(rows: Rows, start: GPoints | None) -> int:
        return choose_g_points(wanted.transmission_error, rows, rows, seed, start=start).points.count

    count = wanted.count
    if count is None:
        filled = [(rows, its) for rows, its in zip(bands, starts, strict=True) if len(rows.cells)]
        count = max(side_by_side(needed, *zip(*filled, strict=True)), default=1) if filled else 1
    starts = [its if its is not None and its.count == count else None for its in starts]

    def fitted(rows: Rows, start: GPoints | None) -> Optimised:
        return optimise_weights(rows, count, seed, start, _trials(start))

    found = list(side_by_side(fitted, bands, starts))
    return points_of_bounds(np.array([one.points.bounds for one in found])), max(one.error for one in found)
