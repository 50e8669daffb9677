"""What every kind of table on disk has in common: its texts, its nodes, and that it is closed at the end."""

from __future__ import annotations

import operator
from abc import ABC, abstractmethod
from collections.abc import Callable
from pathlib import Path
from types import TracebackType
from typing import Any, Self, TypeVar

from opacity.errors import InputError, TableError, problem
from opacity.tables import interpolate, layout, structure


class OpenedTable(ABC):
    """A table on disk, open for reading; its kinds are `read.Table` and `k_read.KCoefficientTable`.

    Attributes: `path`; `title`; `formula`; `recipe` (TOML); `provenance` and `checks` (dict);
    `format_version`; `profile` (whether the nodes are those of a profile); `temperature` (K),
    (n_T,) or (n_node,); `pressure` (bar), (n_P,) or (n_node,).
    """

    def __init__(self, path: Path, file: Any, name: str, versions: tuple[int, int]) -> None:
        self.path = path
        self._file = file
        self.format_version: int = structure.check_format(path, file, name, versions)
        self.title: str = structure.attribute(path, file, "title")
        self.formula: str = structure.attribute(path, file, "formula")
        self.profile: bool = structure.is_profile(path, file)
        self.temperature = structure.read_axis(path, file, "temperature", rising=not self.profile)
        self.pressure = structure.read_axis(path, file, "pressure", rising=not self.profile)
        self.recipe = structure.read_text(path, file, "recipe")
        self.provenance = structure.read_json(path, file, "provenance")
        self.checks = structure.read_json(path, file, "checks")
        self._sizes = self._node_sizes()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file; what was read stays, the values of further nodes can't be."""
        self._file.close()

    @abstractmethod
    def verify(self, workers: int = 1) -> None:
        """Read everything, in so many threads at most; TableError names a part that is not as it was written."""

    def _node_sizes(self) -> tuple[int, ...]:
        sizes = self.temperature.size, self.pressure.size
        if self.profile and sizes[0] != sizes[1]:
            raise structure.damaged(self.path, "profile", expected="one pressure a temperature", found=sizes)
        return layout.spectra_shape(*sizes, self.profile)

    def _index(self, node: tuple[Any, ...]) -> tuple[int, ...]:
        """The indices of a node; InputError for one that the table does not have."""
        try:
            index = tuple(operator.index(i) for i in node)
        except TypeError:
            index = ()
        sizes = self._sizes
        if len(index) != len(sizes) or not all(0 <= i < size for i, size in zip(index, sizes, strict=True)):
            expected = "indices from 0 to below " + ", ".join(str(size) for size in sizes)
            raise InputError(problem(self.path, "no such node", expected=expected, found=node))
        return index

    def _profile_node(self, temperature: float, pressure: float) -> tuple[int]:
        """The node of a profile at a temperature (K) and pressure (bar); TableError where there is none."""
        wanted_t = interpolate.positive_number("temperature", "K", temperature)
        wanted_p = interpolate.positive_number("pressure", "bar", pressure)
        for node, (node_t, node_p) in enumerate(zip(self.temperature, self.pressure, strict=True)):
            if interpolate.same_number(wanted_t, node_t) and interpolate.same_number(wanted_p, node_p):
                return (node,)
        raise TableError(
            problem(
                self.path,
                "a table along a profile has values at its own nodes only",
                expected=f"one of its {self.temperature.size} nodes",
                found=f"{wanted_t:.10g} K, {wanted_p:.10g} bar",
                remedy="choose from its temperature and pressure, or build a table on a grid",
            )
        )

    def _grid_nodes(self, temperature: float, pressure: float, clamp: bool, method: str) -> list[interpolate.Node]:
        """The nodes of a grid from which a temperature (K) and pressure (bar) is made."""
        axes = self.temperature, self.pressure
        try:
            return interpolate.grid_nodes(*axes, temperature, pressure, clamp=clamp, method=method)
        except TableError as error:
            raise TableError(f"{self.path}: {error}") from error

    def _require_open(self) -> None:
        if not self._file:
            raise TableError(problem(self.path, "the table is closed"))

    def _node_name(self, node: tuple[int, ...]) -> str:
        return f"{self.temperature[node[0]]:g} K, {self.pressure[node[-1]]:g} bar"


_Kind = TypeVar("_Kind", bound=OpenedTable)


def opened(path: str | Path, kind: Callable[[Path, Any], _Kind]) -> _Kind:
    """The table at `path`, as `kind` makes it of the path and the open file, which is closed if that fails."""
    path = Path(path)
    file = structure.open_file(path)
    try:
        return kind(path, file)
    except BaseException:
        file.close()
        raise
