"""Samples of one band, each with a weight, to means over intervals of g: sorted by radix, then added up in order.

g is the share of the band's weight where k is less.  Means are exact integrals: a sample that lies across the
border of two cells counts in both, as far as it lies in each, and a band's mean is kept.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit, jit_exact

Array = NDArray[np.float64]
Keys = NDArray[np.uint64]

_DIGIT = 11
_SIZE = 1 << _DIGIT
_PASSES = 3
_KEPT = 29
_SPAN = ((1 << 32) - 1) << _KEPT
_INDEX = 32
_LOW = (1 << _INDEX) - 1


@jit
def _sum(weights: Array) -> float:
    total = 0.0
    for i in range(weights.size):
        total += weights[i]
    return total


@jit_exact
def _fill_keys(bits: Keys, top: np.uint64, keys: Keys) -> None:
    """Keys of 32 bits above the sample's number: 0 for zero, then 23 bits of mantissa over 154 decades below the top.

    The bits of positive f8 rise with their values; what lies deeper than 154 decades shares one key.
    """
    base = top - np.uint64(_SPAN) if top > np.uint64(_SPAN) else np.uint64(0)
    for i in range(bits.size):
        value = bits[i]
        key = np.uint64(0)
        if value > np.uint64(0):
            key = np.uint64(1)
            if value > base:
                key = max(key, (value - base) >> np.uint64(_KEPT))
        keys[i] = (key << np.uint64(_INDEX)) | np.uint64(i)


@jit_exact
def _sort(keys: Keys, spare: Keys) -> bool:
    """Sort by the upper 32 bits, stable, from the lowest digit up; whether the result lies in `spare`."""
    counts = np.zeros((_PASSES, _SIZE), dtype=np.int32)
    n = keys.size
    for i in range(n):
        key = keys[i] >> np.uint64(_INDEX)
        counts[0, key & np.uint64(_SIZE - 1)] += 1
        counts[1, (key >> np.uint64(_DIGIT)) & np.uint64(_SIZE - 1)] += 1
        counts[2, key >> np.uint64(2 * _DIGIT)] += 1
    swapped = False
    for digit in range(_PASSES):
        shift = np.uint64(_INDEX + digit * _DIGIT)
        ends = counts[digit]
        # A digit that all keys share moves nothing.
        if ends[(keys[0] >> shift) & np.uint64(_SIZE - 1)] == n:
            continue
        place = 0
        for value in range(_SIZE):
            count = ends[value]
            ends[value] = place
            place += count
        for i in range(n):
            key = keys[i]
            value = (key >> shift) & np.uint64(_SIZE - 1)
            spare[ends[value]] = key
            ends[value] += 1
        keys, spare = spare, keys
        swapped = not swapped
    return swapped


@jit_exact
def _add_up(keys: Keys, values: Array, weights: Array, total: float, widths: Array, cells: Array) -> None:
    """Means of the samples, in the order of their keys, over cells of given widths in g (sum 1)."""
    cell, last = 0, widths.size - 1
    room, integral = widths[0] * total, 0.0
    for i in range(keys.size):
        sample = keys[i] & np.uint64(_LOW)
        value, weight = values[sample], weights[sample]
        while weight > room and cell < last:
            cells[cell] = (integral + value * room) / (widths[cell] * total)
            weight -= room
            cell += 1
            room, integral = widths[cell] * total, 0.0
        integral += value * weight
        room -= weight
    # A cell that rounding left without its last sample still has its mean.
    cells[cell] = integral / (widths[cell] * total)
    for rest in range(cell + 1, last + 1):
        cells[rest] = values[keys[keys.size - 1] & np.uint64(_LOW)]


@jit_exact
def _pool(cells: Array, widths: Array) -> None:
    """Where rounding put neighbours out of order, give both their mean, back to where order holds."""
    for i in range(1, cells.size):
        if cells[i] >= cells[i - 1]:
            continue
        first, integral, width = i, cells[i] * widths[i], widths[i]
        while first > 0 and cells[first - 1] > integral / width:
            first -= 1
            integral += cells[first] * widths[first]
            width += widths[first]
        cells[first : i + 1] = integral / width


@jit_exact
def _collapse(values: Array, bits: Keys, weights: Array, widths: Array, cells: Array, keys: Keys, spare: Keys) -> None:
    """One band: `bits` are those of the samples, `keys` and `spare`, as long, are room to work in."""
    top = np.uint64(0)
    for i in range(bits.size):
        if bits[i] > top:
            top = bits[i]
    if top == np.uint64(0):
        cells[:] = 0.0
        return
    _fill_keys(bits, top, keys)
    swapped = _sort(keys, spare)
    _add_up(spare if swapped else keys, values, weights, _sum(weights), widths, cells)
    _pool(cells, widths)


@jit_exact
def collapse_rows(values: Array, bits: Keys, weights: Array, widths: Array, cells: Array) -> None:
    """Fill `cells` (n_row, n_cell) with the means of each row's samples over cells of `widths` (n_cell,) in g.

    `values` (n_row, n), 0 or above; `bits` the same memory seen as unsigned integers; `weights` (n_row, n) above 0.
    """
    keys, spare = np.empty(values.shape[1], dtype=np.uint64), np.empty(values.shape[1], dtype=np.uint64)
    for row in range(values.shape[0]):
        _collapse(values[row], bits[row], weights[row], widths, cells[row], keys, spare)


@jit_exact
def collapse_bands(
    sigma: Array,
    bits: Keys,
    borders: Array,
    edges: Array,
    first: NDArray[np.int64],
    last: NDArray[np.int64],
    widths: Array,
    cells: Array,
) -> None:
    """Fill `cells` (n_band, n_cell) with the means of a spectrum (n_nu,) in bands, over cells of `widths` in g.

    `bits` is the spectrum's memory seen as unsigned integers; `borders` (n_nu + 1,) of the points' cells, `edges`
    (n_band + 1,), `first` and `last` (n_band,) as in `k_coefficient.bands.BandPoints`.
    """
    most = np.max(last - first)
    keys, spare = np.empty(most, dtype=np.uint64), np.empty(most, dtype=np.uint64)
    weights = np.empty(most)
    for band in range(first.size):
        start, n = first[band], last[band] - first[band]
        low, high = edges[band], edges[band + 1]
        for i in range(n):
            weights[i] = min(borders[start + i + 1], high) - max(borders[start + i], low)
        values, its_bits = sigma[start : start + n], bits[start : start + n]
        _collapse(values, its_bits, weights[:n], widths, cells[band], keys[:n], spare[:n])


@jit_exact
def band_means(
    sigma: Array, borders: Array, edges: Array, first: NDArray[np.int64], last: NDArray[np.int64], means: Array
) -> None:
    """Fill `means` (n_band,) with the means of a spectrum (n_nu,) in bands; arguments as those of `collapse_bands`."""
    for band in range(first.size):
        low, high, total = edges[band], edges[band + 1], 0.0
        for i in range(first[band], last[band]):
            total += sigma[i] * (min(borders[i + 1], high) - max(borders[i], low))
        means[band] = total / (high - low)
