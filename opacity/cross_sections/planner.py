"""How a sum is to be made on a grid: tiles, levels of cells, and point by point or by cells, tile by tile.

All of it follows from the grid, the lines and the cut-off alone, so that results have the same bits for any number of
workers.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from opacity.grids import FloatArray
from opacity.kernels.cells import CELL, RATIO, unevenness

SMALLEST_TILE = 4096
LARGEST_TILE = 65536
WIDEST_IN_LOG = 0.1
"""A cell of a grid even in log spans no more than this in ln nu: the profile is not quite a pole there."""
MOST_UNEVEN = 2e-7
"""By this share of a step points may lie off their even places: a profile's value there changes by less than 2e-7."""

# Seconds of one worker, measured: they decide which way is taken, never what comes out.  Predictions made of them are
# within a factor of two of what sums take, since they know neither pressure nor tolerance.
_PER_VALUE = 0.3e-9
_PER_LINE = 100e-9
_PER_LINE_AND_OCTAVE = 40e-9
_PER_POINT = 6e-9
_PER_CENTRE = 300e-9


@dataclass(frozen=True)
class Spacing:
    """Even steps, in cm-1 or `in_log` in ln of it."""

    step: float
    in_log: bool


@dataclass(frozen=True)
class Tiles:
    """Tiles of `points` points with `levels` levels of cells; no spacing and no levels where points are not even."""

    points: int
    levels: int
    spacing: Spacing | None
    reach: float
    """Points from a line to its cut-off."""


def even_spacing(nu: FloatArray) -> Spacing | None:
    """The spacing of a grid's points if they are even, else None."""
    if nu.size < 2 * CELL:
        return None
    for in_log in (False, True):
        if in_log and nu[0] <= 0.0:
            continue
        if unevenness(nu, in_log) <= MOST_UNEVEN:
            span = math.log(float(nu[-1]) / float(nu[0])) if in_log else float(nu[-1] - nu[0])
            return Spacing(span / (nu.size - 1), in_log)
    return None


def plan_tiles(nu: FloatArray, spacing: Spacing | None, cutoff: float) -> Tiles:
    """Tiles about four times as wide as a line's reach on either side, so that most lines fall into one or two."""
    if spacing is None:
        return Tiles(SMALLEST_TILE, 0, None, _reach_of_uneven(nu, cutoff))
    reach = cutoff / (spacing.step * (float(nu[-1]) if spacing.in_log else 1.0))
    wanted = max(4.0 * reach, SMALLEST_TILE)
    most = max(nu.size / 4.0, SMALLEST_TILE)
    points = 1 << math.ceil(math.log2(min(wanted, most, LARGEST_TILE)))
    levels = 0
    width = CELL
    while width <= min(points, reach) and (not spacing.in_log or width * spacing.step <= WIDEST_IN_LOG):
        levels += 1
        width *= RATIO
    return Tiles(points, levels, spacing, reach)


def _reach_of_uneven(nu: FloatArray, cutoff: float) -> float:
    span = float(nu[-1] - nu[0])
    return cutoff / span * nu.size if span > 0.0 else 1.0


def seconds(tiles: Tiles, lines: int, points: int) -> tuple[float, float]:
    """Predicted seconds of one worker for a tile of `points` points that `lines` lines reach: point by point, and by
    cells (infinite where there are none).  What a line takes at its centre is the same in both, and left out.
    """
    width = 2.0 * tiles.reach
    direct = _PER_VALUE * lines * points * width / (points + width)
    if tiles.levels == 0:
        return direct, math.inf
    octaves = math.log2(max(tiles.reach / CELL, 2.0))
    return direct, lines * (_PER_LINE + _PER_LINE_AND_OCTAVE * octaves) + _PER_POINT * points


def by_cells(tiles: Tiles, lines: int, points: int) -> bool:
    """Whether a tile is summed by cells."""
    direct, cells = seconds(tiles, lines, points)
    return cells < direct


@dataclass(frozen=True)
class Prediction:
    """Seconds of one worker for the sum of a node, and how many of its tiles are summed by cells."""

    seconds: float
    by_cells: int
    tiles: int


def predict(nu: FloatArray, cutoff: float, places: FloatArray, lines_a_place: float) -> Prediction:
    """What the sum of a node on a grid will take; `places` are rising wavenumbers that stand for so many lines each."""
    tiles = plan_tiles(nu, even_spacing(nu), cutoff)
    starts = np.arange(0, nu.size, tiles.points)
    stops = np.minimum(starts + tiles.points, nu.size)
    first = np.searchsorted(places, nu[starts] - cutoff)
    last = np.searchsorted(places, nu[stops - 1] + cutoff)
    total, cells = 0.0, 0
    for lines, points in zip(np.rint((last - first) * lines_a_place), stops - starts, strict=True):
        ways = seconds(tiles, int(lines), int(points))
        total += min(ways)
        cells += by_cells(tiles, int(lines), int(points))
    inside = np.searchsorted(places, nu[-1]) - np.searchsorted(places, nu[0])
    return Prediction(total + _PER_CENTRE * float(inside) * lines_a_place, cells, starts.size)
