"""Matched intervals with mean closure, and the mixing of two sets of k-coefficients into such intervals.

In each interval of g but the top one k is the value that transmits, at one column u, what the interval's samples
transmit in the mean: k = -ln<exp(-k u)> / u.  The column is u = x0 / (mean of the band).  The top interval's k is what
keeps the mean of the band.  No interval's k is above its mean, so that the top one is never below the one before.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.absorption import absorb, weighted_sum
from opacity.kernels.jit import jit_exact, jit_in_order

Array = NDArray[np.float64]
Counts = NDArray[np.int64]

_NOTHING = 1e-12
"""Share of a sample's width that is rounding: its value must not be what an interval is counted from."""
_ALL = 1.0 - 1e-15


@jit_exact
def cut(widths: Array, bounds: Array, starts: Counts, ends: Counts, takes: Array) -> None:
    """Cut samples of `widths` (m,) into pieces at `bounds` (n + 1,) of intervals of g, all but the top one.

    Interval i has the pieces from ends[i] to ends[i + 1], of widths `takes`; the first of them is of the sample
    starts[i] and each other of the next sample.  `starts` (n,), `ends` (n,), `takes` (m + n,).
    """
    sample, left, last, piece = 0, widths[0], widths.size - 1, 0
    ends[0] = 0
    for i in range(starts.size - 1):
        starts[i] = sample
        need = bounds[i + 1] - bounds[i]
        while need > 0.0:
            take = need if left > need or sample == last else left
            takes[piece] = take
            piece += 1
            need -= take
            left -= take
            if left <= _NOTHING * widths[sample] and sample < last:
                sample += 1
                left = widths[sample]
        ends[i + 1] = piece


@jit_in_order
def match_cut(
    values: Array,
    mean: float,
    bounds: Array,
    starts: Counts,
    ends: Counts,
    takes: Array,
    x0: float,
    work: Array,
    out: Array,
) -> None:
    """Fill `out` (n,) from rising `values` (m,) that `cut` has cut into pieces; `mean` is theirs.

    `work` (m + 2 n,) is room to work in.  Counted from an interval's lowest value neither small nor large ones lose
    their digits.
    """
    n, pieces = out.size, ends[out.size - 1]
    depths, means = work[:pieces], work[work.size - n :]
    for i in range(n - 1):
        shift, lowest, above = starts[i] - ends[i], values[starts[i]], 0.0
        for piece in range(ends[i], ends[i + 1]):
            depths[piece] = values[shift + piece] - lowest
            above += takes[piece] * depths[piece]
        means[i] = above / (bounds[i + 1] - bounds[i])
        column = x0 / (lowest + means[i]) if means[i] > 0.0 else 0.0
        for piece in range(ends[i], ends[i + 1]):
            depths[piece] *= column
    if x0 > 0.0:
        absorb(depths)
    rest = mean
    for i in range(n - 1):
        lowest, width = values[starts[i]], bounds[i + 1] - bounds[i]
        k = lowest + means[i]
        if x0 > 0.0 and means[i] > 0.0:
            lost = 0.0
            for piece in range(ends[i], ends[i + 1]):
                lost += takes[piece] * depths[piece]
            # Rounding must not make the k of a wide range of values infinite; it is never above the mean.
            k = min(lowest - math.log1p(-min(lost / width, _ALL)) * k / x0, k)
        out[i] = max(k, out[i - 1]) if i else k
        rest -= out[i] * width
    top = rest / (bounds[n] - bounds[n - 1])
    out[n - 1] = max(top, out[n - 2]) if n > 1 else top


@jit_exact
def match_rows(values: Array, widths: Array, bounds: Array, x0: float, out: Array) -> None:
    """k over intervals of g for rows of samples: `values` (n_row, m), rising and 0 or above; `widths` (m,), sum 1.

    `bounds` (n_row, n + 1) rise from 0 to 1, or (1, n + 1) for all rows; `out` (n_row, n) rises.
    """
    n = out.shape[1]
    starts, ends = np.empty(n, dtype=np.int64), np.empty(n, dtype=np.int64)
    takes, work = np.empty(widths.size + n), np.empty(widths.size + 2 * n)
    for row in range(values.shape[0]):
        own = bounds[row % bounds.shape[0]]
        if row == 0 or bounds.shape[0] > 1:
            cut(widths, own, starts, ends, takes)
        mean = weighted_sum(values[row], widths)
        match_cut(values[row], mean, own, starts, ends, takes, x0, work, out[row])


@jit_exact
def _pairs(
    first: Array, first_weights: Array, second: Array, second_weights: Array, values: Array, weights: Array
) -> None:
    """All sums of two values in rising order, (n1 n2,), with the products of their weights."""
    n = second.size
    sums = np.empty(values.size)
    for i in range(first.size):
        for j in range(n):
            sums[i * n + j] = first[i] + second[j]
    order = np.argsort(sums)
    for place in range(order.size):
        pair = order[place]
        values[place] = sums[pair]
        weights[place] = first_weights[pair // n] * second_weights[pair % n]


@jit_exact
def mix_matched(first: Array, second: Array, weights: Array, bounds: Array, x0: float, out: Array) -> None:
    """Random overlap of rows of two sets of k (n_row, n) of the same `weights` (n_row or 1, n), into `out` (n_row, n).

    All sums of the two are put in order and matched over the intervals of `bounds` (n_row or 1, n + 1).
    """
    n = first.shape[1]
    values, products = np.empty(n * n), np.empty(n * n)
    starts, ends = np.empty(n, dtype=np.int64), np.empty(n, dtype=np.int64)
    takes, work = np.empty(n * n + n), np.empty(n * n + 2 * n)
    for row in range(first.shape[0]):
        own, its_bounds = weights[row % weights.shape[0]], bounds[row % bounds.shape[0]]
        _pairs(first[row], own, second[row], own, values, products)
        cut(products, its_bounds, starts, ends, takes)
        mean = weighted_sum(values, products)
        match_cut(values, mean, its_bounds, starts, ends, takes, x0, work, out[row])


@jit_exact
def _between(values: Array, places: Array, at: float) -> float:
    """ln(values) linear between rising places, constant beyond them; the values themselves where one of two is 0."""
    last = places.size - 1
    if at <= places[0]:
        return float(values[0])
    if at >= places[last]:
        return float(values[last])
    high = np.searchsorted(places, at)
    low = high - 1
    share = (at - places[low]) / (places[high] - places[low])
    if values[low] > 0.0:
        return float(values[low] * math.exp(share * math.log(values[high] / values[low])))
    return float(share * values[high])


@jit_exact
def at_points(values: Array, widths: Array, points: Array, out: Array) -> None:
    """k at points of g (n_row or 1, n) from rows of rising samples (n_row, m) of `widths` (m,), into `out` (n_row, n).

    A sample's place is the middle of its width.
    """
    places = _middles(widths)
    for row in range(values.shape[0]):
        for i in range(out.shape[1]):
            out[row, i] = _between(values[row], places, points[row % points.shape[0], i])


@jit_exact
def mix_interpolated(first: Array, second: Array, weights: Array, points: Array, out: Array) -> None:
    """As `mix_matched`, but with the sums in order interpolated in ln k at points of g (n_row or 1, n)."""
    n = first.shape[1]
    values, products = np.empty(n * n), np.empty(n * n)
    for row in range(first.shape[0]):
        own = weights[row % weights.shape[0]]
        _pairs(first[row], own, second[row], own, values, products)
        places = _middles(products)
        for i in range(n):
            out[row, i] = _between(values, places, points[row % points.shape[0], i])


@jit_exact
def _middles(widths: Array) -> Array:
    places = np.empty(widths.size)
    done = 0.0
    for i in range(widths.size):
        places[i] = done + 0.5 * widths[i]
        done += widths[i]
    return places
