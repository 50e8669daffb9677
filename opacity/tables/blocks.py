"""One block of a spectrum as it is stored: bytes by significance, deflated, and the sha256 of its values.

What HDF5's filters `shuffle` and `deflate` would make, but quicker: the lower bytes of computed values are noise that
deflate cannot shorten, so they are stored as they are within the same zlib stream (RFC 1950, 1951), which any reader
unpacks.  HDF5 itself compresses under one lock; this can be done by many threads.
"""

from __future__ import annotations

import zlib
from typing import Any

import numpy as np
from numpy.typing import NDArray

_SAMPLE = 2048
_WORTH_IT = 0.95
"""A sample of bytes that deflates to less than this share is worth deflating."""
_ZLIB_HEADER = b"\x78\x5e"


def pack_block(values: NDArray[Any], chunk: int) -> bytes:
    """The stored bytes of a block, (n,) of f4 or f8; a last block shorter than the chunk is filled up with NaN."""
    if values.size < chunk:
        values = np.concatenate([values, np.full(chunk - values.size, np.nan, values.dtype)])
    little = np.ascontiguousarray(values, dtype=values.dtype.newbyteorder("<"))
    planes = np.ascontiguousarray(little.view(np.uint8).reshape(little.size, little.itemsize).T)
    # The highest bytes, sign and exponent, come in long runs; each plane below is noisier than the one above it.
    streams = [_deflated(planes[-1].tobytes(), zlib.Z_RLE, zlib.Z_FINISH)]
    shrinks = True
    for plane in planes[-2::-1]:
        data = plane.tobytes()
        shrinks = shrinks and _shrinks(data)
        streams.append(_deflated(data, zlib.Z_DEFAULT_STRATEGY if shrinks else None, zlib.Z_FULL_FLUSH))
    return b"".join([_ZLIB_HEADER, *reversed(streams), zlib.adler32(planes.tobytes()).to_bytes(4, "big")])


def _deflated(data: bytes, strategy: int | None, end: int) -> bytes:
    """A part of a deflate stream; without a strategy the bytes are stored as they are."""
    level = 0 if strategy is None else 1
    stream = zlib.compressobj(level, zlib.DEFLATED, -zlib.MAX_WBITS, 9, strategy or zlib.Z_DEFAULT_STRATEGY)
    return stream.compress(data) + stream.flush(end)


def unpack_block(data: bytes, size: int, dtype: np.dtype[Any]) -> NDArray[Any]:
    """The values of a stored block, (size,); the inverse of `pack_block`.  Raises ValueError for damaged bytes."""
    try:
        raw = zlib.decompress(data)
    except zlib.error as error:
        raise ValueError(str(error)) from error
    planes = np.frombuffer(raw, dtype=np.uint8).reshape(dtype.itemsize, -1)
    return np.ascontiguousarray(planes.T).view(dtype.newbyteorder("<")).ravel()[:size]


def _shrinks(data: bytes) -> bool:
    middle = len(data) // 2
    sample = data[max(middle - _SAMPLE // 2, 0) : middle + _SAMPLE // 2]
    return len(zlib.compress(sample, 1)) < _WORTH_IT * len(sample)
