"""Reading a k-coefficient table: what it says of itself, its values, and k between its nodes."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import TableError, problem
from opacity.grids import FloatArray
from opacity.tables import interpolate, k_layout, layout, structure
from opacity.tables.k_model import Fault, fault_of_bands, fault_of_cells, fault_of_quadrature, first_impossible
from opacity.tables.opened import OpenedTable, opened


def open_k_table(path: str | Path) -> KCoefficientTable:
    """Open a k-coefficient table for reading; use it in a `with` statement or close it.

    Raises TableError where the file is missing, damaged, not such a table, or of a version too new.
    """
    return opened(path, KCoefficientTable)


class KCoefficientTable(OpenedTable):
    """A k-coefficient table on disk; a node's values are read when asked for, and proved by their sha256.

    Attributes: `path`; `title`; `formula`; `quadrature`; `recipe` (TOML); `provenance` and `checks` (dict);
    `format_version`; `profile` (whether the nodes are those of a profile); `temperature` (K), (n_T,) or (n_node,);
    `pressure` (bar), (n_P,) or (n_node,); `band` (n_band,) and `band_bounds` (n_band, 2), cm-1; `g` (n_g,);
    `g_bounds` (n_g, 2) and `g_weight` (n_g,), or (n_band, n_g, 2) and (n_band, n_g) where each band has its own;
    `dtype`, in which k is stored; `shape`, (n_T, n_P, n_band, n_g) or (n_node, n_band, n_g); and, None where the
    table has none, `cell_bounds` (n_cell, 2), `planck_mean` and `rosseland_mean` (n_T, n_P) or (n_node,), cm2/molecule.
    """

    def __init__(self, path: Path, file: Any) -> None:
        versions = k_layout.OLDEST_VERSION, k_layout.FORMAT_VERSION
        super().__init__(path, file, k_layout.FORMAT_NAME, versions)
        self.quadrature: str = structure.attribute(path, file, "quadrature")
        self.band_bounds = self._array("band_bounds", 2)
        self.band = structure.read_axis(path, file, "band", rising=True, known=k_layout.UNITS)
        self.g = self._array("g", 1)
        with structure.reading(path, "dataset g_weight"):
            per_band = structure.dataset(path, file, "g_weight", k_layout.UNITS).ndim == 2
        self.g_bounds = self._array("g_bounds", 2 + per_band)
        self.g_weight = self._array("g_weight", 1 + per_band)
        self._check_axes()
        self.shape = (*self._sizes, self.band.size, self.g.size)
        self.planck_mean = self._mean("planck_mean")
        self.rosseland_mean = self._mean("rosseland_mean")
        self.cell_bounds = self._array("cell_bounds", 2) if self._has("cell_bounds", k_layout.FINE_CELLS) else None
        self._k = _Values(self, file, k_layout.K_COEFFICIENT, self.shape[-2:])
        self.dtype: np.dtype[Any] = self._k.dtype
        self._cells: _Values | None = None
        if self.cell_bounds is not None:
            self._refuse(fault_of_cells(self.cell_bounds))
            self._cells = _Values(self, file, k_layout.FINE_CELLS, (self.band.size, len(self.cell_bounds)))

    def __repr__(self) -> str:
        nodes = " x ".join(str(size) for size in self._sizes)
        ends = f"{self.band_bounds[0, 0]:.6g} to {self.band_bounds[-1, 1]:.6g} cm-1"
        points = f"{self.band.size} bands {ends}, {self.g.size} g points"
        return f"<KCoefficientTable {self.path}: {self.formula}, {nodes} nodes, {points}>"

    def k(self, *node: int) -> FloatArray:
        """Stored k-coefficients (cm2/molecule) of one node, (n_band, n_g), rising with g.

        The node is given by its indices on the temperature and pressure axes, or along a profile by its one index.
        InputError for an index that the table does not have, TableError where the values are damaged.
        """
        return self._k.read(self._index(node)).astype(np.float64)

    def cells(self, *node: int) -> FloatArray:
        """Stored means over the fine cells of g (cm2/molecule) of one node, (n_band, n_cell); otherwise as `k`.

        TableError where the table was stored without.
        """
        index = self._index(node)
        if self._cells is None:
            raise TableError(problem(self.path, "holds no fine cells", remedy="build the table with them"))
        return self._cells.read(index).astype(np.float64)

    def at(self, temperature: float, pressure: float, clamp: bool = False, method: str = "cubic") -> FloatArray:
        """k-coefficients (cm2/molecule) at a temperature (K) and pressure (bar), (n_band, n_g), rising with g.

        ln(k) of each band and point is interpolated as cross-sections are (`Table.at`, with the same `clamp`,
        `method` and errors); where the polynomial would let k fall with g, it stays at the value before.
        """
        if self.profile:
            return self._k.read(self._profile_node(temperature, pressure)).astype(np.float64)
        nodes = self._grid_nodes(temperature, pressure, clamp, method)
        points = self.band.size * self.g.size
        k = interpolate.from_nodes(nodes, points, lambda i, j: self._k.read((i, j)).ravel())
        return np.maximum.accumulate(k.reshape(self.shape[-2:]), axis=-1)

    def verify(self, workers: int = 1) -> None:
        """Read everything; TableError names the first node whose values are not as they were written."""
        for values in (self._k, self._cells):
            if values is not None:
                values.verify()

    def _has(self, *names: str) -> bool:
        """Whether the file has these datasets; TableError where it has only some of them."""
        with structure.reading(self.path, f"dataset {names[0]}"):
            there = [name in self._file.keys() for name in names]  # noqa: SIM118 - as in structure.dataset
        if any(there) and not all(there):
            raise structure.damaged(self.path, f"dataset {names[there.index(False)]} is missing")
        return all(there)

    def _array(self, name: str, dimensions: int) -> FloatArray:
        hash_name = k_layout.HASH_ATTRIBUTE.get(name, "sha256")
        return structure.read_array(self.path, self._file, name, dimensions, k_layout.UNITS, hash_name)

    def _mean(self, name: str) -> FloatArray | None:
        if not self._has(name):
            return None
        values = self._array(name, len(self._sizes))
        if values.shape != self._sizes:
            raise structure.damaged(self.path, f"shape of {name}", expected=self._sizes, found=values.shape)
        return values

    def _check_axes(self) -> None:
        self._refuse(fault_of_bands(self.band_bounds))
        if self.band.shape != self.band_bounds.shape[:1]:
            raise structure.damaged(
                self.path, "shape of band", expected=self.band_bounds.shape[:1], found=self.band.shape
            )
        if np.any((self.band < self.band_bounds[:, 0]) | (self.band > self.band_bounds[:, 1])):
            raise structure.damaged(self.path, "dataset band", expected="middles of the bands", found="others")
        self._refuse(fault_of_quadrature(self.band.size, self.g, self.g_bounds, self.g_weight))

    def _refuse(self, fault: Fault | None) -> None:
        if fault is not None:
            raise structure.damaged(self.path, fault.what, expected=fault.expected, found=fault.found)


class _Values:
    """A dataset with values for each node, which are proved by their sha256 when they are read for the first time."""

    def __init__(self, table: KCoefficientTable, file: Any, name: str, own: tuple[int, ...]) -> None:
        self._name = name
        self._path = table.path
        self._require_open: Callable[[], None] = table._require_open
        self._place: Callable[[tuple[int, ...]], str] = table._node_name
        self._stored = structure.dataset(table.path, file, name, k_layout.UNITS)
        hashes = k_layout.hashes_of(name)
        self._hashes = structure.dataset(table.path, file, hashes)
        nodes = table._sizes
        structure.check_stored_as(table.path, self._stored, name, (*nodes, *own), ("<f4", "<f8"))
        structure.check_stored_as(table.path, self._hashes, hashes, (*nodes, layout.HEX_DIGITS), ("S1",))
        self.dtype: np.dtype[Any] = self._stored.dtype
        self._proved = np.zeros(nodes, dtype=bool)

    def read(self, node: tuple[int, ...]) -> NDArray[Any]:
        """The stored values of a node, (n_band, n)."""
        self._require_open()
        what = f"{self._name}[{', '.join(str(i) for i in node)}] ({self._place(node)})"
        with structure.reading(self._path, what):
            values: NDArray[Any] = self._stored[node]
            digest = self._hashes[node].tobytes()
        if not self._proved[node]:
            if layout.sha256_of(values).encode("ascii") != digest:
                raise structure.damaged(self._path, f"{what} does not match its sha256")
            if first_impossible(values, rising=self._name == k_layout.K_COEFFICIENT) is not None:
                raise structure.damaged(self._path, f"{what} holds NaN, a negative value or one out of order")
            self._proved[node] = True
        return values

    def verify(self, workers: int = 1) -> None:
        """Read all nodes from the disk, also those proved before."""
        self._proved[...] = False
        for node in np.ndindex(self._proved.shape):
            self.read(node)
