"""Bands of a k-coefficient table made again line by line at some nodes and between them.

The spectra are half as fine again as those that the table was made of, so that what sampling does to it shows too.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from opacity.check.audit import PLINTH_ROUNDING, relative_errors
from opacity.check.spectra import Node, Nodes
from opacity.cross_sections.source import LineSource, exact_points
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import BandPoints, band_points
from opacity.k_coefficient.certificate import fine_cell_errors, two_layer_error
from opacity.k_coefficient.collapse import CELL_BOUNDS, CELL_WIDTHS, fine_cells
from opacity.k_coefficient.spectra import FINER as TIMES
from opacity.k_coefficient.spectra import (
    POINTS_AT_ONCE,
    SAMPLING_ERROR,
    BandLines,
    lines_of_bands,
    points_of_bands,
    sampling_errors,
)
from opacity.k_coefficient.transmission import columns_of, means_over_g, transmission
from opacity.recipe.model import Profile
from opacity.tables import interpolate

FINER = 1.5
MOST_BANDS = 64
MOST_PAIRS = 8
MOST_MIDDLES = 6
PAIRS_A_BAND = 2
POINTS_EXACT = 12


class KValues(Nodes, Protocol):
    """A k-coefficient table, on disk or while it is written; arrays as those of `KCoefficientTable`."""

    @property
    def band_bounds(self) -> FloatArray:
        """Bounds of the bands, (n_band, 2), cm-1."""

    @property
    def quadrature(self) -> str:
        """How k stands for g."""

    @property
    def g_bounds(self) -> FloatArray:
        """Bounds in g, (n_g, 2) or (n_band, n_g, 2)."""

    @property
    def g_weight(self) -> FloatArray:
        """Weights in g, (n_g,) or (n_band, n_g)."""

    def k(self, *node: int) -> FloatArray:
        """k-coefficients of a node, (n_band, n_g), cm2/molecule."""

    def cells(self, *node: int) -> FloatArray:
        """Fine cells of a node, (n_band, n_cell), cm2/molecule."""


@dataclass(frozen=True)
class BandSample:
    """What one band was found to be, largest sizes.

    `fine_cells` error of transmission, and `mean` relative error, of the stored cells against line by line; `border`
    the width in g of the cell in which the part of the band that does not absorb ends, by which that cell may be off, 0
    where there is none; `two_layers` error of the transmission of two layers; `middle` of the transmission at cell
    middles of the grid and `middle_mean` relative of the mean there, None without cells; `exact` relative error of the
    spectrum against the exact sum.
    """

    band: int
    fine_cells: float
    mean: float
    border: float
    two_layers: float
    middle: float | None
    middle_mean: float | None
    exact: float


@dataclass(frozen=True)
class Drawn:
    """What a seed draws: bands, and for all of them nodes in pairs and middles of cells, as (T, P) with k there."""

    bands: tuple[int, ...]
    nodes: tuple[Node, ...]
    pairs: tuple[tuple[int, int], ...]
    middles: tuple[tuple[float, float], ...]
    k: FloatArray
    cells: FloatArray
    k_between: FloatArray


def draw(table: KValues, nodes: Sequence[Node], seed: int) -> Drawn:
    """Bands, pairs of nodes (numbers in the `nodes` of the result), and middles of cells."""
    random = np.random.default_rng(seed)
    bands = len(table.band_bounds)
    chosen = np.sort(random.permutation(bands)[:MOST_BANDS])
    count = min(2 * MOST_PAIRS, len(nodes))
    some = [nodes[i] for i in random.choice(len(nodes), count, replace=False)]
    pairs = tuple((2 * i, 2 * i + 1) for i in range(count // 2)) if count > 1 else ((0, 0),)
    middles = _middles(table, random)
    k = np.array([table.k(*index) for index, _, _ in some])
    cells = np.array([table.cells(*index) for index, _, _ in some])
    between = np.array([_between(table, *middle) for middle in middles]).reshape(-1, *k.shape[1:])
    return Drawn(tuple(int(b) for b in chosen), tuple(some), pairs, middles, k, cells, between)


def _middles(table: KValues, random: np.random.Generator) -> tuple[tuple[float, float], ...]:
    """Middles of cells of the grid, in ln T and ln P: one of the coldest cells, one of the hottest, others anywhere."""
    t, p = table.temperature, table.pressure
    if table.profile or t.size < 2 or p.size < 2:
        return ()
    rows = [0, t.size - 2, *random.integers(0, t.size - 1, MOST_MIDDLES - 2)]
    cells = dict.fromkeys(
        (int(i), int(j)) for i, j in zip(rows, random.integers(0, p.size - 1, len(rows)), strict=True)
    )
    return tuple((float(np.sqrt(t[i] * t[i + 1])), float(np.sqrt(p[j] * p[j + 1]))) for i, j in cells)


def _between(table: KValues, temperature: float, pressure: float) -> FloatArray:
    """k between nodes as a reader of the table gets it, (n_band, n_g)."""
    axes = table.temperature, table.pressure
    nodes = interpolate.grid_nodes(*axes, temperature, pressure, clamp=False, method="cubic")
    shape = len(table.band_bounds), table.g_weight.shape[-1]
    k = interpolate.from_nodes(nodes, shape[0] * shape[1], lambda i, j: table.k(i, j).ravel())
    return np.maximum.accumulate(k.reshape(shape), axis=-1)


def sample_band(
    table: KValues,
    source: LineSource,
    profile: Profile,
    drawn: Drawn,
    band: int,
    seed: int,
    executor: Executor | None = None,
) -> BandSample | None:
    """A band at two pairs of nodes and at the middles drawn, line by line; None for one with too many points."""
    random = np.random.default_rng([seed, band])
    pairs = [drawn.pairs[i] for i in random.permutation(len(drawn.pairs))[:PAIRS_A_BAND]]
    used = sorted({node for pair in pairs for node in pair})
    wanted = [drawn.nodes[node][1:] for node in used] + list(drawn.middles)
    edges = np.array(table.band_bounds[band])
    spectra = _spectra(source, profile, edges, wanted, executor)
    if spectra is None:
        return None
    nu, sigma = spectra
    points, weights = band_points(nu, edges), table.g_weight[band] if table.g_weight.ndim == 2 else table.g_weight
    part = slice(band, band + 1)
    k, cells = drawn.k[used, part], drawn.cells[used, part]
    pressure = np.array([drawn.nodes[node][2] for node in used])
    places = {node: place for place, node in enumerate(used)}
    layers = [(places[a], places[b]) for a, b in pairs]
    at_nodes = sigma[: len(used)]
    widths = points.weights(0) / (edges[1] - edges[0])
    means = means_over_g(at_nodes[:, points.first[0] : points.last[0]], widths)
    middle, middle_mean = _at_middles(drawn, band, nu, sigma[len(used) :], points, weights)
    return BandSample(
        band,
        fine_cell_errors(cells, at_nodes, points, pressure)[0],
        _largest_relative(means_over_g(cells[:, 0], CELL_WIDTHS), means),
        _border(at_nodes[:, points.first[0] : points.last[0]], widths),
        two_layer_error(k, weights[None], cells, at_nodes, points, pressure, layers).largest,
        middle,
        middle_mean,
        _exact_error(source, profile, wanted[0], nu, sigma[0], random, executor),
    )


def _spectra(
    source: LineSource,
    profile: Profile,
    edges: FloatArray,
    wanted: Sequence[tuple[float, float]],
    executor: Executor | None,
) -> tuple[FloatArray, FloatArray] | None:
    """One grid for all (T, P), as fine as any needs, edges and cut-offs among it, and the spectra there, (n, n_nu)."""
    by_temperature: dict[float, BandLines] = {}
    temperatures = list(dict.fromkeys(t for t, _ in wanted))
    for lines in lines_of_bands(source, profile, edges, temperatures):
        by_temperature[lines.temperature] = lines
    points = FINER * max(float(points_of_bands(by_temperature[t], edges, p)[0]) for t, p in wanted)
    if points > FINER * POINTS_AT_ONCE:
        return None
    while True:
        nu = np.linspace(edges[0], edges[1], 2 * int(0.5 * points) + 1)
        sigma = np.array([by_temperature[t].spectrum(nu, p, executor) for t, p in wanted])
        off = max(float(sampling_errors(nu, one, edges)[0]) for one in sigma)
        if off <= SAMPLING_ERROR or points * TIMES > POINTS_AT_ONCE:
            return nu, sigma
        points *= TIMES


def _at_middles(
    drawn: Drawn, band: int, nu: FloatArray, sigma: FloatArray, points: BandPoints, weights: FloatArray
) -> tuple[float | None, float | None]:
    """Largest errors of k between nodes: of the transmission, and relative of the mean."""
    if not len(sigma):
        return None, None
    k, cells = drawn.k_between[:, band], fine_cells(sigma, nu, points.edges)[:, 0]
    columns = columns_of(cells, np.array([pressure for _, pressure in drawn.middles]))
    errors = transmission(k, weights, columns) - transmission(cells, CELL_WIDTHS, columns)
    return float(np.max(np.abs(errors))), _largest_relative(means_over_g(k, weights), means_over_g(cells, CELL_WIDTHS))


def _border(sigma: FloatArray, shares: FloatArray) -> float:
    """Width of the widest cell that lies half in what is clear of spectra (n_node, n_nu) with `shares` of the band."""
    clear = means_over_g((sigma == 0.0).astype(np.float64), shares)
    cells = np.searchsorted(CELL_BOUNDS, clear[(clear > 0.0) & (clear < 1.0)], side="right") - 1
    return float(np.max(CELL_WIDTHS[np.clip(cells, 0, CELL_WIDTHS.size - 1)], initial=0.0))


def _largest_relative(values: FloatArray, truth: FloatArray) -> float:
    return float(np.max(np.abs(np.divide(values - truth, truth, out=np.zeros_like(truth), where=truth > 0.0))))


def _exact_error(
    source: LineSource,
    profile: Profile,
    node: tuple[float, float],
    nu: FloatArray,
    sigma: FloatArray,
    random: np.random.Generator,
    executor: Executor | None,
) -> float:
    """Largest relative error of a spectrum at points spread over its values, against the exact sum."""
    by_value = np.argsort(sigma, kind="stable")[np.linspace(0, nu.size - 1, POINTS_EXACT // 2).astype(np.intp)]
    chosen = np.unique(np.append(by_value, random.integers(0, nu.size, POINTS_EXACT // 2)))
    request, cutoff = [(*node, nu[chosen])], profile.cutoff.at
    (truth,) = exact_points(source, request, cutoff, profile.plinth, profile.chi_table, executor)
    rounding: FloatArray | float = 0.0
    if profile.plinth:
        (whole,) = exact_points(source, request, cutoff, False, profile.chi_table, executor)
        rounding = PLINTH_ROUNDING * whole
    return float(np.max(relative_errors(sigma[chosen], truth, rounding)))
