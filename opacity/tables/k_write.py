"""Writing a k-coefficient table: what it may hold, and the way to its final name."""

from __future__ import annotations

import contextlib
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from opacity.errors import ResourceError, TableError, problem
from opacity.grids import FloatArray
from opacity.tables import image, k_layout, layout, write
from opacity.tables.atomic import CarefulFile, renamed_when_done
from opacity.tables.image import as_json
from opacity.tables.k_image import write_values
from opacity.tables.k_model import (
    Fault,
    KTable,
    NodeValues,
    fault_of_bands,
    fault_of_cells,
    fault_of_quadrature,
    first_impossible,
)
from opacity.tables.k_read import open_k_table


def write_k_table(
    path: Path, table: KTable, check: Callable[[KInProgress], dict[str, Any]] | None = None
) -> dict[str, Any]:
    """Write `table` to `path` (HDF5), one node at a time in memory; the checks that were stored.

    `check` makes the checks of the values as they are stored, which are those of `table` without it.  The file is
    written beside `path`, synced, read back from the disk, compared node by node and only then given its name.  The
    same table gives the same bytes.  Raises TableError for a table that may not be stored (`check_k_table`),
    ResourceError where memory or the file system refuses; nothing is left behind then.
    """
    path = Path(path)
    types = check_k_table(path, table)
    with renamed_when_done(path) as temporary, contextlib.closing(CarefulFile(temporary)) as file:
        try:
            with h5py.File(file, "w", driver="fileobj", libver=layout.LIBVER, track_order=True) as hdf5:
                values = write_values(hdf5, table, types)
                file.raise_failure()
                checks = table.checks if check is None else check(KInProgress(table, values))
                write.check_text(path, lambda: as_json(checks))
                image.write_texts(hdf5, table.frame, checks)
            file.finish()
        except MemoryError as error:
            raise ResourceError(problem(path, "not enough memory to put the table together")) from error
        except (RuntimeError, ValueError, OSError):
            # What HDF5 makes of a failure of the disk says less than the failure itself.
            file.raise_failure()
            raise
        write.verify_written(path, temporary, open_k_table)
    return checks


class KInProgress:
    """A k-coefficient table whose values are all written, before its checks are; read as it is stored."""

    def __init__(self, table: KTable, values: dict[str, Any]) -> None:
        self._table, self._values = table, values
        self.temperature, self.pressure, self.profile = table.temperature, table.pressure, table.profile
        self.band_bounds, self.quadrature = table.band_bounds, table.quadrature
        self.g_bounds, self.g_weight = table.g_bounds, table.g_weight

    def k(self, *node: int) -> FloatArray:
        """k-coefficients of a node (cm2/molecule), (n_band, n_g)."""
        return np.asarray(self._values[k_layout.K_COEFFICIENT][node], dtype=np.float64)

    def cells(self, *node: int) -> FloatArray:
        """Means over the fine cells of a node (cm2/molecule), (n_band, n_cell)."""
        return np.asarray(self._values[k_layout.FINE_CELLS][node], dtype=np.float64)


def check_k_table(path: Path, table: KTable) -> dict[str, np.dtype[Any]]:
    """The type, f4 or f8, in which k_coefficient, and fine_cells where there are some, are to be stored.

    Raises TableError unless all values are finite and 0 or above, k rises with g, the weights sum to 1 and fit their
    bounds, the bands rise without overlap, and axes, shapes and texts can be stored.
    """
    _refuse(path, fault_of_bands(table.band_bounds))
    write.check_frame(path, table.frame)
    write.check_label(path, "quadrature", table.quadrature)
    write.check_text(path, lambda: as_json(table.checks))
    bands = len(table.band_bounds)
    _refuse(path, fault_of_quadrature(bands, table.g, table.g_bounds, table.g_weight))
    _check_shape(path, k_layout.K_COEFFICIENT, table.k_coefficient, (*table.nodes, bands, table.g.size))
    for name in ("planck_mean", "rosseland_mean"):
        _check_mean(path, table, name)
    types = {k_layout.K_COEFFICIENT: _stored_type(path, table, k_layout.K_COEFFICIENT, table.k_coefficient)}
    if (table.fine_cells is None) != (table.cell_bounds is None):
        raise TableError(problem(path, "fine_cells and cell_bounds", expected="both or none", found="one"))
    if table.fine_cells is not None and table.cell_bounds is not None:
        _refuse(path, fault_of_cells(table.cell_bounds))
        _check_shape(path, k_layout.FINE_CELLS, table.fine_cells, (*table.nodes, bands, len(table.cell_bounds)))
        types[k_layout.FINE_CELLS] = _stored_type(path, table, k_layout.FINE_CELLS, table.fine_cells)
    return types


def _refuse(path: Path, fault: Fault | None) -> None:
    if fault is not None:
        raise TableError(problem(path, f"impossible {fault.what}", expected=fault.expected, found=fault.found))


def _check_shape(path: Path, name: str, values: NodeValues, expected: tuple[int, ...]) -> None:
    if values.shape != expected:
        raise TableError(problem(path, f"{name} does not fit its axes", expected=expected, found=values.shape))


def _check_mean(path: Path, table: KTable, name: str) -> None:
    values: NDArray[Any] | None = getattr(table, name)
    if values is None:
        return
    _check_shape(path, name, values, table.nodes)
    bad = np.argwhere(~(np.isfinite(values) & (values >= 0.0)))
    if bad.size:
        node = tuple(int(i) for i in bad[0])
        raise TableError(_impossible(path, f"{name} at {_place(table, node)}", values[node]))


def _stored_type(path: Path, table: KTable, name: str, values: NodeValues) -> np.dtype[Any]:
    """The type that fits all values; TableError at the first that may not be stored."""
    smallest, largest = math.inf, 0.0
    for node in np.ndindex(table.nodes):
        one = values[node]
        bad = first_impossible(one, rising=name == k_layout.K_COEFFICIENT)
        if bad is not None:
            raise TableError(_misplaced(path, table, name, node, bad))
        positive = one[one > 0.0]
        if positive.size:
            smallest, largest = min(smallest, float(positive.min())), max(largest, float(positive.max()))
    return layout.stored_type(smallest, largest)


def _misplaced(path: Path, table: KTable, name: str, node: tuple[int, ...], bad: tuple[int, int]) -> str:
    band, point = bad
    row = getattr(table, name)[node][band]
    place = f"{name} at {_place(table, node)}, {table.band[band]:.10g} cm-1, point {point}"
    if np.isfinite(row[point]) and row[point] >= 0.0:
        return problem(path, f"{place} falls", expected=f"{row[point - 1]:g} or above", found=f"{row[point]:g}")
    return _impossible(path, place, row[point])


def _impossible(path: Path, place: str, value: float) -> str:
    return problem(path, f"impossible {place}", expected="a finite number, 0 or above", found=f"{value:g}")


def _place(table: KTable, node: tuple[int, ...]) -> str:
    return f"{table.temperature[node[0]]:g} K, {table.pressure[node[-1]]:g} bar"
