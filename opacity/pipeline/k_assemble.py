"""A k-coefficient table from the shards of its units: points in g chosen, k made of the fine cells, checks, file."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.check.k_run import run_k_checks
from opacity.cross_sections.source import LineSource
from opacity.cross_sections.tolerance import regions
from opacity.errors import TableError
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import band_edges
from opacity.k_coefficient.choose import Wanted
from opacity.k_coefficient.collapse import CELL_BOUNDS, N_CELLS
from opacity.k_coefficient.means import means_of_sums
from opacity.k_coefficient.quadrature import GPoints, k_from_cells
from opacity.pipeline.k_choose import MOST_ROUNDS, NodeCells, choose_certified
from opacity.pipeline.k_units import BandUnit, missed_points
from opacity.pipeline.open_lists import located
from opacity.pipeline.progress import Progress
from opacity.pipeline.resources import several
from opacity.recipe.model import Recipe
from opacity.recipe.positions import KeyPath
from opacity.tables.band_shard import BandShard, read_band_shard
from opacity.tables.k_model import KTable
from opacity.tables.k_write import KInProgress, write_k_table


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
    processors: set[str] = field(default_factory=set)
    _held: dict[int, tuple[BandUnit, BandShard]] = field(default_factory=dict)

    @property
    def shape(self) -> tuple[int, ...]:
        """(n_T, n_P, n_band, N_CELLS), or (n_node, n_band, N_CELLS)."""
        return (*self.nodes, self.bands, N_CELLS)

    def __getitem__(self, node: Any, /) -> FloatArray:
        """The cells of a node as f8, (n_band, N_CELLS)."""
        return np.concatenate([one.cells[row] for row, one in self._found(node)]).astype(np.float64)

    def beside(self, node: tuple[int, ...]) -> tuple[FloatArray, FloatArray]:
        """Sums for means (4,) of a node, and points of each band, (n_band, 2)."""
        parts = self._found(node)
        return np.sum([one.sums[row] for row, one in parts], axis=0), np.concatenate(
            [one.points[row] for row, one in parts]
        )

    def _found(self, node: Any) -> list[tuple[int, BandShard]]:
        """The shards that hold a node, by rising bands, and its row in each: units differ in their rows."""
        number = int(np.ravel_multi_index(tuple(node), self.nodes))
        if not self._held or any(number not in unit.rows for unit, _ in self._held.values()):
            here = sorted((unit for unit in self.units if number in unit.rows), key=lambda unit: unit.first)
            held = self._held
            self._held = {
                one.number: held[one.number] if one.number in held else (one, self._read(one)) for one in here
            }
            self.processors |= {shard.processor for _, shard in self._held.values()}
        return [(number - unit.rows[0], shard) for unit, shard in self._held.values()]

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
    warnings = [*job.warnings, *missed_points(spectra, recipe.grid.node_list()), *several(cells.processors)]
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
    """The points in g, and how they were chosen."""
    choice, nodes = job.recipe.k_coefficient, job.recipe.grid.node_list()
    assert choice is not None
    wanted = Wanted(choice.g_points, choice.transmission_error, choice.quadrature, choice.weights)
    table = NodeCells(lambda row: cells[np.unravel_index(row, cells.nodes)], nodes)
    keys: dict[str, KeyPath] = {"transmission_error": ("k_coefficient", "transmission_error")}
    with (
        located(job.recipe, keys),
        ThreadPoolExecutor(job.workers) as executor,
        Progress("g points", MOST_ROUNDS, "rounds of fitting", job.quiet) as progress,
    ):
        points, how, (rows,) = choose_certified(wanted, [table], job.seed, progress.step, executor)
    return points, {**how, "trained_nodes": [list(nodes[row]) for row in rows]} if rows.size else how
