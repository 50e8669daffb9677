"""Units of a k-coefficient table: whole bands and some nodes, each spectrum at the step that its lines need.

Spectra are collapsed to fine cells where they are made and thrown away; any number of points in g can be chosen from
the cells afterwards.
"""

from __future__ import annotations

import hashlib
import json
import math
from concurrent.futures import Executor
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np

from opacity.check.closure import resolution_of
from opacity.cross_sections.compute import NodeSum, add_spectra
from opacity.cross_sections.prepare import LinesAtTemperature
from opacity.cross_sections.source import LineSource, pieces
from opacity.cross_sections.tolerance import regions
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import edges_of_resolving_power, edges_of_wavelengths, edges_of_width
from opacity.k_coefficient.collapse import N_CELLS, fine_cells
from opacity.k_coefficient.means import mean_sums
from opacity.kernels.jit import source_hash
from opacity.pipeline.units import NODES_PER_READING, WINDOW, margin_of
from opacity.recipe.model import Recipe
from opacity.tables.band_shard import BandShard, write_band_shard
from opacity.tables.sealed import ENDING

POINTS_A_HALF_WIDTH = 2.0
"""Points to a half-width (HWHM) of the narrowest line."""
FEWEST_POINTS = 512
"""Points that a band has at least."""
MOST_POINTS = 1 << 22
"""Points of a spectrum at most: where more would be needed the step is coarser, and the table says at which nodes."""


@dataclass(frozen=True)
class BandUnit:
    """Bands from `first` to before `last` at the nodes `rows`; `name` is the hash of its inputs."""

    number: int
    first: int
    last: int
    rows: tuple[int, ...]
    name: str

    def path(self, folder: Path) -> Path:
        """Where its shard lies."""
        return folder / f"{self.name}{ENDING}"


def band_edges(recipe: Recipe) -> FloatArray:
    """Edges of a recipe's bands, rising, (n_band + 1,), cm-1."""
    assert recipe.k_coefficient is not None
    bands, nu = recipe.k_coefficient.bands, recipe.grid.wavenumber
    first, last = float(nu[0]), float(nu[-1])
    if bands.kind == "resolving_power":
        return edges_of_resolving_power(first, last, bands.values[0])
    if bands.kind == "width":
        return edges_of_width(first, last, bands.values[0])
    return edges_of_wavelengths(bands.values) if bands.kind == "wavelength" else np.array(bands.values)


def band_units(recipe: Recipe, inputs_sha256: str) -> tuple[BandUnit, ...]:
    """All units: bands that have about a window of the recipe's own points together, nodes a temperature or more."""
    edges, nodes = band_edges(recipe), len(recipe.grid.node_list())
    pressures = len(recipe.grid.pressure) if recipe.grid.nodes is None else 1
    size = pressures * math.ceil(NODES_PER_READING / pressures)
    at = np.searchsorted(recipe.grid.wavenumber, edges) // WINDOW
    starts = [0, *(int(i) for i in np.flatnonzero(np.diff(at[:-1])) + 1), edges.size - 1]
    found: list[BandUnit] = []
    for first, last in pairwise(starts):
        for row in range(0, nodes, size):
            rows = tuple(range(row, min(row + size, nodes)))
            text = json.dumps([inputs_sha256, source_hash(), "bands", first, last, rows[0], rows[-1]])
            name = hashlib.sha256(text.encode("ascii")).hexdigest()[:32]
            found.append(BandUnit(len(found), first, last, rows, name))
    return tuple(found)


def compute_bands(recipe: Recipe, source: LineSource, unit: BandUnit) -> BandShard:
    """The fine cells of a unit, node by node."""
    edges = band_edges(recipe)[unit.first : unit.last + 1]
    nodes = [recipe.grid.node_list()[row] for row in unit.rows]
    cells = np.zeros((len(nodes), edges.size - 1, N_CELLS), dtype=np.float32)
    sums, points = np.zeros((len(nodes), 4)), np.zeros((len(nodes), 2))
    margin = margin_of(recipe)
    parts = list(pieces(source, float(edges[0]) - margin, float(edges[-1]) + margin))
    for place, (temperature, pressure) in enumerate(nodes):
        lines = [part.at_temperature(temperature) for part in parts]
        nu, needed = spectrum_points(recipe, lines, edges, pressure)
        sigma = spectrum_of(recipe, lines, nu, pressure)
        cells[place] = fine_cells(sigma, nu, edges)
        sums[place] = mean_sums(sigma, nu, temperature, float(recipe.grid.wavenumber[0]))
        points[place] = nu.size, needed
    return BandShard(cells, sums, points)


def spectrum_points(
    recipe: Recipe, lines: list[LinesAtTemperature], edges: FloatArray, pressure: float
) -> tuple[FloatArray, int]:
    """Evenly spaced wavenumbers between the first and the last edge that resolve the narrowest line, and how many would
    have been needed.
    """
    ends = edges[[0, -1]]
    narrowest = min((resolution_of(part, pressure, ends)[2] for part in lines), default=math.inf)
    step = min(narrowest / POINTS_A_HALF_WIDTH, float(np.min(np.diff(edges))) / FEWEST_POINTS)
    needed = math.ceil((ends[1] - ends[0]) / step) + 1
    return np.linspace(ends[0], ends[1], min(needed, MOST_POINTS)), needed


def spectrum_of(recipe: Recipe, lines: list[LinesAtTemperature], nu: FloatArray, pressure: float) -> FloatArray:
    """The cross-section of lines in parts at one node, (n_nu,)."""
    profile, sigma = recipe.profile, np.zeros(nu.size)
    limits = regions(profile.tolerance, profile.plinth)
    for part in lines:
        node = [NodeSum(part, pressure, profile.cutoff.at(pressure))]
        add_spectra([sigma], node, nu, limits, profile.plinth, profile.chi_table)
    return sigma


@dataclass(frozen=True)
class BandWork:
    """What units of bands are computed from, and where their shards go."""

    recipe: Recipe
    source: LineSource
    shards: Path

    def do(self, unit: BandUnit, executor: Executor | None = None) -> None:
        """Compute a unit and write its shard."""
        del executor
        write_band_shard(unit.path(self.shards), compute_bands(self.recipe, self.source, unit))
