"""Equal rows of a table found by hashing: each row's class, in one pass."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact


@jit_exact
def classify(
    rows: NDArray[np.uint64], slots: NDArray[np.int64], first: NDArray[np.int64], out: NDArray[np.uint32]
) -> int:
    """Number equal rows alike, in order of first appearance; the number of classes.

    `rows` (n, k) as bits; `slots` is work space, all -1, its length a power of two above n; `first` (n,) receives the
    row in which each class appears first, `out` (n,) each row's class.
    """
    mask = np.uint64(slots.size - 1)
    count = 0
    for i in range(rows.shape[0]):
        hashed = np.uint64(1469598103934665603)
        for k in range(rows.shape[1]):
            # FNV-1a over whole words, with a mix so that high bits count (offset and prime of the 64-bit variant).
            hashed = (hashed ^ rows[i, k]) * np.uint64(1099511628211)
            hashed ^= hashed >> np.uint64(29)
        slot = hashed & mask
        while True:
            found = slots[slot]
            if found < 0:
                slots[slot] = count
                first[count] = i
                out[i] = count
                count += 1
                break
            same = True
            for k in range(rows.shape[1]):
                same = same and rows[first[found], k] == rows[i, k]
            if same:
                out[i] = found
                break
            slot = (slot + np.uint64(1)) & mask
    return count
