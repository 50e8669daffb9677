"""Writing a cross-section table: what it may hold, and the way to its final name."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

from opacity.errors import InputError, OpacityError, ResourceError, TableError, one_line, problem
from opacity.grids import FloatArray, as_axis, as_wavenumbers
from opacity.tables import layout
from opacity.tables.atomic import write_atomically
from opacity.tables.image import as_json, node_indices, table_image
from opacity.tables.model import CrossSectionTable, TableFrame
from opacity.tables.opened import OpenedTable
from opacity.tables.read import open_table

_LONGEST_LABEL = 1000
"""Characters in a title: attributes beyond 64 kB are stored in a way that older readers do not know."""


def write_cross_section_table(path: Path, table: CrossSectionTable) -> Path:
    """Write `table` to `path` (HDF5) and return the path.

    The file is built in memory, written beside `path`, read back from the disk, compared block by
    block and only then given its name.  The same table gives the same bytes.  Raises TableError for
    a table that may not be stored (NaN, infinity or a negative value anywhere, axes that do not fit),
    ResourceError where memory or the file system refuses; nothing is left behind then.
    """
    path = Path(path)
    dtype = check_table(path, table)
    return write_image(path, lambda: table_image(table, dtype), verify_written)


def write_image(path: Path, make: Callable[[], bytes], verify: Callable[[Path, Path], None]) -> Path:
    """Write what `make` puts together in memory, once `verify(path, temporary name)` has read it back."""
    try:
        image = make()
    except (MemoryError, OSError, RuntimeError) as error:
        message = f"the table cannot be put together in memory ({one_line(error) or 'no more of it'})"
        raise ResourceError(problem(path, message, remedy="use fewer nodes or points")) from error
    return write_atomically(path, image, lambda written: verify(path, written))


def check_table(path: Path, table: CrossSectionTable) -> np.dtype[Any]:
    """The type, f4 or f8, in which `table` is to be stored; TableError where it may not be."""
    check_frame(path, table.frame)
    if table.cross_section.shape != table.frame.shape:
        expected, found = table.frame.shape, table.cross_section.shape
        raise TableError(problem(path, "cross_section does not fit its axes", expected=expected, found=found))
    check_text(path, lambda: as_json(table.checks))
    smallest, largest = _extremes(path, table)
    return layout.stored_type(smallest, largest)


def check_frame(path: Path, frame: TableFrame) -> None:
    """Raise TableError where a table's axes, names or texts may not be stored."""
    for name in ("title", "formula"):
        check_label(path, name, getattr(frame, name))
    _check_axes(path, frame)
    if "\0" in frame.recipe:
        raise TableError(problem(path, "the recipe holds a NUL character"))
    for text in (lambda: frame.recipe, lambda: as_json(frame.provenance)):
        check_text(path, text)


def verify_written(
    path: Path, written: Path, opened: Callable[[Path], OpenedTable] = open_table, workers: int = 1
) -> None:
    """Read a table under its temporary name back from the disk.  Raises ResourceError where it does not read back."""
    try:
        with opened(written) as table:
            table.verify(workers)
    except OpacityError as error:
        raise ResourceError(problem(path, f"what was written does not read back ({error})")) from error


def check_label(path: Path, name: str, text: str) -> None:
    """Raise TableError for a title or the like that is not one line."""
    if not text.strip() or not text.isprintable() or len(text) > _LONGEST_LABEL:
        expected = f"one line of 1 to {_LONGEST_LABEL} characters"
        raise TableError(problem(path, f"unusable {name}", expected=expected, found=repr(text[:80])))


def _check_axes(path: Path, table: TableFrame) -> None:
    try:
        as_wavenumbers(table.wavenumber)
        for name in ("temperature", "pressure"):
            _check_node_axis(name, getattr(table, name), table.profile)
    except InputError as error:
        raise TableError(f"{path}: {error}") from error
    sizes = table.temperature.size, table.pressure.size
    if table.profile and sizes[0] != sizes[1]:
        raise TableError(
            problem(path, "a profile needs one pressure a temperature", found=f"{sizes[0]} and {sizes[1]}")
        )


def _check_node_axis(name: str, values: FloatArray, profile: bool) -> None:
    """A grid's axis rises; along a profile the order is free, and each value must stand by itself."""
    unit = layout.UNITS[name]
    if not profile:
        as_axis(name, unit, values)
        return
    if values.ndim != 1 or values.size == 0:
        raise InputError(problem(name, "not a list of nodes", expected="one or more numbers", found=values.shape))
    for value in values:
        as_axis(name, unit, value)


def check_text(path: Path, text: Callable[[], str]) -> None:
    """Raise TableError where a text cannot be made or stored."""
    try:
        text().encode("utf-8")
    except (TypeError, ValueError, RecursionError) as error:
        raise TableError(problem(path, f"a text that cannot be stored ({one_line(error)})")) from error


def _extremes(path: Path, table: CrossSectionTable) -> tuple[float, float]:
    """The smallest value that is not 0 and the largest; TableError at the first that may not be stored."""
    smallest, largest = math.inf, 0.0
    for node in node_indices(table):
        spectrum = table.cross_section[node]
        bad = np.flatnonzero(~(np.isfinite(spectrum) & (spectrum >= 0.0)))
        if bad.size:
            raise TableError(_impossible(path, table, node, int(bad[0])))
        positive = spectrum[spectrum > 0.0]
        if positive.size:
            smallest, largest = min(smallest, float(positive.min())), max(largest, float(positive.max()))
    return smallest, largest


def _impossible(path: Path, table: CrossSectionTable, node: tuple[int, ...], point: int) -> str:
    place = f"cross_section at {table.temperature[node[0]]:g} K, {table.pressure[node[-1]]:g} bar"
    return problem(
        path,
        f"impossible {place}, {table.wavenumber[point]:.10g} cm-1",
        expected="a finite number, 0 or above",
        found=f"{table.cross_section[(*node, point)]:g}",
    )
