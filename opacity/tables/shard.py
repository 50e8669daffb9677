"""Shards: finished parts of a table on disk, each of whose bytes is proved.

A shard is named by the hash of its inputs and holds the stored blocks of some spectra over a stretch of the grid, in a
sealed file (`sealed`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.kernels.packing import NO_WORD, word_range
from opacity.tables import layout
from opacity.tables.blocks import pack_rows_of, unpack_block
from opacity.tables.sealed import read_header, read_sealed, write_sealed


@dataclass(frozen=True)
class Shard:
    """Spectra of `rows` (numbers of nodes in stored order) from point `start` on; `blocks` by row, then along the grid.

    `smallest` is the smallest value that is not 0, infinite where there is none; `notes` are plain values for JSON.
    """

    rows: tuple[int, ...]
    start: int
    stop: int
    dtype: np.dtype[Any]
    smallest: float
    largest: float
    notes: dict[str, Any]
    hashes: tuple[str, ...]
    blocks: tuple[Any, ...]

    def values(self, number: int) -> NDArray[Any]:
        """The values of one block by its number, (n,)."""
        per_row = layout.block_count(self.stop - self.start)
        first = self.start + layout.BLOCK * (number % per_row)
        return unpack_block(self.blocks[number], min(layout.BLOCK, self.stop - first), self.dtype)


def make_shard(rows: tuple[int, ...], start: int, chunk: int, spectra: FloatArray, notes: dict[str, Any]) -> Shard:
    """Spectra (n_rows, n_points) as a shard; `chunk` is the length of the table's chunks.

    Stored as f4 where all values that are not 0 lie in its range, else as f8.  The values must be 0 or above; where
    one is not, or not finite, `largest` is NaN or infinite.
    """
    smallest, largest = _extremes(spectra)
    dtype = layout.stored_type(smallest, largest)
    stored = np.empty(spectra.shape, dtype)
    hashes = []
    for spectrum, row in zip(spectra, stored, strict=True):
        # Adding 0 turns a negative zero into the plain one.
        np.add(spectrum, 0.0, out=row, casting="same_kind")
        hashes += [layout.sha256_of(row[block]) for block in layout.block_slices(row.size)]
    blocks = pack_rows_of(stored, chunk)
    stop = start + spectra.shape[1]
    return Shard(rows, start, stop, dtype, smallest, largest, notes, tuple(hashes), tuple(blocks))


def _extremes(spectra: FloatArray) -> tuple[float, float]:
    """The smallest value that is not 0, infinite where there is none, and the largest; NaN for what may not be."""
    smallest, largest = word_range(np.ascontiguousarray(spectra, dtype=np.float64).reshape(-1).view(np.uint64))
    low, high = np.array([smallest, largest], dtype=np.uint64).view(np.float64).tolist()
    return low if smallest != NO_WORD else float("inf"), high if high >= 0.0 else float("nan")


def write_shard(path: Path, shard: Shard) -> None:
    """Write a shard to its final name.  Raises ResourceError for what the file system refuses."""
    header = {
        "rows": list(shard.rows),
        "start": shard.start,
        "stop": shard.stop,
        "dtype": shard.dtype.str,
        "smallest": repr(shard.smallest),
        "largest": repr(shard.largest),
        "notes": shard.notes,
        "hashes": list(shard.hashes),
    }
    write_sealed(path, header, shard.blocks)


def read_shard(path: Path) -> Shard:
    """A shard from its file.  Raises TableError where it is missing, damaged or not a shard."""
    return _shard(*read_sealed(path))


def read_shard_header(path: Path) -> Shard:
    """A shard from its file without its blocks, which are not proved.  Raises TableError as `read_shard` does."""
    return _shard(read_header(path), [])


def _shard(header: dict[str, Any], blocks: Sequence[Any]) -> Shard:
    return Shard(
        tuple(header["rows"]),
        header["start"],
        header["stop"],
        np.dtype(header["dtype"]),
        float(header["smallest"]),
        float(header["largest"]),
        header["notes"],
        tuple(header["hashes"]),
        tuple(blocks),
    )
