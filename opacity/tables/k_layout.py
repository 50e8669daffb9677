"""The stored form of a k-coefficient table: names, dimensions, units, attributes, format version.

On a grid:

=====================  ===================================  =======  =====================
dataset                dimensions                           type     units
=====================  ===================================  =======  =====================
temperature            temperature                          f8       K
pressure               pressure                             f8       bar
band                   band                                 f8       cm-1
band_bounds            band, edge                           f8       cm-1
g                      g                                    f8       1
g_bounds               g, edge                              f8       1
g_weight               g                                    f8       1
k_coefficient          temperature, pressure, band, g       f4, f8   cm2 molecule-1
k_coefficient_sha256   temperature, pressure, hex_digit     char
fine_cells *           temperature, pressure, band, cell    f4, f8   cm2 molecule-1
fine_cells_sha256 *    temperature, pressure, hex_digit     char
cell_bounds *          cell, edge                           f8       1
planck_mean *          temperature, pressure                f8       cm2 molecule-1
rosseland_mean *       temperature, pressure                f8       cm2 molecule-1
recipe                 recipe_length                        char     (UTF-8, TOML)
provenance, checks     provenance_length, checks_length     char     (UTF-8, JSON)
=====================  ===================================  =======  =====================

Those with a star may be missing; fine_cells and cell_bounds come together.  `edge` is 2 long, the lower edge first.
Where each band has a quadrature of its own g_bounds is (band, g, edge) and g_weight (band, g).  Along a profile `node`
stands in place of `temperature, pressure`, and temperature(node) and pressure(node) are auxiliary coordinates.

The values of one node are one HDF5 chunk, and one sha256 is that of their little-endian values in C order.  All
other arrays and the texts carry theirs as the attribute `sha256`, but band_bounds and g_bounds as `bounds_sha256`:
by the CF conventions bounds have no names and units of their own but share those of their axis.  The attribute
`quadrature` of the file names the way in which k stands for the intervals or points of g.
"""

from __future__ import annotations

from opacity.tables import layout

FORMAT_NAME = layout.FORMATS[1]
FORMAT_VERSION = 1
OLDEST_VERSION = 1

K_COEFFICIENT = "k_coefficient"
FINE_CELLS = "fine_cells"
EDGES = 2

NODE = "(node)"
"""Stands in `DIMENSIONS` for the dimensions over which nodes are numbered."""

DIMENSIONS: dict[str, tuple[str, ...]] = {
    "band": ("band",),
    "band_bounds": ("band", "edge"),
    "g": ("g",),
    "g_bounds": ("g", "edge"),
    "g_weight": ("g",),
    "cell_bounds": ("cell", "edge"),
    "planck_mean": (NODE,),
    "rosseland_mean": (NODE,),
}
"""Dimensions of the arrays of f8 beside temperature and pressure; g_bounds and g_weight may have "band" before."""

UNITS = {
    "temperature": "K",
    "pressure": "bar",
    "band": "cm-1",
    "g": "1",
    "g_weight": "1",
    K_COEFFICIENT: "cm2 molecule-1",
    FINE_CELLS: "cm2 molecule-1",
    "cell_bounds": "1",
    "planck_mean": "cm2 molecule-1",
    "rosseland_mean": "cm2 molecule-1",
}

HASH_ATTRIBUTE = {"band_bounds": "bounds_sha256", "g_bounds": "bounds_sha256"}
"""The attribute with an array's own sha256 where it is not `sha256`."""

ATTRIBUTES: dict[str, dict[str, str]] = {
    "temperature": layout.ATTRIBUTES["temperature"],
    "pressure": layout.ATTRIBUTES["pressure"],
    "band": {"long_name": "wavenumber in vacuum at the middle of the band", "bounds": "band_bounds"},
    "band_bounds": {},
    "g": {"long_name": "share of the band in which the cross-section is smaller"},
    "g_bounds": {},
    "g_weight": {"long_name": "weight of a g point, sum 1"},
    K_COEFFICIENT: {"long_name": "k-coefficient: absorption cross-section per molecule at a g point of a band"},
    FINE_CELLS: {"long_name": "mean absorption cross-section per molecule over a fine cell of g"},
    "cell_bounds": {"long_name": "bounds of the fine cells of g"},
    "planck_mean": {
        "long_name": "Planck mean of the cross-section at the temperature of the node",
        "comment": "over the wavenumbers of the spectra alone",
    },
    "rosseland_mean": {
        "long_name": "Rosseland mean of the cross-section at the temperature of the node",
        "comment": "over the wavenumbers of the spectra alone",
    },
}

BAND_G_BOUNDS = {"long_name": "bounds of the interval of g that a point of a band stands for", "units": "1"}
"""Attributes of g_bounds where each band has its own; they are then no bounds of the axis g."""

GLOBAL_ATTRIBUTES = {
    **layout.GLOBAL_ATTRIBUTES,
    "comment": "The mean transmission of a band is the sum of g_weight exp(-k_coefficient column). 0 means exactly 0. "
    "Interpolate ln(k_coefficient) in ln(temperature) and ln(pressure).",
}


def hashes_of(name: str) -> str:
    """The dataset with the sha256 of each node's values of `name`."""
    return f"{name}_sha256"


def hash_attributes(name: str) -> dict[str, str]:
    """Attributes of that dataset."""
    return {
        "long_name": f"sha256 of {name} of each node",
        "comment": "of the little-endian values in the order in which they are stored",
    }


def dimensions_of(name: str, profile: bool, per_band: bool) -> tuple[str, ...]:
    """The dimensions of an array of `DIMENSIONS`; `per_band` where each band has its own quadrature."""
    before = ("band",) if per_band and name in ("g_bounds", "g_weight") else ()
    own = [layout.node_dimensions(profile) if one == NODE else (one,) for one in DIMENSIONS[name]]
    return (*before, *(one for group in own for one in group))
