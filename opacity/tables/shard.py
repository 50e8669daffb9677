"""Shards: finished parts of a table on disk, each proved by a hash of everything in it.

A shard is named by the hash of its inputs and holds the stored blocks of some spectra over a stretch of the grid.  Its
file: a line that names the format, a line with the sha256 of all that follows, the length of a JSON header as 8 bytes,
the header, and the blocks one after the other.  It is written whole and never changed.
"""

from __future__ import annotations

import errno
import hashlib
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import TableError, problem
from opacity.grids import FloatArray
from opacity.tables import layout
from opacity.tables.atomic import write_atomically
from opacity.tables.blocks import pack_block, unpack_block

_MAGIC = b"opacity shard 1\n"
ENDING = ".shard"


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
        "unit": path.stem,
        "rows": list(shard.rows),
        "start": shard.start,
        "stop": shard.stop,
        "dtype": shard.dtype.str,
        "smallest": repr(shard.smallest),
        "largest": repr(shard.largest),
        "notes": shard.notes,
        "hashes": list(shard.hashes),
        "bytes": [len(block) for block in shard.blocks],
    }
    text = json.dumps(header, sort_keys=True).encode("ascii")
    content = b"".join([len(text).to_bytes(8, "little"), text, *shard.blocks])
    seal = hashlib.sha256(content).hexdigest().encode("ascii")
    write_atomically(path, b"".join([_MAGIC, seal, b"\n", content]))


def read_shard(path: Path) -> Shard:
    """A shard from its file.  Raises TableError where it is missing, damaged or not a shard."""
    try:
        if not path.is_file():
            raise FileNotFoundError(errno.ENOENT, "no such file")
        data = path.read_bytes()
    except OSError as error:
        raise TableError(problem(path, f"the shard cannot be read ({error.strerror or error})")) from error
    begin = len(_MAGIC) + 65
    seal, content = data[len(_MAGIC) : begin], memoryview(data)[begin:]
    if not data.startswith(_MAGIC) or seal != hashlib.sha256(content).hexdigest().encode("ascii") + b"\n":
        raise TableError(problem(path, "the shard is not as it was written"))
    length = int.from_bytes(content[:8], "little")
    header = json.loads(bytes(content[8 : 8 + length]))
    if header.get("unit") != path.stem:
        raise TableError(problem(path, "the shard is another unit's", expected=path.stem, found=header.get("unit")))
    blocks, position = [], 8 + length
    for size in header["bytes"]:
        blocks.append(bytes(content[position : position + size]))
        position += size
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


def is_whole(path: Path) -> bool:
    """Whether a shard is there and as it was written."""
    try:
        read_shard(path)
    except TableError:
        return False
    return True
