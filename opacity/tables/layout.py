"""The stored form of a cross-section table: names, dimensions, units, attributes, format version.

On a grid:

=====================  ===================================  =======  =====================
dataset                dimensions                           type     units
=====================  ===================================  =======  =====================
temperature            temperature                          f8       K
pressure               pressure                             f8       bar
wavenumber             wavenumber                           f8       cm-1
cross_section          temperature, pressure, wavenumber    f4, f8   cm2 molecule-1
cross_section_sha256   temperature, pressure, block,        char
                       hex_digit
recipe                 recipe_length                        char     (UTF-8, TOML)
provenance, checks     provenance_length, checks_length     char     (UTF-8, JSON)
=====================  ===================================  =======  =====================

Along a profile `node` stands in place of `temperature, pressure`, and temperature(node) and
pressure(node) are auxiliary coordinates.  A block is `BLOCK` wavenumbers of one spectrum, the last
one shorter; its sha256 is that of its little-endian values.  Axes and texts carry theirs as the
attribute `sha256`.  All that is text in attributes is of fixed length, which C and Fortran can read.
"""

from __future__ import annotations

import hashlib
from typing import Any

import numpy as np
from numpy.typing import NDArray

FORMAT_NAME = "opacity cross-section table"
FORMAT_VERSION = 1
OLDEST_VERSION = 1

FORMATS = (FORMAT_NAME, "opacity k-coefficient table")
"""Every kind of table; what the second holds is in `k_layout`."""

LIBVER = ("v108", "v110")
"""Bounds of the HDF5 format: newer structures than those of 1.10 fail in readers still in use."""

BLOCK = 16384
"""Wavenumbers in a stored block, which is also the HDF5 chunk of one spectrum."""

GZIP_LEVEL = 4
HEX_DIGITS = 64

F4_SMALLEST = 1e-37
F4_LARGEST = float(np.finfo(np.float32).max)
"""Values are stored as f4 when all that are not 0 lie between these, where f4 keeps its full precision."""

AXES = ("temperature", "pressure", "wavenumber")
CROSS_SECTION = "cross_section"
HASHES = "cross_section_sha256"

UNITS = {"temperature": "K", "pressure": "bar", "wavenumber": "cm-1", CROSS_SECTION: "cm2 molecule-1"}

ATTRIBUTES: dict[str, dict[str, str]] = {
    "temperature": {
        "standard_name": "air_temperature",
        "long_name": "temperature",
        "units_metadata": "temperature: on_scale",
    },
    "pressure": {"standard_name": "air_pressure", "long_name": "total pressure"},
    "wavenumber": {"long_name": "wavenumber in vacuum"},
    CROSS_SECTION: {"long_name": "absorption cross-section per molecule"},
    HASHES: {
        "long_name": "sha256 of each block of cross_section",
        "comment": f"of the little-endian values of {BLOCK} wavenumbers, the last block of a spectrum being shorter",
    },
    "recipe": {"long_name": "recipe from which the table was built", "comment": "TOML"},
    "provenance": {"long_name": "inputs and versions from which the table was built", "comment": "JSON"},
    "checks": {"long_name": "results of the checks made of the table", "comment": "JSON"},
}

GLOBAL_ATTRIBUTES = {
    "Conventions": "CF-1.11",
    "history": "written once by the program named as source; never changed since",
    "comment": "Values are samples at the wavenumbers given, not means. 0 means exactly 0. "
    "Interpolate ln(cross_section) in ln(temperature) and ln(pressure).",
}


def node_dimensions(profile: bool) -> tuple[str, ...]:
    """The dimensions over which the spectra of a table are numbered."""
    return ("node",) if profile else ("temperature", "pressure")


def axis_dimension(axis: str, profile: bool) -> str:
    """The dimension of the dataset `axis`."""
    return "node" if profile and axis != "wavenumber" else axis


def spectra_shape(temperatures: int, pressures: int, profile: bool) -> tuple[int, ...]:
    """How many spectra a table of these axes holds, along its node dimensions."""
    return (temperatures,) if profile else (temperatures, pressures)


def stored_type(smallest: float, largest: float) -> np.dtype[Any]:
    """The type of values from the smallest that is not 0 to the largest: f4 where it keeps its full precision."""
    return np.dtype("<f4" if smallest > F4_SMALLEST and largest < F4_LARGEST else "<f8")


def block_count(points: int) -> int:
    """Blocks in a spectrum of `points` wavenumbers."""
    return -(-points // BLOCK)


def block_slices(points: int) -> list[slice]:
    """The wavenumber indices of each block of a spectrum."""
    return [slice(first, min(first + BLOCK, points)) for first in range(0, points, BLOCK)]


def sha256_of(values: NDArray[Any]) -> str:
    """Hexadecimal sha256 of an array's little-endian bytes in C order."""
    little = np.ascontiguousarray(values, dtype=values.dtype.newbyteorder("<"))
    return hashlib.sha256(little.reshape(-1).view(np.uint8).data).hexdigest()
