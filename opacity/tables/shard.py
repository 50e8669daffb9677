"""Shards: finished parts of a table on disk, each proved by a hash of everything in it.

A shard is named by the hash of its inputs and holds the stored blocks of some spectra over a stretch of the grid, in a
sealed file (`sealed`).
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.tables import layout
from opacity.tables.blocks import pack_block, unpack_block
from opacity.tables.sealed import read_sealed, write_sealed


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
    blocks: tuple[bytes, ...]

    def values(self, number: int) -> NDArray[Any]:
        """The values of one block by its number, (n,)."""
        per_row = layout.block_count(self.stop - self.start)
        first = self.start + layout.BLOCK * (number % per_row)
        return unpack_block(self.blocks[number], min(layout.BLOCK, self.stop - first), self.dtype)


def make_shard(rows: tuple[int, ...], start: int, chunk: int, spectra: FloatArray, notes: dict[str, Any]) -> Shard:
    """Spectra (n_rows, n_points) as a shard; `chunk` is the length of the table's chunks.

    Stored as f4 where all values that are not 0 lie in its range, else as f8.  The values must be finite, 0 or above.
    """
    positive = spectra[spectra > 0.0]
    smallest, largest = float(positive.min(initial=np.inf)), float(positive.max(initial=0.0))
    dtype = layout.stored_type(smallest, largest)
    hashes, blocks = [], []
    for spectrum in spectra:
        # Adding 0 turns a negative zero into the plain one.
        values = np.add(spectrum, 0.0).astype(dtype)
        for block in layout.block_slices(values.size):
            hashes.append(layout.sha256_of(values[block]))
            blocks.append(pack_block(values[block], chunk))
    stop = start + spectra.shape[1]
    return Shard(rows, start, stop, dtype, smallest, largest, notes, tuple(hashes), tuple(blocks))


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
    header, blocks = read_sealed(path)
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
