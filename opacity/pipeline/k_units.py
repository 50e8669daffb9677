"""Units of a k-coefficient table: whole bands and some nodes, each spectrum at the step that its lines need.

Spectra are collapsed to fine cells where they are made and thrown away; any number of points in g can be chosen from
the cells afterwards.
"""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from opacity.cross_sections.source import LINES_AT_ONCE, LineSource
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import band_edges
from opacity.k_coefficient.collapse import N_CELLS
from opacity.k_coefficient.means import mean_sums
from opacity.k_coefficient.spectra import collapsed, lines_of_bands, margin_of, points_needed
from opacity.kernels.jit import source_hash
from opacity.kernels.line_width import doppler_share
from opacity.pipeline.resources import processor
from opacity.recipe.model import Recipe
from opacity.tables.band_shard import BandShard, write_band_shard
from opacity.tables.sealed import ENDING

POINTS_A_UNIT = 1 << 20
"""Points of a unit's spectrum at its coldest node, where it has more bands than one."""
VALUES_A_UNIT = 1 << 24
"""Points of all spectra of a unit, where one temperature has fewer."""


@dataclass(frozen=True)
class BandUnit:
    """Bands from `first` to before `last` at the nodes `rows` (numbers in stored order); `name` is the hash of its
    inputs.
    """

    number: int
    first: int
    last: int
    rows: tuple[int, ...]
    name: str

    def path(self, folder: Path) -> Path:
        """Where its shard lies."""
        return folder / f"{self.name}{ENDING}"

    def do(self, recipe: Recipe, source: LineSource, path: Path, executor: Executor | None = None) -> None:
        """Compute the unit and write its shard."""
        write_band_shard(path, compute_bands(recipe, source, self, executor))


def band_units(recipe: Recipe, source: LineSource, inputs_sha256: str, heaviest: float) -> tuple[BandUnit, ...]:
    """All units; `heaviest` is the mass (g/mol) of the heaviest isotopologue, whose lines are the narrowest."""
    edges, nodes = band_edges(recipe), recipe.grid.node_list()
    pressures = len(recipe.grid.pressure) if recipe.grid.nodes is None else 1
    coldest = min(temperature for temperature, _ in nodes)
    points = _points_at_most(edges, coldest, heaviest)
    found: list[BandUnit] = []
    for first, last in _groups(edges, points, source, margin_of(recipe.profile)):
        temperatures = max(VALUES_A_UNIT // int(pressures * points[first:last].sum()), 1)
        size = pressures * min(temperatures, math.ceil(len(nodes) / pressures))
        for row in range(0, len(nodes), size):
            rows = tuple(range(row, min(row + size, len(nodes))))
            text = json.dumps([inputs_sha256, source_hash(), "bands", first, last, rows[0], rows[-1]])
            name = hashlib.sha256(text.encode("ascii")).hexdigest()[:32]
            found.append(BandUnit(len(found), first, last, rows, name))
    return tuple(found)


def _points_at_most(edges: FloatArray, coldest: float, heaviest: float) -> FloatArray:
    """Points of each band where only Doppler's width is left of the lines, at the coldest node, (n_band,)."""
    share = float(doppler_share(coldest, np.array([heaviest]))[0])
    return points_needed(np.diff(edges), np.maximum(edges[:-1] * share, np.diff(edges) * 1e-7))


def _groups(edges: FloatArray, points: FloatArray, source: LineSource, margin: float) -> list[tuple[int, int]]:
    """Runs of bands whose spectrum and lines can be held at once; the shortest are one band."""
    found: list[tuple[int, int]] = []
    first = 0
    for band in range(1, points.size + 1):
        if band == points.size:
            found.append((first, band))
            break
        many = points[first : band + 1].sum() > POINTS_A_UNIT
        if many or source.count(float(edges[first]) - margin, float(edges[band + 1]) + margin) > LINES_AT_ONCE:
            found.append((first, band))
            first = band
    return found


def compute_bands(recipe: Recipe, source: LineSource, unit: BandUnit, executor: Executor | None = None) -> BandShard:
    """The fine cells of a unit, node by node; with an executor of threads the parts of a node are done side by side."""
    edges = band_edges(recipe)
    lowest, edges = float(edges[0]), edges[unit.first : unit.last + 1]
    nodes = [recipe.grid.node_list()[row] for row in unit.rows]
    places: dict[float, list[int]] = {}
    for place, (temperature, _) in enumerate(nodes):
        places.setdefault(temperature, []).append(place)
    cells = np.empty((len(nodes), edges.size - 1, N_CELLS))
    sums, points = np.zeros((len(nodes), 4)), np.zeros((len(nodes), edges.size - 1, 2))
    for lines in lines_of_bands(source, recipe.profile, edges, list(places)):
        for place in places[lines.temperature]:

            def seen(nu: FloatArray, sigma: FloatArray, place: int = place, t: float = lines.temperature) -> None:
                sums[place] += mean_sums(sigma, nu, t, lowest)

            one = collapsed(lines, edges, nodes[place][1], executor, seen)
            cells[place], points[place] = one.cells, one.points
    return BandShard(cells, sums, points, processor())


def missed_points(points: FloatArray, nodes: Sequence[tuple[float, float]]) -> list[str]:
    """A warning where bands had fewer points than they needed; `points` (n_node, n_band, 2)."""
    short = np.argwhere(points[..., 0] < points[..., 1])
    if not short.size:
        return []
    node, band = short[np.argmax(points[tuple(short.T)][:, 1])]
    temperature, pressure = nodes[node]
    had, needed = points[node, band]
    place = f"at {temperature:g} K, {pressure:g} bar band {band} has {had:.3g} points and needs {needed:.3g}"
    return [
        f"spectra of {len(short)} bands and nodes are too coarse for their lines: {place};"
        " take narrower bands or a higher lowest pressure"
    ]
