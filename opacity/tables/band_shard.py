"""Shards of k-coefficient tables: the fine cells of some bands at some nodes, sealed as those of spectra are."""

from __future__ import annotations

import zlib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.tables.sealed import read_sealed, write_sealed


@dataclass(frozen=True)
class BandShard:
    """Fine `cells` (n_row, n_band, n_cell) as f4 or f8; `sums` (n_row, 4) that means are made of; `points` (n_row, 2)
    that the spectrum of a node had, and would have needed.
    """

    cells: NDArray[Any]
    sums: FloatArray
    points: FloatArray


def write_band_shard(path: Path, shard: BandShard) -> None:
    """Write a shard to its final name.  Raises ResourceError for what the file system refuses."""
    arrays = {name: np.ascontiguousarray(getattr(shard, name)) for name in ("cells", "sums", "points")}
    blocks = [zlib.compress(one.tobytes(), 1) for one in arrays.values()]
    header = {
        "arrays": [[name, one.dtype.str, list(one.shape)] for name, one in arrays.items()],
        "bytes": [len(block) for block in blocks],
    }
    write_sealed(path, header, blocks)


def read_band_shard(path: Path) -> BandShard:
    """A shard from its file.  Raises TableError where it is missing, damaged or not one."""
    header, blocks = read_sealed(path)
    arrays = {
        name: np.frombuffer(zlib.decompress(block), dtype).reshape(shape)
        for (name, dtype, shape), block in zip(header["arrays"], blocks, strict=True)
    }
    return BandShard(**arrays)
