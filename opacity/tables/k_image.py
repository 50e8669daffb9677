"""A k-coefficient table in HDF5: the same table gives the same bytes."""

from __future__ import annotations

from typing import Any

import numpy as np

from opacity.tables import image, k_layout, layout
from opacity.tables.blocks import pack_block
from opacity.tables.k_model import KTable, NodeValues


def write_values(file: Any, table: KTable, types: dict[str, np.dtype[Any]]) -> dict[str, Any]:
    """Write all of `table` but its texts into an open HDF5 file; the datasets of the values by name.

    `types` gives the type, f4 or f8, of k_coefficient, and of any fine_cells.
    """
    _describe(file, table)
    _write_arrays(file, table)
    image.add_dimension(file, "hex_digit", layout.HEX_DIGITS)
    return {name: _write_values(file, table, name, dtype) for name, dtype in types.items()}


def _describe(file: Any, table: KTable) -> None:
    name, version = k_layout.FORMAT_NAME, k_layout.FORMAT_VERSION
    attributes = image.global_attributes(table.frame, k_layout.GLOBAL_ATTRIBUTES, name, version)
    image.set_attributes(file, {**attributes, "quadrature": table.quadrature})


def _write_arrays(file: Any, table: KTable) -> None:
    if table.profile:
        image.add_dimension(file, "node", table.temperature.size)
    image.add_dimension(file, "edge", k_layout.EDGES)
    per_band = table.g_weight.ndim == 2
    for name in ("temperature", "pressure"):
        _write_array(file, table, name, (layout.axis_dimension(name, table.profile),))
    if table.cell_bounds is not None:
        image.add_dimension(file, "cell", len(table.cell_bounds))
    for name in k_layout.DIMENSIONS:
        if getattr(table, name) is not None:
            _write_array(file, table, name, k_layout.dimensions_of(name, table.profile, per_band))


def _write_array(file: Any, table: KTable, name: str, dimensions: tuple[str, ...]) -> None:
    attributes = dict(k_layout.ATTRIBUTES[name])
    if name in k_layout.UNITS:
        attributes["units"] = k_layout.UNITS[name]
    if name == "g" and table.g_weight.ndim == 1:  # bounds of each band's own are none of this axis
        attributes["bounds"] = "g_bounds"
    if name == "g_bounds" and table.g_weight.ndim == 2:
        attributes |= k_layout.BAND_G_BOUNDS
    if table.profile and k_layout.NODE in k_layout.DIMENSIONS.get(name, ()):
        attributes["coordinates"] = "temperature pressure"
    image.write_array(
        file, name, getattr(table, name), attributes, dimensions, k_layout.HASH_ATTRIBUTE.get(name, "sha256")
    )


def _write_values(file: Any, table: KTable, name: str, dtype: np.dtype[Any]) -> Any:
    """The values of every node, a chunk each, and their sha256 as characters, (..., 64)."""
    values: NodeValues = getattr(table, name)
    own = ("band", "g" if name == k_layout.K_COEFFICIENT else "cell")
    attributes = {**k_layout.ATTRIBUTES[name], "units": k_layout.UNITS[name]}
    shape = values.shape[-2:]
    dataset = image.create_values(file, name, table.frame, (shape, shape, dtype), attributes, own)
    hashes = np.empty((*table.nodes, layout.HEX_DIGITS), dtype="S1")
    for node in np.ndindex(table.nodes):
        # Adding 0 turns a negative zero into the plain one.
        stored = np.add(values[node], 0.0).astype(dtype).ravel()
        dataset.id.write_direct_chunk((*node, 0, 0), pack_block(stored, stored.size))
        hashes[node] = image.characters(layout.sha256_of(stored))
    written = file.create_dataset(k_layout.hashes_of(name), data=hashes, track_order=True)
    image.set_attributes(written, k_layout.hash_attributes(name))
    image.attach(file, written, (*layout.node_dimensions(table.profile), "hex_digit"))
    return dataset
