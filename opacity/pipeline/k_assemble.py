"""A k-coefficient table from the shards of its units: points in g chosen, k made of the fine cells, checks, file."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.check.k_run import run_k_checks
from opacity.cross_sections.source import LineSource
from opacity.cross_sections.tolerance import regions
from opacity.errors import InputError, TableError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import band_edges
from opacity.k_coefficient.certificate import errors_at_node
from opacity.k_coefficient.choose import TRAINING_NODES, Training, Wanted, choose
from opacity.k_coefficient.collapse import CELL_BOUNDS, N_CELLS
from opacity.k_coefficient.means import means_of_sums
from opacity.k_coefficient.optimise import training_nodes
from opacity.k_coefficient.quadrature import GPoints, k_from_cells
from opacity.pipeline.k_units import BandUnit, missed_points
from opacity.pipeline.progress import Progress
from opacity.recipe.model import Recipe
from opacity.tables.band_shard import BandShard, read_band_shard
from opacity.tables.k_model import KTable
from opacity.tables.k_write import KInProgress, write_k_table

MOST_ROUNDS = 4
"""So often points in g are chosen again with the nodes at which they failed."""
WORSE_ELSEWHERE = 1.2
"""Weights are fitted again where nodes that they were not fitted to are worse by more than this."""
NODES_ADDED = 4


@dataclass
class ShardCells:
    """Fine cells by node from the shards, read a block of nodes at a time.

    `again` computes a unit whose shard was damaged.
    """

    units: Sequence[BandUnit]
    folder: Path
    nodes: tuple[int, ...]
    bands: int
    again: Callable[[BandUnit], None]
    _first: int = -1
    _block: list[BandShard] = field(default_factory=list)
    _parts: list[BandUnit] = field(default_factory=list)

    @property
    def shape(self) -> tuple[int, ...]:
        """(n_T, n_P, n_band, N_CELLS), or (n_node, n_band, N_CELLS)."""
        return (*self.nodes, self.bands, N_CELLS)

    def __getitem__(self, node: Any, /) -> FloatArray:
        """The cells of a node as f8, (n_band, N_CELLS)."""
        row, parts = self._found(node)
        return np.concatenate([one.cells[row] for one in parts]).astype(np.float64)

    def beside(self, node: tuple[int, ...]) -> tuple[FloatArray, FloatArray]:
        """Sums for means (4,) of a node, and points of each band, (n_band, 2)."""
        row, parts = self._found(node)
        sums = np.sum([one.sums[row] for one in parts], axis=0)
        return sums, np.concatenate([one.points[row] for one in parts])

    def _found(self, node: Any) -> tuple[int, list[BandShard]]:
        number = int(np.ravel_multi_index(tuple(node), self.nodes))
        if not self._parts or number not in self._parts[0].rows:
            self._parts = sorted((unit for unit in self.units if number in unit.rows), key=lambda unit: unit.first)
            self._block = [self._read(unit) for unit in self._parts]
        return number - self._parts[0].rows[0], self._block

    def _read(self, unit: BandUnit) -> BandShard:
        path = unit.path(self.folder)
        try:
            return read_band_shard(path)
        except TableError:
            self.again(unit)
            return read_band_shard(path)


@dataclass(frozen=True)
class _ByNode:
    """Values of a node made when they are asked for."""

    shape: tuple[int, ...]
    make: Callable[[tuple[int, ...]], NDArray[Any]]

    def __getitem__(self, node: Any, /) -> NDArray[Any]:
        return self.make(tuple(node))


@dataclass(frozen=True)
class KJob:
    """What a table is put together from: the recipe's `wanted` table, its lines, and what goes in as it is.

    `stated` gives what the lists say of their own uncertainty.
    """

    path: Path
    recipe: Recipe
    source: LineSource
    seed: int
    provenance: dict[str, Any]
    warnings: tuple[str, ...]
    workers: int
    quiet: bool
    stated: Callable[[], dict[str, Any]]


def assemble_k(job: KJob, cells: ShardCells, still_ours: Callable[[], None]) -> dict[str, Any]:
    """Write the table; the checks that were stored in it.  Raises OpacityError of the kind that fits."""
    recipe = job.recipe
    points, chosen = _choose(job, cells)
    beside = [cells.beside(node) for node in np.ndindex(cells.nodes)]
    planck, rosseland = means_of_sums(np.array([sums for sums, _ in beside]))
    spectra = np.array([had for _, had in beside])
    warnings = [*job.warnings, *missed_points(spectra, recipe.grid.node_list())]
    edges = band_edges(recipe)
    shape = (*cells.nodes, cells.bands, points.count)
    axes = (recipe.grid.temperature, recipe.grid.pressure)
    if recipe.grid.nodes is not None:
        axes = tuple(zip(*recipe.grid.nodes, strict=True))  # type: ignore[assignment]
    table = KTable(
        title=f"k-coefficients of {recipe.molecule.name} ({recipe.molecule.formula})",
        formula=recipe.molecule.formula,
        temperature=np.array(axes[0]),
        pressure=np.array(axes[1]),
        band_bounds=np.stack([edges[:-1], edges[1:]], axis=-1),
        g=points.g if points.g.ndim == 1 else points.g.mean(axis=0),
        g_bounds=np.stack([points.bounds[..., :-1], points.bounds[..., 1:]], axis=-1),
        g_weight=points.weights,
        k_coefficient=_ByNode(shape, lambda node: k_from_cells(cells[node], points)),
        quadrature=points.quadrature,
        recipe=recipe.text,
        provenance=job.provenance,
        checks={},
        profile=recipe.grid.nodes is not None,
        fine_cells=cells,
        cell_bounds=np.stack([CELL_BOUNDS[:-1], CELL_BOUNDS[1:]], axis=-1),
        planck_mean=planck.reshape(cells.nodes),
        rosseland_mean=rosseland.reshape(cells.nodes),
    )

    def check(written: KInProgress) -> dict[str, Any]:
        count = int(np.prod(cells.nodes))
        with Progress("checks", count, "nodes", job.quiet) as progress:
            report = run_k_checks(written, recipe, job.source, job.seed, chosen, progress.step, job.workers)
        beside = {"uncertainty": job.stated(), "warnings": warnings, "spectra": _spectra(recipe, spectra)}
        still_ours()
        return {**report.figures, **beside}

    return write_k_table(job.path, table, check)


def _spectra(recipe: Recipe, points: FloatArray) -> dict[str, Any]:
    """How fine the spectra were that were collapsed, and the largest error that is predicted of them."""
    of_bands = points[..., 0].sum(axis=1)
    return {
        "predicted_error": regions(recipe.profile.tolerance, recipe.profile.plinth).predicted_error,
        "fewest_points": float(of_bands.min()),
        "most_points": float(of_bands.max()),
    }


def _choose(job: KJob, cells: ShardCells) -> tuple[GPoints, dict[str, Any]]:
    """The points in g, and how they were chosen; certified at all nodes where a target is to be met."""
    choice = job.recipe.k_coefficient
    assert choice is not None
    wanted = Wanted(choice.g_points, choice.transmission_error, choice.quadrature, choice.weights)
    if not wanted.needs_cells:
        return choose(wanted, [], job.seed)
    temperature, pressure = (np.array(axis) for axis in zip(*job.recipe.grid.node_list(), strict=True))
    nodes = training_nodes(temperature, pressure, TRAINING_NODES, job.seed)
    with Progress("g points", MOST_ROUNDS, "rounds of fitting", job.quiet) as progress:
        for _ in range(MOST_ROUNDS):
            training = Training(np.array([cells[_index(cells, row)] for row in nodes]), pressure[nodes])
            points, how = choose(wanted, [training], job.seed)
            progress.step()
            errors = _largest_errors(cells, points, pressure)
            how |= {"trained_nodes": [list(job.recipe.grid.node_list()[row]) for row in nodes]}
            limit = how.get("target", WORSE_ELSEWHERE * how["trained_error"])
            others = np.setdiff1d(np.flatnonzero(errors > limit), nodes)
            if not others.size:
                return points, how
            nodes = np.sort(np.append(nodes, others[np.argsort(-errors[others], kind="stable")][:NODES_ADDED]))
    if "target" in how and errors.max() > how["target"]:
        expected, found = f"{how['target']:g} at every node", f"{errors.max():.2g} with {points.count} points"
        remedy = "choose a larger transmission_error"
        what = "transmission_error is not met"
        raise InputError(problem(job.recipe.path, what, expected=expected, found=found, remedy=remedy))
    return points, how


def _index(cells: ShardCells, row: int) -> tuple[int, ...]:
    return tuple(int(i) for i in np.unravel_index(row, cells.nodes))


def _largest_errors(cells: ShardCells, points: GPoints, pressure: FloatArray) -> FloatArray:
    """Size of the largest error of transmission at each node, (n_node,)."""
    found = np.empty(pressure.size)
    for row, at in enumerate(pressure):
        here = cells[_index(cells, row)]
        errors = errors_at_node(k_from_cells(here, points), points.weights, here, float(at))
        found[row] = np.max(np.abs(errors.transmission))
    return found
