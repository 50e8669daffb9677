"""A table as the bytes of an HDF5 file, built in memory: the same table gives the same bytes."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator, Mapping
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.provenance import VERSION
from opacity.tables import layout
from opacity.tables.blocks import pack_rows_of
from opacity.tables.model import CrossSectionTable, TableFrame

_GROWTH = 1 << 22
_DIMENSION_ONLY = "This is a netCDF dimension but not a netCDF variable. {:9d}"
"""What netCDF-4 looks for at the start of the NAME of a scale without values (netCDF-4 format description)."""


def table_image(table: CrossSectionTable, dtype: np.dtype[Any]) -> bytes:
    """The HDF5 file of `table`, with the cross-section stored as `dtype` (f4 or f8)."""
    frame = table.frame

    def fill(file: Any) -> None:
        dataset = write_frame(file, frame, dtype)
        write_hashes(file, _fill(dataset, table, dtype), frame.profile)
        write_texts(file, frame, table.checks)

    return image_of(fill)


def image_of(fill: Callable[[Any], None]) -> bytes:
    """The bytes of an HDF5 file in memory that `fill` writes into."""
    with h5py.File(
        "image", "w", driver="core", backing_store=False, block_size=_GROWTH, libver=layout.LIBVER, track_order=True
    ) as file:
        fill(file)
        file.flush()
        return bytes(file.id.get_file_image())


def write_frame(file: Any, frame: TableFrame, dtype: np.dtype[Any]) -> Any:
    """Attributes and axes, and the dataset of the cross-section, still without values, which is returned."""
    set_attributes(file, global_attributes(frame))
    _write_axes(file, frame)
    return _create_cross_section(file, frame, dtype)


def write_hashes(file: Any, hashes: NDArray[np.bytes_], profile: bool) -> None:
    """The sha256 of every block as characters, (..., n_block, 64)."""
    add_dimension(file, "block", hashes.shape[-2])
    add_dimension(file, "hex_digit", layout.HEX_DIGITS)
    dataset = file.create_dataset(layout.HASHES, data=hashes, track_order=True)
    set_attributes(dataset, layout.ATTRIBUTES[layout.HASHES])
    attach(file, dataset, (*layout.node_dimensions(profile), "block", "hex_digit"))


def write_texts(file: Any, frame: TableFrame, checks: Mapping[str, Any]) -> None:
    """Recipe, provenance and checks."""
    texts = {"recipe": frame.recipe, "provenance": as_json(frame.provenance), "checks": as_json(checks)}
    for name, text in texts.items():
        _write_text(file, name, text)


def node_indices(table: CrossSectionTable) -> Iterator[tuple[int, ...]]:
    """The index of each spectrum of `table.cross_section`, in stored order."""
    return np.ndindex(table.cross_section.shape[:-1])


def as_json(value: Mapping[str, Any]) -> str:
    """JSON with sorted keys; ValueError for NaN and infinity, TypeError for what JSON cannot say."""
    return json.dumps(value, sort_keys=True, indent=1, ensure_ascii=False, allow_nan=False)


def global_attributes(
    table: TableFrame,
    general: Mapping[str, str] = layout.GLOBAL_ATTRIBUTES,
    name: str = layout.FORMAT_NAME,
    version: int = layout.FORMAT_VERSION,
) -> dict[str, Any]:
    """What a file says of itself: `general`, and what it is, in which format and version."""
    return {
        **general,
        "title": table.title,
        "source": f"opacity {VERSION}",
        "format": name,
        "format_version": np.int32(version),
        "formula": table.formula,
        "nodes": "profile" if table.profile else "grid",
    }


def set_attributes(target: Any, attributes: Mapping[str, Any]) -> None:
    """Attributes of a file or dataset, text at fixed length."""
    for name, value in attributes.items():
        target.attrs[name] = _fixed(value) if isinstance(value, str) else value


def _fixed(text: str) -> Any:
    """Text of fixed length, marked as ASCII where it is; readers in C and Fortran get no pointer."""
    if text.isascii():
        return np.bytes_(text.encode("ascii"))
    data = text.encode("utf-8")
    return np.array(data, dtype=h5py.string_dtype("utf-8", len(data)))


def _write_axes(file: Any, table: TableFrame) -> None:
    if table.profile:
        add_dimension(file, "node", table.temperature.size)
    for name in layout.AXES:
        attributes = {**layout.ATTRIBUTES[name], "units": layout.UNITS[name]}
        write_array(file, name, getattr(table, name), attributes, (layout.axis_dimension(name, table.profile),))


def write_array(
    file: Any,
    name: str,
    values: FloatArray,
    attributes: Mapping[str, Any],
    dimensions: tuple[str, ...],
    hash_attribute: str = "sha256",
) -> None:
    """An array as f8 with the sha256 of its values; an axis, of which `name` is the dimension, as a scale."""
    stored = np.add(values, 0.0, dtype="<f8")
    dataset = file.create_dataset(name, data=stored, track_order=True)
    set_attributes(dataset, {**attributes, hash_attribute: layout.sha256_of(stored)})
    if dimensions == (name,):
        dataset.make_scale(name)
    else:
        attach(file, dataset, dimensions)


def add_dimension(file: Any, name: str, size: int) -> None:
    """A dimension without values, as netCDF-4 writes it."""
    dataset = file.create_dataset(name, shape=(size,), dtype=">f4", track_order=True)
    dataset.make_scale(_DIMENSION_ONLY.format(size))


def attach(file: Any, dataset: Any, dimensions: tuple[str, ...]) -> None:
    """Name the dimensions of a dataset, whose scales are in the file already."""
    for position, name in enumerate(dimensions):
        dataset.dims[position].attach_scale(file[name])


def _create_cross_section(file: Any, table: TableFrame, dtype: np.dtype[Any]) -> Any:
    attributes = {**layout.ATTRIBUTES[layout.CROSS_SECTION], "units": layout.UNITS[layout.CROSS_SECTION]}
    block = (min(layout.BLOCK, table.shape[-1]),)
    return create_values(
        file, layout.CROSS_SECTION, table, (table.shape[-1:], block, dtype), attributes, ("wavenumber",)
    )


def create_values(
    file: Any,
    name: str,
    table: TableFrame,
    stored: tuple[tuple[int, ...], tuple[int, ...], np.dtype[Any]],
    attributes: Mapping[str, Any],
    dimensions: tuple[str, ...],
) -> Any:
    """A dataset for the values of each node, still without them, which is returned.

    `stored` is the shape of a node's values, that of a chunk of them, and their type; `dimensions` are the node's own.
    """
    shape, chunk, dtype = stored
    nodes = table.shape[:-1]
    dataset = file.create_dataset(
        name,
        shape=(*nodes, *shape),
        dtype=dtype,
        chunks=(*(1 for _ in nodes), *chunk),
        compression="gzip",
        compression_opts=layout.GZIP_LEVEL,
        shuffle=True,
        fillvalue=dtype.type(np.nan),
        track_order=True,
    )
    profile = {"coordinates": "temperature pressure"} if table.profile else {}
    set_attributes(dataset, {**attributes, **profile, "_FillValue": np.full(1, np.nan, dtype)})
    attach(file, dataset, (*layout.node_dimensions(table.profile), *dimensions))
    return dataset


def _fill(dataset: Any, table: CrossSectionTable, dtype: np.dtype[Any]) -> NDArray[np.bytes_]:
    """Store every spectrum and return the sha256 of its blocks as characters, (..., n_block, 64)."""
    points = table.wavenumber.size
    blocks = layout.block_slices(points)
    hashes = np.empty((*table.cross_section.shape[:-1], len(blocks), layout.HEX_DIGITS), dtype="S1")
    for node in node_indices(table):
        # Adding 0 turns a negative zero into the plain one.
        spectrum = np.add(table.cross_section[node], 0.0).astype(dtype)
        packed = pack_rows_of(spectrum.reshape(1, -1), dataset.chunks[-1])
        for number, block in enumerate(blocks):
            dataset.id.write_direct_chunk((*node, block.start), bytes(packed[number]))
            hashes[(*node, number)] = characters(layout.sha256_of(spectrum[block]))
    return hashes


def characters(text: str) -> NDArray[np.bytes_]:
    """Text as single bytes, (n,)."""
    return np.frombuffer(text.encode("utf-8"), dtype="S1")


def _write_text(file: Any, name: str, text: str) -> None:
    """Characters in a dataset, which has no limit of size, as attributes do (64 kB).

    An empty text is one NUL, because netCDF takes a dimension of size 0 for an unlimited one.
    """
    letters = characters(text or "\0")
    add_dimension(file, f"{name}_length", letters.size)
    dataset = file.create_dataset(name, data=letters, track_order=True)
    attributes = {**layout.ATTRIBUTES[name], "_Encoding": "utf-8", "sha256": layout.sha256_of(letters)}
    set_attributes(dataset, attributes)
    attach(file, dataset, (f"{name}_length",))
