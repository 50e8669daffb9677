"""Points in g for tables, fitted to some of their nodes and certified at all of them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.certificate import errors_at_node
from opacity.k_coefficient.choose import TRAINING_NODES, Training, Wanted, choose, some_bands
from opacity.k_coefficient.optimise import training_nodes
from opacity.k_coefficient.quadrature import GPoints, k_from_cells

MOST_ROUNDS = 4
"""So often points in g are chosen again with the nodes at which they failed."""
WORSE_ELSEWHERE = 1.2
"""Weights are fitted again where nodes that they were not fitted to are worse by more than this."""
NODES_ADDED = 4
ROUNDING = 1e-6
TIGHTER = 0.9
"""A target that bands miss at nodes that were fitted to, since not all bands were, is made smaller by what they miss it
by and by this much more."""

_NODES_AT_ONCE = 8


@dataclass(frozen=True)
class NodeCells:
    """A table to choose points for: the fine `cells` (n_band, N_CELLS) of a node by its number, and all `nodes` as
    (T, P).
    """

    cells: Callable[[int], FloatArray]
    nodes: tuple[tuple[float, float], ...]

    @property
    def temperature(self) -> FloatArray:
        """Temperatures of all nodes (n_node,), K."""
        return np.array([node[0] for node in self.nodes])

    @property
    def pressure(self) -> FloatArray:
        """Pressures of all nodes (n_node,), bar."""
        return np.array([node[1] for node in self.nodes])


def choose_certified(
    wanted: Wanted,
    tables: Sequence[NodeCells],
    seed: int,
    rounds: Callable[[], None] = lambda: None,
    executor: Executor | None = None,
) -> tuple[GPoints, dict[str, Any], list[NDArray[np.int64]]]:
    """The points in g for all `tables`, how they were chosen, and the numbers of the nodes of each that they were
    fitted to.

    A target is met in every band at every node of every table; `rounds` is told of each round of fitting, of which each
    begins at the points of the one before.  An executor of threads changes no bit.  Raises InputError for a target that
    cannot be met.
    """
    if not wanted.needs_cells:
        return *choose(wanted, [], seed), [np.empty(0, dtype=np.int64) for _ in tables]
    nodes = [training_nodes(one.temperature, one.pressure, TRAINING_NODES, seed) for one in tables]
    aimed, target = wanted, wanted.transmission_error if wanted.count is None else None
    trained, points = nodes, None
    for _ in range(MOST_ROUNDS):
        trained = nodes
        training = [
            Training(np.array([_some(one.cells(row), len(rows), wanted, seed) for row in rows]), one.pressure[rows])
            for one, rows in zip(tables, nodes, strict=True)
        ]
        points, how = _chosen(aimed, training, seed, points, executor)
        if target is not None:
            how["target"] = target
        rounds()
        errors = [_largest_errors(one, points, executor) for one in tables]
        # Rounding to f4 when k are stored must not undo it.
        limit = WORSE_ELSEWHERE * how["trained_error"] if target is None else target * (1.0 - ROUNDING)
        failed = [np.setdiff1d(np.flatnonzero(found > limit), rows) for found, rows in zip(errors, nodes, strict=True)]
        largest = max(float(found.max()) for found in errors)
        if not any(one.size for one in failed):
            if target is None or largest <= limit:
                points, how = _fewer(aimed, training, tables, seed, (points, how), limit, executor)
                return points, how, trained
            aimed = replace(aimed, transmission_error=TIGHTER * aimed.transmission_error * target / largest)
        nodes = [
            np.sort(np.append(rows, one[np.argsort(-found[one], kind="stable")][:NODES_ADDED]))
            for rows, one, found in zip(nodes, failed, errors, strict=True)
        ]
    assert points is not None
    if target is not None and largest > limit:
        expected, found_ = f"{target:g} at every node", f"{largest:.2g} with {points.count} points"
        remedy = "choose a larger one"
        error = InputError(problem("transmission_error", "is not met", expected=expected, found=found_, remedy=remedy))
        raise error.about("transmission_error")
    return points, how, trained


def _some(cells: FloatArray, nodes: int, wanted: Wanted, seed: int) -> FloatArray:
    """Of a node's cells (n_band, N_CELLS) those of the bands that weights are fitted to at so many nodes."""
    return cells if wanted.weights == "optimised-per-band" else cells[some_bands(nodes, len(cells), seed)]


def _fewer(
    wanted: Wanted,
    training: Sequence[Training],
    tables: Sequence[NodeCells],
    seed: int,
    chosen: tuple[GPoints, dict[str, Any]],
    limit: float,
    executor: Executor | None,
) -> tuple[GPoints, dict[str, Any]]:
    """Fewer points where they are certified too: those chosen keep a margin at the nodes that they are fitted to."""
    if wanted.count is not None or wanted.weights == "fixed":
        return chosen
    points, how = chosen
    while points.count > 1:
        fewer, said = _chosen(replace(wanted, count=points.count - 1), training, seed, None, executor)
        if max(float(_largest_errors(one, fewer, executor).max()) for one in tables) > limit:
            break
        points, how = fewer, {**how, **said}
    return points, how


def _chosen(
    wanted: Wanted, training: Sequence[Training], seed: int, start: GPoints | None, executor: Executor | None
) -> tuple[GPoints, dict[str, Any]]:
    """As `choose`; what it raises names the argument that it is about."""
    try:
        return choose(wanted, training, seed, start, executor)
    except InputError as error:
        raise error.about(str(error).partition(":")[0]) from error


def _largest_errors(table: NodeCells, points: GPoints, executor: Executor | None) -> FloatArray:
    """Size of the largest error of transmission at each node, (n_node,)."""

    def largest(cells: FloatArray, pressure: float) -> float:
        errors = errors_at_node(k_from_cells(cells, points), points.weights, cells, pressure)
        return float(np.max(np.abs(errors.transmission)))

    found: list[float] = []
    side_by_side = map if executor is None else executor.map
    # Cells are read one node after the other, a few at a time.
    for first in range(0, len(table.nodes), _NODES_AT_ONCE):
        some = range(first, min(first + _NODES_AT_ONCE, len(table.nodes)))
        cells, pressures = [table.cells(row) for row in some], table.pressure[some.start : some.stop].tolist()
        found += side_by_side(largest, cells, pressures)
    return np.array(found)
