"""Shards of k-coefficient tables: the fine cells of some bands at some nodes, sealed as those of spectra are."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import LineListError, TableError, problem
from opacity.grids import FloatArray
from opacity.tables import layout
from opacity.tables.sealed import read_sealed, write_sealed


@dataclass(frozen=True)
class BandShard:
    """Fine `cells` (n_row, n_band, n_cell), cm2; `sums` (n_row, 4) that means are made of; `points` (n_row, n_band, 2)
    that the spectrum of a band had, and would have needed; the type of `processor` that made them.
    """

    cells: NDArray[Any]
    sums: FloatArray
    points: FloatArray
    processor: str


def write_band_shard(path: Path, shard: BandShard) -> None:
    """Write a shard to its final name, the cells as f4 where all that are not 0 lie in its range.

    Raises LineListError for values that are not finite, ResourceError for what the file system refuses.
    """
    positive = shard.cells[shard.cells > 0.0]
    if not np.all(np.isfinite(shard.cells)):
        raise LineListError(problem(path, "a cell is not finite: a line has impossible values"))
    dtype = layout.stored_type(float(positive.min(initial=np.inf)), float(positive.max(initial=0.0)))
    arrays = {"cells": shard.cells.astype(dtype), "sums": shard.sums, "points": shard.points}
    blocks = [np.ascontiguousarray(one).tobytes() for one in arrays.values()]
    described = [[name, one.dtype.str, one.shape] for name, one in arrays.items()]
    header = {"arrays": described, "sha256": [_sha256(block) for block in blocks], "processor": shard.processor}
    write_sealed(path, header, blocks)


def read_band_shard(path: Path) -> BandShard:
    """A shard from its file.  Raises TableError where it is missing, damaged or not one."""
    header, blocks = read_sealed(path)
    if [_sha256(block) for block in blocks] != header["sha256"]:
        raise TableError(problem(path, "the shard is not as it was written"))
    arrays = {
        name: np.frombuffer(block, dtype).reshape(shape)
        for (name, dtype, shape), block in zip(header["arrays"], blocks, strict=True)
    }
    return BandShard(arrays["cells"], arrays["sums"], arrays["points"], header["processor"])


def _sha256(block: bytes | memoryview) -> str:
    return hashlib.sha256(block).hexdigest()
