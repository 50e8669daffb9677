"""Reading a table: what it says of itself, its spectra, and cross-sections between its nodes."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.tables import interpolate, layout, structure
from opacity.tables.blocks import unpack_block
from opacity.tables.opened import OpenedTable, opened


def open_table(path: str | Path) -> Table:
    """Open a cross-section table for reading; use it in a `with` statement or close it.

    Raises TableError where the file is missing, damaged, not a table, or of a version too new.
    """
    return opened(path, Table)


class Table(OpenedTable):
    """A cross-section table on disk; spectra are read when asked for, and each block is proved by its sha256.

    Attributes: `path`; `title`; `formula`; `recipe` (TOML); `provenance` and `checks` (dict);
    `format_version`; `profile` (whether the nodes are those of a profile); `temperature` (K),
    (n_T,) or (n_node,); `pressure` (bar), (n_P,) or (n_node,); `wavenumber` (cm-1), (n_nu,);
    `dtype`, in which the cross-section is stored; `shape`, (n_T, n_P, n_nu) or (n_node, n_nu).
    """

    def __init__(self, path: Path, file: Any) -> None:
        super().__init__(path, file, layout.FORMAT_NAME, (layout.OLDEST_VERSION, layout.FORMAT_VERSION))
        self.wavenumber = structure.read_axis(path, file, "wavenumber", rising=True)
        self.shape = (*self._sizes, self.wavenumber.size)
        self._values = structure.dataset(path, file, layout.CROSS_SECTION)
        self._hashes = structure.dataset(path, file, layout.HASHES)
        self._check_datasets()
        self.dtype: np.dtype[Any] = self._values.dtype
        self._blocks = layout.block_slices(self.wavenumber.size)
        self._packed_here = structure.is_packed_as(self._values, layout.BLOCK)
        self._proved = np.zeros((*self.shape[:-1], len(self._blocks)), dtype=bool)

    def __repr__(self) -> str:
        nodes = " x ".join(str(size) for size in self.shape[:-1])
        nu = self.wavenumber
        return f"<Table {self.path}: {self.formula}, {nodes} nodes, {nu.size} points {nu[0]:.6g} to {nu[-1]:.6g} cm-1>"

    def at(self, temperature: float, pressure: float, clamp: bool = False, method: str = "cubic") -> FloatArray:
        """Cross-section (cm2/molecule) at a temperature (K) and pressure (bar), (n_nu,).

        ln(sigma) is interpolated over 4 nodes ("cubic") or 2 ("linear") in ln T and ln P; a value where
        some of them are 0 is linear in ln T and ln P itself.  At a node the stored values are returned.
        Outside the grid TableError is raised unless `clamp` is true, which takes the nearest end.
        A table along a profile has values at its own nodes only, TableError elsewhere.  InputError for
        arguments that can't be right.
        """
        if self.profile:
            return self._read(self._profile_node(temperature, pressure)).astype(np.float64)
        nodes = self._grid_nodes(temperature, pressure, clamp, method)
        return interpolate.from_nodes(nodes, self.wavenumber.size, lambda i, j: self._read((i, j)))

    def spectrum(self, *node: int) -> FloatArray:
        """Stored cross-section (cm2/molecule) of one node, (n_nu,).

        The node is given by its indices on the temperature and pressure axes, or along a profile by
        its one index.  InputError for an index that the table does not have.
        """
        return self._read(self._index(node)).astype(np.float64)

    def verify(self, workers: int = 1) -> None:
        """Read everything, in so many threads; TableError names the first block that is not as it was written."""
        self._proved[...] = False
        nodes = np.ndindex(self.shape[:-1])
        if workers == 1:
            for node in nodes:
                self._read(node)
            return
        with ThreadPoolExecutor(workers) as executor:
            try:
                for _ in executor.map(lambda node: self._read(node).size, nodes):
                    pass
            finally:
                executor.shutdown(cancel_futures=True)

    def _check_datasets(self) -> None:
        hash_shape = (*self.shape[:-1], layout.block_count(self.wavenumber.size), layout.HEX_DIGITS)
        structure.check_stored_as(self.path, self._values, layout.CROSS_SECTION, self.shape, ("<f4", "<f8"))
        structure.check_stored_as(self.path, self._hashes, layout.HASHES, hash_shape, ("S1",))

    def _read(self, node: tuple[int, ...]) -> NDArray[Any]:
        """The stored values of a node, (n_nu,), each block proved when it is read for the first time."""
        self._require_open()
        values = np.empty(self.wavenumber.size, dtype=self.dtype)
        with structure.reading(self.path, f"{layout.HASHES} of node {node}"):
            hashes = self._hashes[node]
        for number, block in enumerate(self._blocks):
            with structure.reading(self.path, lambda block=block: self._block_name(node, block)):  # type: ignore[misc]
                values[block] = self._block(node, block)
            if not self._proved[(*node, number)]:
                self._prove(node, block, values[block], hashes[number].tobytes())
                self._proved[(*node, number)] = True
        return values

    def _block(self, node: tuple[int, ...], block: slice) -> NDArray[Any]:
        """The values of a block; unpacked here where it is packed as this program does, outside of HDF5's one lock."""
        if not self._packed_here:
            return np.asarray(self._values[(*node, block)])
        skipped, data = self._values.id.read_direct_chunk((*node, block.start))
        if skipped:  # filters that this chunk was not sent through
            return np.asarray(self._values[(*node, block)])
        return unpack_block(data, block.stop - block.start, self.dtype)

    def _prove(self, node: tuple[int, ...], block: slice, values: NDArray[Any], digest: bytes) -> None:
        if layout.sha256_of(values).encode("ascii") != digest:
            raise structure.damaged(self.path, f"{self._block_name(node, block)} does not match its sha256")
        if not _all_possible(values):
            raise structure.damaged(self.path, f"{self._block_name(node, block)} holds NaN or a negative value")

    def _block_name(self, node: tuple[int, ...], block: slice) -> str:
        indices = ", ".join(str(i) for i in node)
        first, last = self.wavenumber[block.start], self.wavenumber[block.stop - 1]
        return (
            f"block cross_section[{indices}, {block.start}:{block.stop}] "
            f"({self._node_name(node)}, {first:.10g} to {last:.10g} cm-1)"
        )


def _all_possible(values: NDArray[Any]) -> bool:
    """Whether all values are finite, 0 or above; the words of such rise with them, those of others lie above."""
    words = values.view(np.dtype(f"u{values.itemsize}"))
    infinite = np.array(np.inf, values.dtype).view(words.dtype)
    return bool(words.max() < infinite) or bool(np.all(np.isfinite(values) & (values >= 0.0)))
