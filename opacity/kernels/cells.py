"""A tree of cells over a tile of the grid: each cell carries the sum of smooth profiles at eight Chebyshev points.

Level 0 parts a tile into cells of 16 points, each level above joins four cells into one.  Far from its centre a
profile is smooth, and eight values stand for all points of a cell, however wide: interpolated at the roots of T_8,
1/(x - z) is missed by exactly T_8(x)/T_8(z) of itself, z the pole in the cell's coordinate -1..1.  Profiles are sums
of such poles with positive weights (`voigt`), so the error is relative to the profile at the very point, however weak
it is there, and nothing reaches points outside the cell.  `cross_sections.tolerance` says how far a pole must be.

Sums go down once all lines are in: a polynomial of degree 7 is the same polynomial in each quarter of its cell, so
that nothing is lost on the way.
"""

from __future__ import annotations

import math
from itertools import accumulate
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit

Array = NDArray[np.float64]
Index = NDArray[np.int64]

NODES = 8
CELL_BITS = 4
CELL = 1 << CELL_BITS
RATIO_BITS = 2
RATIO = 1 << RATIO_BITS


class Frame(NamedTuple):
    """How the points of a tile lie: `first` and `step` in cm-1 where evenly spaced, in ln of it where even `in_log`.

    A pole that lies outside the ellipse about a cell with half-axis `axis` along it is far enough.
    """

    first: float
    step: float
    in_log: bool
    axis: float


class Tree(NamedTuple):
    """Cells of a tile: `places` (cm-1) of all nodes, level by level; `offsets` (n_levels + 1,) first cell of each."""

    places: Array
    offsets: Index
    frame: Frame


def roots() -> Array:
    """The roots of T_8, rising, (8,)."""
    return np.asarray(-np.cos((2.0 * np.arange(NODES) + 1.0) * math.pi / (2.0 * NODES)))


def interpolation_weights(at: Array) -> Array:
    """Weights of the values at the roots for the polynomial at points of -1..1, (8, n_at)."""
    t = roots()
    weights = np.empty((NODES, at.size))
    for k in range(NODES):
        others = np.delete(t, k)
        weights[k] = np.prod((at[:, None] - others) / (t[k] - others), axis=1)
    return weights


_ROOTS = roots()
_TO_PARTS = np.stack([interpolation_weights((_ROOTS + 2.0 * part + 1.0 - RATIO) / RATIO) for part in range(RATIO)])
_TO_POINTS = interpolation_weights((2.0 * np.arange(CELL) + 1.0) / CELL - 1.0)


def grow_tree(n_points: int, levels: int, first: float, step: float, in_log: bool, axis: float) -> Tree:
    """The tree of a tile of `n_points`; the last cell of a level may reach beyond them."""
    counts = [-(-n_points // (CELL << (RATIO_BITS * level))) for level in range(levels)]
    offsets = np.array([0, *accumulate(counts)], dtype=np.int64)
    places = np.empty(NODES * offsets[-1])
    place_nodes(places, offsets, first, step, in_log)
    return Tree(places, offsets, Frame(first, step, in_log, axis))


@jit
def place_nodes(places: Array, offsets: Index, first: float, step: float, in_log: bool) -> None:
    """Fill the places of a tree's nodes."""
    for level in range(offsets.size - 1):
        width = CELL << (RATIO_BITS * level)
        for cell in range(offsets[level + 1] - offsets[level]):
            middle = (cell + 0.5) * width - 0.5
            for k in range(NODES):
                at = first + step * (middle + 0.5 * width * _ROOTS[k])
                places[NODES * (offsets[level] + cell) + k] = math.exp(at) if in_log else at


@jit
def unevenness(nu: Array, in_log: bool) -> float:
    """How far the farthest point is from where even steps from the first to the last would put it, in steps."""
    first = math.log(nu[0]) if in_log else nu[0]
    last = math.log(nu[nu.size - 1]) if in_log else nu[nu.size - 1]
    step = (last - first) / (nu.size - 1)
    farthest = 0.0
    for i in range(nu.size):
        at = math.log(nu[i]) if in_log else nu[i]
        farthest = max(farthest, abs(at - (first + step * i)))
    return farthest / step


@jit
def sums_to_points(sums: Array, offsets: Index, out: Array) -> None:
    """Add the sums of all levels (as `Tree.places`) to the points of the tile, (n_points,); `sums` is used up."""
    for level in range(offsets.size - 2, 0, -1):
        for part in range(offsets[level] - offsets[level - 1]):
            above, below = NODES * (offsets[level] + (part >> RATIO_BITS)), NODES * (offsets[level - 1] + part)
            _add_product(_TO_PARTS[part & (RATIO - 1)], sums[above : above + NODES], sums[below : below + NODES])
    whole = out.size >> CELL_BITS
    for cell in range(whole):
        points = out[cell << CELL_BITS : (cell + 1) << CELL_BITS]
        _add_product(_TO_POINTS, sums[NODES * cell : NODES * cell + NODES], points)
    if whole << CELL_BITS < out.size:
        rest = np.zeros(CELL)
        _add_product(_TO_POINTS, sums[NODES * whole : NODES * whole + NODES], rest)
        for i in range(whole << CELL_BITS, out.size):
            out[i] += rest[i - (whole << CELL_BITS)]
    # Of differences of nearly equal values rounding may leave less than nothing.
    for i in range(out.size):
        out[i] = 0.0 if out[i] < 0.0 else out[i]


@jit
def _add_product(weights: Array, values: Array, out: Array) -> None:
    for k in range(NODES):
        value, row = values[k], weights[k]
        for i in range(row.size):
            out[i] += value * row[i]
