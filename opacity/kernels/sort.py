"""Order of positive numbers, stable, by radix: several times quicker than a comparison sort."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact

_BITS = 11
_SIZE = 1 << _BITS
_PASSES = 6


@jit_exact
def _order(keys: NDArray[np.uint64], order: NDArray[np.uint32], spare: NDArray[np.uint32]) -> bool:
    """Sort row numbers by their keys, from the lowest digit of 11 bits up; whether the result lies in `spare`."""
    n = keys.size
    counts = np.zeros((_PASSES, _SIZE), dtype=np.int64)
    for i in range(n):
        key = keys[i]
        for digit in range(_PASSES):
            counts[digit, (key >> np.uint64(digit * _BITS)) & np.uint64(_SIZE - 1)] += 1
    swapped = False
    for digit in range(_PASSES):
        shift = np.uint64(digit * _BITS)
        # A digit that all keys share moves nothing.
        if n and counts[digit, (keys[0] >> shift) & np.uint64(_SIZE - 1)] == n:
            continue
        place = 0
        for value in range(_SIZE):
            count = counts[digit, value]
            counts[digit, value] = place
            place += count
        source = spare if swapped else order
        target = order if swapped else spare
        for i in range(n):
            row = source[i]
            value = (keys[row] >> shift) & np.uint64(_SIZE - 1)
            target[counts[digit, value]] = row
            counts[digit, value] += 1
        swapped = not swapped
    return swapped


def order_of(values: NDArray[np.float64]) -> NDArray[np.uint32]:
    """Row numbers (n,) that put positive numbers in rising order; equal ones keep their order.  At most 2^32 rows."""
    # The bits of positive f8 rise with their values.
    keys = np.ascontiguousarray(values).view(np.uint64)
    order, spare = np.arange(keys.size, dtype=np.uint32), np.empty(keys.size, dtype=np.uint32)
    return spare if _order(keys, order, spare) else order
