"""Cross-sections by the kernels: tiles of the grid and nodes side by side in threads.

A tile is a fixed stretch of the grid and is always summed line by line in the same order, so the
result has the same bits for any number of workers.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass, field

import numpy as np

from opacity.chi_factors import NO_CHI, checked_rows
from opacity.cross_sections.planner import SMALLEST_TILE, Spacing, Tiles, by_cells, even_spacing, plan_tiles
from opacity.cross_sections.prepare import LinesAtTemperature, NodeLines
from opacity.cross_sections.tolerance import Regions
from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.kernels.accumulate import add_lines
from opacity.kernels.cells import Tree, grow_tree
from opacity.kernels.node_line import SMALLEST_Y, Formulas, LineColumns
from opacity.kernels.wings import add_lines_by_cells


@dataclass(frozen=True)
class Tally:
    """Tiles summed by cells, and point by point."""

    by_cells: int = 0
    by_points: int = 0

    def plus(self, other: Tally) -> Tally:
        """The sums of both."""
        return Tally(self.by_cells + other.by_cells, self.by_points + other.by_points)


@dataclass(frozen=True)
class NodeSum:
    """A node to be computed: lines at its temperature, its pressure (bar) and the cut-off there (cm-1)."""

    lines: LinesAtTemperature
    pressure: float
    cutoff: float


def add_spectra(
    sums: Sequence[FloatArray],
    nodes: Sequence[NodeSum],
    wavenumber: FloatArray,
    regions: Regions,
    plinth: bool = False,
    chi: FloatArray | None = None,
    executor: Executor | None = None,
    cells: bool | None = None,
    done: Callable[[int, Tally], None] = lambda node, tally: None,
) -> None:
    """Add each node's cross-section (cm2/molecule) to its row of `sums`, (n_nu,), within the tolerance of `regions`.

    `wavenumber` rises and is contiguous; lines are sorted by unshifted wavenumber.  `chi` is a table as in
    `kernels.chi`.  `cells` forces tiles that have cells to be summed by them, or by points; by default whichever is
    predicted to be quicker.  With an executor of threads tiles and nodes are computed side by side.  `done` is told of
    each node when it is whole, in their order, and how its tiles were summed.
    """
    table = NO_CHI if chi is None else checked_rows(chi)
    work = _Work(wavenumber, regions, plinth, table, even_spacing(wavenumber), cells)
    jobs = list(_jobs(nodes, wavenumber, work.spacing))

    def do(job: _Job) -> bool:
        return work.tile(sums[job.node][job.part], job.part, nodes[job.node], job.tiles)

    tally = Tally()
    for job, celled in zip(jobs, map(do, jobs) if executor is None else executor.map(do, jobs), strict=True):
        tally = tally.plus(Tally(int(celled), int(not celled)))
        if job.part.stop == wavenumber.size:
            done(job.node, tally)
            tally = Tally()


def spectrum(
    node: NodeLines,
    wavenumber: FloatArray,
    cutoff: float,
    regions: Regions,
    plinth: bool = False,
    chi: FloatArray | None = None,
    executor: Executor | None = None,
    cells: bool | None = None,
) -> FloatArray:
    """Cross-section (cm2/molecule) of one node, (n_nu,); arguments as those of `add_spectra`."""
    sigma = np.zeros(wavenumber.size)
    add_spectra([sigma], [NodeSum(node.per_bar(), 1.0, cutoff)], wavenumber, regions, plinth, chi, executor, cells)
    return sigma


@dataclass(frozen=True)
class _Job:
    node: int
    tiles: Tiles
    part: slice


def _jobs(nodes: Sequence[NodeSum], wavenumber: FloatArray, spacing: Spacing | None) -> Iterator[_Job]:
    for number, node in enumerate(nodes):
        tiles = plan_tiles(wavenumber, spacing, node.cutoff)
        for start in range(0, wavenumber.size, tiles.points):
            yield _Job(number, tiles, slice(start, min(start + tiles.points, wavenumber.size)))


@dataclass(frozen=True)
class _Work:
    wavenumber: FloatArray
    regions: Regions
    plinth: bool
    chi: FloatArray
    spacing: Spacing | None
    cells: bool | None
    trees: dict[tuple[int, int, int], Tree] = field(default_factory=dict)

    def tile(self, out: FloatArray, part: slice, node: NodeSum, tiles: Tiles) -> bool:
        """Fill one tile, (n_points,); whether it was done by cells."""
        nu = self.wavenumber[part]
        first, last = _in_reach(node, nu)
        if tiles.spacing is not None and tiles.levels and self._chosen(tiles, last - first, nu.size):
            self._sum(out, nu, first, last, node, self._tree(part, tiles, tiles.spacing))
            return True
        # Few enough points to stay in the fastest memory.
        for start in range(0, nu.size, SMALLEST_TILE):
            piece = slice(start, start + SMALLEST_TILE)
            self._sum(out[piece], nu[piece], *_in_reach(node, nu[piece]), node, None)
        return False

    def _chosen(self, tiles: Tiles, lines: int, points: int) -> bool:
        return by_cells(tiles, lines, points) if self.cells is None else self.cells

    def _tree(self, part: slice, tiles: Tiles, spacing: Spacing) -> Tree:
        """The tree of a tile, which all nodes share."""
        key = (part.start, part.stop, tiles.levels)
        if key not in self.trees:
            first = float(self.wavenumber[part.start])
            start, axis = (math.log(first), self.regions.axis_in_log) if spacing.in_log else (first, self.regions.axis)
            size = part.stop - part.start
            self.trees[key] = grow_tree(size, tiles.levels, start, spacing.step, spacing.in_log, axis)
        return self.trees[key]

    def _sum(self, out: FloatArray, nu: FloatArray, first: int, last: int, node: NodeSum, tree: Tree | None) -> None:
        if first >= last:
            return
        lines, regions = node.lines, self.regions
        columns = LineColumns(lines.wavenumber, lines.shift, lines.strength, lines.lorentz, lines.doppler)
        formulas = Formulas(regions.near_radius, regions.far_radius, regions.exponential)
        choice = (columns, node.pressure, node.cutoff, self.plinth, self.chi, formulas)
        if tree is None:
            bad = add_lines(out, nu, first, last, *choice)
        else:
            bad = add_lines_by_cells(out, nu, tree, first, last, *choice)
        if bad >= 0:
            raise InputError(
                problem(
                    f"node {lines.temperature:g} K, {node.pressure:g} bar",
                    f"pressure width out of range (line at {lines.wavenumber[bad]:.6f} cm-1)",
                    expected=f"finite, and {SMALLEST_Y:g} or more of the Doppler width",
                    found=f"{node.pressure * lines.lorentz[bad]:g} cm-1",
                )
            )


def _in_reach(node: NodeSum, nu: FloatArray) -> tuple[int, int]:
    # A little wider than the cut-off: the kernel decides point by point.
    margin = node.cutoff * (1.0 + 1e-12) + 1e-9 * (1.0 + float(nu[-1]))
    first, last = np.searchsorted(node.lines.wavenumber, (nu[0] - margin, nu[-1] + margin))
    return int(first), int(last)
