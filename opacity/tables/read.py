"""Reading a table: what it says of itself, its spectra, and cross-sections between its nodes."""

from __future__ import annotations

import operator
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import InputError, TableError, problem
from opacity.grids import FloatArray
from opacity.tables import interpolate, layout, structure


def open_table(path: str | Path) -> Table:
    """Open a cross-section table for reading; use it in a `with` statement or close it.

    Raises TableError where the file is missing, damaged, not a table, or of a version too new.
    """
    path = Path(path)
    file = structure.open_file(path)
    try:
        return Table(path, file)
    except BaseException:
        file.close()
        raise


class Table:
    """A cross-section table on disk; spectra are read when asked for, and each block is proved by its sha256.

    Attributes: `path`; `title`; `formula`; `recipe` (TOML); `provenance` and `checks` (dict);
    `format_version`; `profile` (whether the nodes are those of a profile); `temperature` (K),
    (n_T,) or (n_node,); `pressure` (bar), (n_P,) or (n_node,); `wavenumber` (cm-1), (n_nu,);
    `dtype`, in which the cross-section is stored; `shape`, (n_T, n_P, n_nu) or (n_node, n_nu).
    """

    def __init__(self, path: Path, file: Any) -> None:
        self.path = path
        self._file = file
        self.format_version: int = structure.check_format(path, file)
        self.title: str = structure.attribute(path, file, "title")
        self.formula: str = structure.attribute(path, file, "formula")
        self.profile: bool = structure.is_profile(path, file)
        self.temperature = structure.read_axis(path, file, "temperature", rising=not self.profile)
        self.pressure = structure.read_axis(path, file, "pressure", rising=not self.profile)
        self.wavenumber = structure.read_axis(path, file, "wavenumber", rising=True)
        self.recipe = structure.read_text(path, file, "recipe")
        self.provenance = structure.read_json(path, file, "provenance")
        self.checks = structure.read_json(path, file, "checks")
        self.shape = self._expected_shape()
        self._values = structure.dataset(path, file, layout.CROSS_SECTION)
        self._hashes = structure.dataset(path, file, layout.HASHES)
        self._check_datasets()
        self.dtype: np.dtype[Any] = self._values.dtype
        self._blocks = layout.block_slices(self.wavenumber.size)
        self._proved = np.zeros((*self.shape[:-1], len(self._blocks)), dtype=bool)

    def __repr__(self) -> str:
        nodes = " x ".join(str(size) for size in self.shape[:-1])
        nu = self.wavenumber
        return f"<Table {self.path}: {self.formula}, {nodes} nodes, {nu.size} points {nu[0]:.6g} to {nu[-1]:.6g} cm-1>"

    def __enter__(self) -> Table:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; what was read stays, further spectra can't be."""
        self._file.close()

    def at(self, temperature: float, pressure: float, clamp: bool = False, method: str = "cubic") -> FloatArray:
        """Cross-section (cm2/molecule) at a temperature (K) and pressure (bar), (n_nu,).

        ln(sigma) is interpolated over 4 nodes ("cubic") or 2 ("linear") in ln T and ln P; a value where
        some of them are 0 is linear in ln T and ln P itself.  At a node the stored values are returned.
        Outside the grid TableError is raised unless `clamp` is true, which takes the nearest end.
        A table along a profile has values at its own nodes only, TableError elsewhere.  InputError for
        arguments that can't be right.
        """
        if self.profile:
            return self._at_node(temperature, pressure)
        try:
            nodes = interpolate.grid_nodes(
                self.temperature, self.pressure, temperature, pressure, clamp=clamp, method=method
            )
        except TableError as error:
            raise TableError(f"{self.path}: {error}") from error
        return interpolate.from_nodes(nodes, self.wavenumber.size, lambda i, j: self._read((i, j)))

    def spectrum(self, *node: int) -> FloatArray:
        """Stored cross-section (cm2/molecule) of one node, (n_nu,).

        The node is given by its indices on the temperature and pressure axes, or along a profile by
        its one index.  InputError for an index that the table does not have.
        """
        sizes = self.shape[:-1]
        try:
            index = tuple(operator.index(i) for i in node)
        except TypeError:
            index = ()
        if len(index) != len(sizes) or not all(0 <= i < size for i, size in zip(index, sizes, strict=True)):
            expected = "indices from 0 to below " + ", ".join(str(size) for size in sizes)
            raise InputError(problem(self.path, "no such node", expected=expected, found=node))
        return self._read(index).astype(np.float64)

    def verify(self) -> None:
        """Read everything; TableError names the first block that is not as it was written."""
        self._proved[...] = False
        for node in np.ndindex(self.shape[:-1]):
            self._read(node)

    def _expected_shape(self) -> tuple[int, ...]:
        sizes = self.temperature.size, self.pressure.size
        if self.profile and sizes[0] != sizes[1]:
            raise structure.damaged(self.path, "profile", expected="one pressure a temperature", found=sizes)
        return (*layout.spectra_shape(*sizes, self.profile), self.wavenumber.size)

    def _check_datasets(self) -> None:
        hash_shape = (*self.shape[:-1], layout.block_count(self.wavenumber.size), layout.HEX_DIGITS)
        structure.check_stored_as(self.path, self._values, layout.CROSS_SECTION, self.shape, ("<f4", "<f8"))
        structure.check_stored_as(self.path, self._hashes, layout.HASHES, hash_shape, ("S1",))

    def _at_node(self, temperature: float, pressure: float) -> FloatArray:
        wanted_t = interpolate.positive_number("temperature", "K", temperature)
        wanted_p = interpolate.positive_number("pressure", "bar", pressure)
        for node, (node_t, node_p) in enumerate(zip(self.temperature, self.pressure, strict=True)):
            if interpolate.same_number(wanted_t, node_t) and interpolate.same_number(wanted_p, node_p):
                return self._read((node,)).astype(np.float64)
        raise TableError(
            problem(
                self.path,
                "a table along a profile has values at its own nodes only",
                expected=f"one of its {self.temperature.size} nodes",
                found=f"{wanted_t:.10g} K, {wanted_p:.10g} bar",
                remedy="choose from its temperature and pressure, or build a table on a grid",
            )
        )

    def _read(self, node: tuple[int, ...]) -> NDArray[Any]:
        """The stored values of a node, (n_nu,), each block proved when it is read for the first time."""
        if not self._file:
            raise TableError(problem(self.path, "the table is closed"))
        values = np.empty(self.wavenumber.size, dtype=self.dtype)
        with structure.reading(self.path, f"{layout.HASHES} of node {node}"):
            hashes = self._hashes[node]
        for number, block in enumerate(self._blocks):
            with structure.reading(self.path, self._block_name(node, block)):
                values[block] = self._values[(*node, block)]
            if not self._proved[(*node, number)]:
                self._prove(node, block, values[block], hashes[number].tobytes())
                self._proved[(*node, number)] = True
        return values

    def _prove(self, node: tuple[int, ...], block: slice, values: NDArray[Any], digest: bytes) -> None:
        if layout.sha256_of(values).encode("ascii") != digest:
            raise structure.damaged(self.path, f"{self._block_name(node, block)} does not match its sha256")
        if not bool(np.all(np.isfinite(values) & (values >= 0.0))):
            raise structure.damaged(self.path, f"{self._block_name(node, block)} holds NaN or a negative value")

    def _block_name(self, node: tuple[int, ...], block: slice) -> str:
        indices = ", ".join(str(i) for i in node)
        first, last = self.wavenumber[block.start], self.wavenumber[block.stop - 1]
        return (
            f"block cross_section[{indices}, {block.start}:{block.stop}] ({self.temperature[node[0]]:g} K, "
            f"{self.pressure[node[-1]]:g} bar, {first:.10g} to {last:.10g} cm-1)"
        )
