"""Order of positive numbers, stable, by radix: several times quicker than a comparison sort."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact

_BITS = 8
_SIZE = 1 << _BITS
_PASSES = 8


@jit_exact
def _order(
    keys: NDArray[np.uint64], spare_keys: NDArray[np.uint64], order: NDArray[np.uint32], spare: NDArray[np.uint32]
) -> bool:
    """Sort keys and their row numbers, from the lowest digit up; whether the result lies in the spare arrays.

    Keys move along with their rows: looked up by row, they would come from all over memory.  Digits are of 8 bits,
    since the cache has no room for the ends of many more stretches that grow at once.
    """
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
        for i in range(n):
            key = keys[i]
            value = (key >> shift) & np.uint64(_SIZE - 1)
            place = counts[digit, value]
            counts[digit, value] = place + 1
            spare_keys[place], spare[place] = key, order[i]
        keys, spare_keys = spare_keys, keys
        order, spare = spare, order
        swapped = not swapped
    return swapped


def order_of(values: NDArray[np.float64]) -> NDArray[np.uint32]:
    """Row numbers (n,) that put positive numbers in rising order; equal ones keep their order.  At most 2^32 rows."""
    # The bits of positive f8 rise with their values.
    keys = np.array(values, dtype=np.float64).view(np.uint64)
    order, spare = np.arange(keys.size, dtype=np.uint32), np.empty(keys.size, dtype=np.uint32)
    return spare if _order(keys, np.empty_like(keys), order, spare) else order
