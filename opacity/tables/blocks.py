"""Blocks of spectra as they are stored: bytes by significance, deflated, and the sha256 of their values.

What HDF5's filters `shuffle` and `deflate` would make, but quicker (`kernels/packing.py`): the lower bytes of computed
values are noise that deflate cannot shorten, so they are stored as they are within the same zlib stream (RFC 1950,
1951), which any reader unpacks.  HDF5 itself compresses under one lock; this can be done by many threads.
"""

from __future__ import annotations

import itertools
import zlib
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.tables import layout

_WORDS = {4: np.uint32, 8: np.uint64}


def pack_rows_of(values: NDArray[Any], chunk: int, block: int | None = None) -> list[memoryview]:
    """The stored bytes of every block of rows (n_row, n) of f4 or f8, by row, then along it.

    Blocks are those of a table unless `block` is given.  One shorter than the `chunk` is filled up with NaN.
    """
    from opacity.kernels.packing import pack_rows, room_for  # late: who only reads tables needs no kernels

    native = np.ascontiguousarray(values, dtype=values.dtype.newbyteorder("="))
    size, block = native.itemsize, block or layout.BLOCK
    chunk = max(chunk, min(block, native.shape[1]))  # the kernel does not look whether a block fits
    count = native.shape[0] * -(-native.shape[1] // block)
    room, ends = np.empty(count * room_for(chunk, size), np.uint8), np.empty(count, np.int64)
    pack_rows(native.view(_WORDS[size]), chunk, block, room, ends)
    # Not a copy: most of the room is used.
    data = memoryview(room.data)
    return [data[start:stop] for start, stop in itertools.pairwise([0, *ends.tolist()])]


def pack_block(values: NDArray[Any], chunk: int) -> bytes:
    """The stored bytes of a block, (n,) of f4 or f8; a last block shorter than the chunk is filled up with NaN."""
    return bytes(pack_rows_of(values.reshape(1, -1), chunk, chunk)[0])


def unpack_block(data: Any, size: int, dtype: np.dtype[Any]) -> NDArray[Any]:
    """The values of a stored block, (size,); the inverse of `pack_block`.  Raises ValueError for damaged bytes."""
    try:
        raw = zlib.decompress(data, bufsize=max(size * dtype.itemsize, 1))
    except zlib.error as error:
        raise ValueError(str(error)) from error
    planes = np.frombuffer(raw, dtype=np.uint8).reshape(dtype.itemsize, -1)
    if planes.shape[1] < size:
        raise ValueError(f"{planes.shape[1]} values instead of {size}")
    words = planes[-1, :size].astype(_WORDS[dtype.itemsize])
    for plane in planes[-2::-1, :size]:
        words <<= 8
        words |= plane
    return words.view(dtype.newbyteorder("=")).astype(dtype, copy=False)
