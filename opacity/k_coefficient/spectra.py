"""Spectra as they are collapsed: as fine as the lines of a node need, a stretch of bands at a time."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from concurrent.futures import Executor
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from opacity.cross_sections.compute import NodeSum, add_spectra
from opacity.cross_sections.prepare import LinesAtTemperature, PreparedLines
from opacity.cross_sections.source import LINES_AT_ONCE, LineSource, pieces
from opacity.cross_sections.tolerance import regions
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import band_points
from opacity.k_coefficient.collapse import N_CELLS, fine_cells, merge_cells
from opacity.kernels.closure import resolution
from opacity.kernels.collapse import band_means
from opacity.kernels.node_line import LineColumns
from opacity.recipe.model import Profile

POINTS_A_HALF_WIDTH = 2.0
"""Points to a half-width (HWHM) of the narrowest line."""
FEWEST_POINTS = 512
"""Points that a band has at least."""
SAMPLING_ERROR = 3e-4
"""A band gets a finer grid where its mean by every other point differs by more than this (relative)."""
FINER = 4
POINTS_AT_ONCE = 1 << 19
"""Points of a spectrum that are held at once; a band of more is merged of its parts' fine cells."""
MOST_POINTS = 1 << 26
"""Points of a band at most: where more would be needed the step is coarser, and the table says so."""


@dataclass(frozen=True)
class BandCells:
    """What is kept of a node's spectrum: fine `cells` (n_band, N_CELLS), cm2, and the `points` that each band had and
    would have needed, (n_band, 2).
    """

    cells: FloatArray
    points: FloatArray


@dataclass(frozen=True)
class BandLines:
    """The lines in reach of some bands at a temperature, read once where they are few enough to be held."""

    source: LineSource
    profile: Profile
    temperature: float
    held: tuple[LinesAtTemperature, ...] | None

    def between(self, lower: float, upper: float) -> Iterator[LinesAtTemperature]:
        """The lines in reach of a stretch (cm-1), in parts; those held may be more."""
        if self.held is not None:
            yield from self.held
            return
        margin = margin_of(self.profile)
        for part in pieces(self.source, lower - margin, upper + margin):
            yield part.at_temperature(self.temperature)

    def narrowest(self, lower: float, upper: float, pressure: float) -> float:
        """Narrowest half-width (HWHM, cm-1) of the lines centred in a stretch at a pressure (bar), inf for none."""
        ends, found = np.array([lower, upper]), math.inf
        for part in self.between(lower, upper):
            columns = LineColumns(part.wavenumber, part.shift, part.strength, part.lorentz, part.doppler)
            found = min(found, float(resolution(ends, columns, pressure)[2]))
        return found

    def spectrum(self, wavenumber: FloatArray, pressure: float, executor: Executor | None = None) -> FloatArray:
        """The cross-section (cm2/molecule) at rising wavenumbers (n_nu,) and a pressure (bar), (n_nu,)."""
        profile, sigma = self.profile, np.zeros(wavenumber.size)
        limits = regions(profile.tolerance, profile.plinth)
        for part in self.between(float(wavenumber[0]), float(wavenumber[-1])):
            node = [NodeSum(part, pressure, profile.cutoff.at(pressure))]
            add_spectra([sigma], node, wavenumber, limits, profile.plinth, profile.chi_table, executor)
        return sigma


def margin_of(profile: Profile) -> float:
    """How far beyond bands lines are looked for, cm-1."""
    return max(step.cutoff for step in profile.cutoff.steps) + 1e-6


def lines_of_bands(
    source: LineSource, profile: Profile, edges: FloatArray, temperatures: list[float]
) -> Iterator[BandLines]:
    """The lines in reach of bands with `edges` (n_band + 1,), cm-1, at each temperature (K)."""
    margin = margin_of(profile)
    lower, upper = float(edges[0]) - margin, float(edges[-1]) + margin
    held: PreparedLines | None = None
    if source.count(lower, upper) <= LINES_AT_ONCE:
        held = source.window(lower, upper)
    for temperature in temperatures:
        parts = None if held is None else (held.at_temperature(temperature),) if len(held) else ()
        yield BandLines(source, profile, temperature, parts)


def collapsed(
    lines: BandLines,
    edges: FloatArray,
    pressure: float,
    executor: Executor | None = None,
    seen: Callable[[FloatArray, FloatArray], None] = lambda wavenumber, sigma: None,
) -> BandCells:
    """The fine cells of bands with `edges` (n_band + 1,), cm-1, at a pressure (bar).

    `seen` gets each stretch of the spectrum once, in rising order, before it is thrown away: evenly spaced wavenumbers
    and the cross-section there, (n_nu,) each; stretches share their ends.
    """
    needed = points_of_bands(lines, edges, pressure)
    had = np.minimum(needed, MOST_POINTS)
    cells = np.empty((edges.size - 1, N_CELLS))
    for first, last in _stretches(edges, had):
        if last == first + 1 and had[first] > POINTS_AT_ONCE:
            cells[first] = _merged(lines, edges[first : last + 1], int(had[first]), pressure, executor, seen)
            continue
        widths = np.diff(edges[first : last + 1])
        # The finest step of any band of the stretch serves all of it.
        step = float(np.min(widths / had[first:last]))
        nu = _even(edges[first], edges[last], math.ceil((edges[last] - edges[first]) / step * (1.0 - 1e-12)))
        sigma = lines.spectrum(nu, pressure, executor)
        seen(nu, sigma)
        cells[first:last] = fine_cells(sigma, nu, edges[first : last + 1], executor)
        for band in first + np.flatnonzero(sampling_errors(nu, sigma, edges[first : last + 1]) > SAMPLING_ERROR):
            pair = edges[band : band + 2]
            if had[band] * FINER <= min(POINTS_AT_ONCE, MOST_POINTS):
                cells[band], had[band] = _refined(lines, pair, int(had[band]), pressure, executor)
    return BandCells(cells, np.stack([had, needed], axis=1).astype(np.float64))


def points_of_bands(lines: BandLines, edges: FloatArray, pressure: float) -> FloatArray:
    """How many points each band needs, (n_band,), for the narrowest line among all of them."""
    return points_needed(np.diff(edges), lines.narrowest(float(edges[0]), float(edges[-1]), pressure))


def points_needed(widths: FloatArray, half_width: float | FloatArray) -> FloatArray:
    """Points that bands of some `widths` (n_band,) need whose narrowest line has a half-width (HWHM), both cm-1."""
    return np.maximum(np.ceil(POINTS_A_HALF_WIDTH * widths / half_width), float(FEWEST_POINTS))


def sampling_errors(nu: FloatArray, sigma: FloatArray, edges: FloatArray) -> FloatArray:
    """Relative differences of the means of bands (n_band,) by all points and by every other one, of an odd number.

    Where bands' edges cut through lines, and where lines end at their cut-offs, the mean by all points is off by less
    than that; elsewhere both agree, since even the wider step resolves the lines.
    """
    means = []
    for step in (1, 2):
        points = band_points(nu[::step], edges)
        mean = np.empty(points.first.size)
        values = np.ascontiguousarray(sigma[::step])
        band_means(values, points.borders, points.edges, points.first, points.last, mean)
        means.append(mean)
    fine, coarse = means
    return np.asarray(np.divide(np.abs(coarse - fine), fine, out=np.zeros_like(fine), where=fine > 0.0))


def _refined(
    lines: BandLines, edges: FloatArray, points: int, pressure: float, executor: Executor | None
) -> tuple[FloatArray, int]:
    """The fine cells of one band on a grid so fine that edges and cut-offs do no harm, and its points."""
    while True:
        points *= FINER
        nu = _even(edges[0], edges[1], points)
        sigma = lines.spectrum(nu, pressure, executor)
        cells = fine_cells(sigma, nu, edges, executor)[0]
        if float(sampling_errors(nu, sigma, edges)[0]) <= SAMPLING_ERROR or points * FINER > POINTS_AT_ONCE:
            return cells, points


def _stretches(edges: FloatArray, points: FloatArray) -> Iterator[tuple[int, int]]:
    """Runs of bands, as (first, last + 1), whose spectrum at the finest step of any of them can be held at once, and
    has at most twice as many points as they ask for.
    """
    first, finest, asked = 0, math.inf, 0.0
    for band in range(len(points)):
        step = float(edges[band + 1] - edges[band]) / float(points[band])
        finest, asked = min(finest, step), asked + float(points[band])
        together = float(edges[band + 1] - edges[first]) / finest
        if band > first and (together > POINTS_AT_ONCE or together > 2.0 * asked):
            yield first, band
            first, finest, asked = band, step, float(points[band])
    yield first, len(points)


def _merged(
    lines: BandLines,
    edges: FloatArray,
    points: int,
    pressure: float,
    executor: Executor | None,
    seen: Callable[[FloatArray, FloatArray], None],
) -> FloatArray:
    """The fine cells of one band in as many parts as are needed to hold each."""
    count = math.ceil(points / POINTS_AT_ONCE)
    borders = np.linspace(edges[0], edges[1], count + 1)
    parts = []
    for lower, upper in pairwise(borders):
        nu = _even(lower, upper, math.ceil(points / count))
        sigma = lines.spectrum(nu, pressure, executor)
        seen(nu, sigma)
        parts.append(fine_cells(sigma, nu, np.array([lower, upper]), executor)[0])
    return merge_cells(parts, np.diff(borders).tolist())


def _even(lower: float, upper: float, steps: int) -> FloatArray:
    """Evenly spaced points, an odd number of them, with `steps` or one more between."""
    return np.linspace(lower, upper, 2 * math.ceil(max(steps, 1) / 2) + 1)
