"""The sum over lines on a tile by cells: near its centre a line is added point by point, farther out cell by cell.

A line's reach is parted into cells that are as wide as the rule of `cells` allows and lie in it entirely; what no
cell covers, at the centre and at the ends, is added to the points themselves.  So the cut is exact, and so are zeros.
Positions are counted in points: point i of the tile lies at i + 1/2, cell j of width w covers w j to w (j + 1).
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.accumulate import add_line, add_weighted, line_in_reach, stretch
from opacity.kernels.cells import CELL_BITS, NODES, RATIO_BITS, Frame, Tree, sums_to_points
from opacity.kernels.chi import weigh
from opacity.kernels.jit import jit
from opacity.kernels.node_line import (
    SMALLEST_Y,
    Formulas,
    LineAtNode,
    LineColumns,
    add_pieces,
)
from opacity.kernels.voigt import add_far

Array = NDArray[np.float64]
Index = NDArray[np.int64]

SPREAD = 2.3507
"""Largest root of H_6: the poles of the 6-point formula lie this far beside the centre, in units of x."""
MOST_DECAY = 1.0
"""A chi factor falls by no more than e within a cell."""
WIDEST_INNER = 0.02
"""On a grid even in log a line is added point by point where its inner part is wider than this share of its centre."""


class Place(NamedTuple):
    """A line among the points of a tile: its centre, the height of its poles, the spread of the poles beside it, the
    reach of the core formulas and of the 6-point formula (-1 where they serve nowhere), and how far cells may go.
    """

    centre: float
    height: float
    spread: float
    core: float
    near: float
    left_end: float
    right_end: float


@jit
def add_lines_by_cells(
    out: Array,
    nu: Array,
    tree: Tree,
    first_line: int,
    last_line: int,
    lines: LineColumns,
    pressure: float,
    cutoff: float,
    subtract_plinth: bool,
    chi: Array,
    formulas: Formulas,
) -> int:
    """As `accumulate.add_lines`, for an evenly spaced tile with its tree."""
    places, offsets, frame = tree
    sums = np.zeros(places.size)
    wavenumber, shift, strength, lorentz, doppler = lines
    near_radius, far_radius, exponential = formulas
    for j in range(first_line, last_line):
        first, last, line = line_in_reach(
            nu, wavenumber[j], shift[j], strength[j], lorentz[j], doppler[j], pressure, cutoff, subtract_plinth, chi,
            near_radius, far_radius, exponential,
        )  # fmt: skip
        if first >= last:
            continue
        if not SMALLEST_Y <= line.y < np.inf:
            return j
        place = _place(frame, line, wavenumber[j], cutoff, subtract_plinth)
        for number in range(max(2 * chi.shape[0] - 1, 1)):
            low, high, factor, rate = stretch(nu, line.centre, chi, number, first, last)
            _add_line(out, nu, sums, places, offsets, frame, low, high, line, place, factor, rate)
    sums_to_points(sums, offsets, out)
    return -1


@jit
def _not_below(value: float, low: int, high: int) -> int:
    """The first whole number not below a value, within low..high; the value may be infinite."""
    if not value > low:
        return low
    return high if value >= high else math.ceil(value)


@jit
def _not_above(value: float, low: int, high: int) -> int:
    """The last whole number not above a value, within low..high; the value may be infinite."""
    if not value > low:
        return low
    return high if value >= high else math.floor(value)


@jit
def _place(frame: Frame, line: LineAtNode, nu0: float, cutoff: float, subtract_plinth: bool) -> Place:
    gamma, unit = line.y / line.scale, 1.0 / line.scale
    if frame.in_log:
        centre = math.log(max(line.centre, 1e-300))
        height = math.atan2(gamma, line.centre)
        if line.centre > 0.0:
            centre = math.log(math.hypot(line.centre, gamma))
            unit /= line.centre
    else:
        centre, height = line.centre, gamma
    centre = (centre - frame.first) / frame.step + 0.5
    unit /= frame.step
    # In ln nu a distance below the centre is longer by its share of the centre, at most.
    uneven = 1.0
    if frame.in_log:
        inner = max(line.near, SPREAD) * unit * frame.step
        if line.centre <= 0.0 or inner > WIDEST_INNER:
            unit = np.inf
        uneven = 1.0 + inner
    core = line.core * unit * uneven if line.core >= 0.0 else -1.0
    near = line.near * unit * uneven if line.near >= 0.0 else -1.0
    left_end, right_end = -np.inf, np.inf
    if subtract_plinth:
        low, high = max(nu0, line.centre) - cutoff, min(nu0, line.centre) + cutoff
        if frame.in_log:
            low, high = math.log(max(low, 1e-300)), math.log(max(high, 1e-300))
        left_end, right_end = (low - frame.first) / frame.step + 0.5, (high - frame.first) / frame.step + 0.5
    return Place(centre, height / frame.step, SPREAD * unit * uneven, core, near, left_end, right_end)


class Level(NamedTuple):
    """Cells of a level, by number: `low` to `high` lie in the line's reach; those from `gap_low` to `gap_high` are too
    near its centre; those from `near_low` to `near_high` need the 6-point formula.
    """

    low: int
    high: int
    gap_low: int
    gap_high: int
    near_low: int
    near_high: int


@jit
def _level(frame: Frame, bits: int, low: int, high: int, place: Place, decay: float) -> Level:
    """What a level of cells 2^bits points wide can do for a line; `decay` is the chi factor's rate per point, or 0."""
    per_width = 1.0 / (1 << bits)
    if place.left_end > -np.inf:
        low = _not_below(place.left_end * per_width + 1.0, low, high)
        high = _not_above(place.right_end * per_width - 1.0, low, high)
    half = 0.5 * (1 << bits)
    # At its pole a chi factor is larger than in the cell, which T_8 has to make up for.
    axis = frame.axis if decay == 0.0 else frame.axis * math.exp(decay * half * (2.0 * frame.axis + 1.0) / NODES)
    up = (place.height / half) ** 2 / (axis * axis - 1.0)
    limit = half * axis * math.sqrt(1.0 - up) + place.spread if up < 1.0 else -1.0
    if place.core >= 0.0 or decay > 0.0:
        limit = max(limit, half + max(place.core, 0.0))
    at = place.centre * per_width
    if limit < 0.0:
        gap_low = gap_high = _not_above(at, low, high)
    else:
        gap_low = _not_below(at - limit * per_width - 0.5, low, high)
        gap_high = _not_above(at + limit * per_width + 0.5, gap_low, high)
    near_low, near_high = high, high
    if place.near >= 0.0 and place.near > limit - half:
        near_low = _not_above(at - place.near * per_width, low, high)
        near_high = _not_below(at + place.near * per_width, low, high)
    return Level(low, high, gap_low, gap_high, near_low, near_high)


@jit
def _add_line(
    out: Array,
    nu: Array,
    sums: Array,
    places: Array,
    offsets: Index,
    frame: Frame,
    first: int,
    last: int,
    line: LineAtNode,
    place: Place,
    factor: float,
    rate: float,
) -> None:
    """A line on the points first..last - 1, from the widest cells to the points; `rate` is below 0 without chi.

    On either side of the centre the cells in use are one stretch: left..left_gap - 1 and right_gap..right - 1.
    """
    left, left_gap, right_gap, right = first, first, last, last
    has_left = has_right = False
    decay = max(rate, 0.0) * frame.step * (places[places.size - 1] if frame.in_log else 1.0)
    # A line that is wide against its own wavenumber gets no cells.
    levels = offsets.size - 1 if place.spread < np.inf else 0
    for level in range(levels - 1, -1, -1):
        bits = CELL_BITS + RATIO_BITS * level
        low = (first + (1 << bits) - 1) >> bits
        # The last cell may reach beyond the tile, where there is no point to go wrong.
        high = (last + (1 << bits) - 1) >> bits if last == nu.size else last >> bits
        if low >= high or decay * (1 << bits) > MOST_DECAY:
            continue
        cells = _level(frame, bits, low, high, place, decay)
        gap_low, gap_high = cells.gap_low, cells.gap_high
        if has_right:
            gap_high = min(gap_high, right_gap >> bits)
            gap_low = min(gap_low, gap_high)
        if has_left:
            gap_low = max(gap_low, left_gap >> bits)
            gap_high = max(gap_high, gap_low)
        base = offsets[level]
        if has_left:
            _add_cells(sums, places, base, cells.low, left >> bits, cells, line, factor, rate)
        inner_left = left_gap >> bits if has_left else cells.low
        inner_right = right_gap >> bits if has_right else cells.high
        _add_cells(sums, places, base, inner_left, gap_low, cells, line, factor, rate)
        _add_cells(sums, places, base, gap_high, inner_right, cells, line, factor, rate)
        if has_right:
            _add_cells(sums, places, base, right >> bits, cells.high, cells, line, factor, rate)
        if has_left or cells.low < gap_low:
            has_left, left, left_gap = True, cells.low << bits, gap_low << bits
        if has_right or gap_high < cells.high:
            has_right, right_gap, right = True, gap_high << bits, cells.high << bits
    _add_points(out, nu, first, left, line, place, factor, rate)
    _add_points(out, nu, left_gap, min(right_gap, last), line, place, factor, rate)
    _add_points(out, nu, right, last, line, place, factor, rate)


@jit
def _add_cells(
    sums: Array,
    places: Array,
    base: int,
    first: int,
    last: int,
    cells: Level,
    line: LineAtNode,
    factor: float,
    rate: float,
) -> None:
    """Cells first..last - 1 of a level that begins at cell `base`."""
    if first >= last:
        return
    start, stop = NODES * (base + first), NODES * (base + last)
    near_left, near_right = NODES * (base + cells.near_low), NODES * (base + cells.near_high)
    if rate >= 0.0:
        values = np.zeros(stop - start)
        bare = LineAtNode(line.centre, line.scale, line.y, line.amplitude, 0.0, line.core, line.near)
        left, right = near_left - start, near_right - start
        add_pieces(values, places[start:stop], 0, stop - start, left, right, right, right, bare)
        weigh(sums[start:stop], values, places[start:stop], line.centre, line.plinth, factor, rate)
    elif cells.near_low >= last or cells.near_high <= first:
        add_far(sums, places, start, stop, line.centre, line.scale, line.y, line.amplitude, line.plinth)
    else:
        add_pieces(sums, places, start, stop, near_left, near_right, near_right, near_right, line)


@jit
def _add_points(
    out: Array, nu: Array, first: int, last: int, line: LineAtNode, place: Place, factor: float, rate: float
) -> None:
    """The points first..last - 1 themselves."""
    if first >= last:
        return
    if rate >= 0.0:
        add_weighted(out, nu, first, last, line, factor, rate)
    elif not place.spread < np.inf:
        add_line(out, nu, first, last, line)
    elif place.near < 0.0 or place.centre - place.near > last or place.centre + place.near < first:
        add_far(out, nu, first, last, line.centre, line.scale, line.y, line.amplitude, line.plinth)
    else:
        near_left = _not_below(place.centre - place.near - 0.5, first, last)
        near_right = _not_above(place.centre + place.near + 0.5, first, last)
        core_left, core_right = near_right, near_right
        if place.core >= 0.0:
            # No further: the core formulas are good up to there alone.
            core_left = _not_below(place.centre - place.core - 0.5, first, last)
            core_right = _not_above(place.centre + place.core + 0.5, first, last)
        add_pieces(out, nu, first, last, near_left, core_left, core_right, near_right, line)
