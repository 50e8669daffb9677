"""A table put together from shards: never whole in memory, and under a temporary name until all of it is proved."""

from __future__ import annotations

import contextlib
import math
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from opacity.errors import ResourceError, TableError, problem
from opacity.grids import FloatArray
from opacity.tables import layout
from opacity.tables.atomic import CarefulFile, renamed_when_done
from opacity.tables.blocks import pack_block, unpack_block
from opacity.tables.image import characters, write_frame, write_hashes, write_texts
from opacity.tables.model import TableFrame
from opacity.tables.shard import Shard
from opacity.tables.write import check_frame, verify_written


class Assembly:
    """A table while its shards come in; its spectra can be read back when all are there (as a table's can)."""

    def __init__(self, path: Path, file: CarefulFile, frame: TableFrame, dtype: np.dtype[Any]) -> None:
        self._path, self._file, self._frame, self._dtype = path, file, frame, dtype
        self._hdf5 = h5py.File(file, "w", driver="fileobj", libver=layout.LIBVER, track_order=True)
        try:
            self._values = write_frame(self._hdf5, frame, dtype)
        except BaseException:
            self.close()
            raise
        self._chunk = int(self._values.chunks[-1])
        self._blocks = layout.block_slices(frame.wavenumber.size)
        self._hashes = np.zeros((*frame.shape[:-1], len(self._blocks), layout.HEX_DIGITS), dtype="S1")

    @property
    def temperature(self) -> FloatArray:
        """Temperatures (K) of the axis, or of the nodes of a profile."""
        return self._frame.temperature

    @property
    def pressure(self) -> FloatArray:
        """Pressures (bar)."""
        return self._frame.pressure

    @property
    def wavenumber(self) -> FloatArray:
        """Wavenumbers (cm-1), (n_nu,)."""
        return self._frame.wavenumber

    @property
    def profile(self) -> bool:
        """Whether the nodes are those of a profile."""
        return self._frame.profile

    def spectrum(self, *node: int) -> FloatArray:
        """The stored values of a node (cm2/molecule), (n_nu,)."""
        spectrum = np.empty(self._frame.wavenumber.size)
        for block in self._blocks:
            _, data = self._values.id.read_direct_chunk((*node, block.start))
            self._file.raise_failure()
            spectrum[block] = unpack_block(data, block.stop - block.start, self._dtype)
        return spectrum

    def add(self, shard: Shard) -> None:
        """Take in a shard's blocks as they are, or packed anew where the table needs f8 and the shard has f4."""
        per_row = layout.block_count(shard.stop - shard.start)
        for number, (data, digest) in enumerate(zip(shard.blocks, shard.hashes, strict=True)):
            row, place = divmod(number, per_row)
            node = tuple(int(i) for i in np.unravel_index(shard.rows[row], self._frame.shape[:-1]))
            start = shard.start + layout.BLOCK * place
            if shard.dtype != self._dtype:
                values = shard.values(number).astype(self._dtype)
                data, digest = pack_block(values, self._chunk), layout.sha256_of(values)
            self._values.id.write_direct_chunk((*node, start), data)
            self._hashes[(*node, start // layout.BLOCK)] = characters(digest)
        self._file.raise_failure()

    def finish(self, checks: dict[str, Any]) -> None:
        """Write what comes last, and close.  Raises OSError for what the file system refused."""
        if not np.all(self._hashes != b""):
            raise TableError(problem(self._path, "some of the table's shards are missing"))
        write_hashes(self._hdf5, self._hashes, self._frame.profile)
        write_texts(self._hdf5, self._frame, checks)
        self.close()
        self._file.finish()

    def close(self) -> None:
        """Close the file, whatever became of it."""
        with contextlib.suppress(OSError, RuntimeError, ValueError):
            self._hdf5.close()


def assemble_table(
    path: Path,
    frame: TableFrame,
    dtype: np.dtype[Any],
    shards: Iterable[Shard],
    check: Callable[[Assembly], dict[str, Any]],
    workers: int = 1,
) -> dict[str, Any]:
    """Write the table of `frame` from all its shards, one at a time in memory; the checks that were stored.

    `check` makes the checks of the values as they are stored.  The file is synced, read back block by block against
    its hashes and only then given its name.  Raises TableError for what may not be stored, ResourceError for what the
    file system refuses; nothing is left behind then.
    """
    check_frame(path, frame)
    with renamed_when_done(path) as temporary, _careful(temporary) as file:
        table = Assembly(path, file, frame, dtype)
        try:
            for shard in shards:
                table.add(shard)
            checks = check(table)
            table.finish(checks)
        except MemoryError as error:
            raise ResourceError(problem(path, "not enough memory to put the table together")) from error
        except (RuntimeError, ValueError, OSError):
            # What HDF5 makes of a failure of the disk says less than the failure itself.
            file.raise_failure()
            raise
        finally:
            table.close()
        verify_written(path, temporary, workers=workers)
    return checks


@contextlib.contextmanager
def _careful(path: Path) -> Iterator[CarefulFile]:
    file = CarefulFile(path)
    try:
        yield file
    finally:
        file.close()


def stored_type_of(extremes: Iterable[tuple[float, float]]) -> np.dtype[Any]:
    """The type of a table from the smallest value that is not 0, and the largest, of each of its shards."""
    smallest, largest = math.inf, 0.0
    for low, high in extremes:
        smallest, largest = min(smallest, low), max(largest, high)
    return layout.stored_type(smallest, largest)
