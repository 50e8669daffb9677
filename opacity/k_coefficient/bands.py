"""Bands of the wavenumber axis, and the share that each point of a grid has in them.

A grid point stands for its cell, which reaches half-way to its neighbours (at the ends of the grid to the point
itself).  A band counts each cell as far as it lies inside, so that its edges may fall anywhere between points.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.arguments import as_numbers
from opacity.errors import InputError, problem
from opacity.grids import FloatArray, as_axis, log_wavenumbers, uniform_wavenumbers
from opacity.recipe.model import Recipe

_ROUNDING = 1e-9
"""Relative distance within which a band's edge is the grid's own end."""


def as_band_edges(edges: object) -> FloatArray:
    """Edges of adjoining bands, rising, as f8 (n_band + 1,), cm-1.  Raises InputError for anything else."""
    axis = as_numbers("band_edges", edges, "numbers in cm-1")
    if axis.ndim != 1 or axis.size < 2:
        found = f"shape {axis.shape}"
        raise InputError(problem("band_edges", "no band", expected="two or more numbers in cm-1", found=found))
    as_axis("band_edges", "cm-1", axis[1:] if axis[0] == 0.0 else axis)
    return np.ascontiguousarray(axis)


def edges_of_resolving_power(start: float, stop: float, resolving_power: float) -> FloatArray:
    """Edges from `start` to `stop` (cm-1), both included, of bands even in log, (n_band + 1,).

    The bands are the widest that fill the range a whole number of times with nu / width at least `resolving_power`.
    Raises InputError for an impossible range.
    """
    return as_band_edges(log_wavenumbers(start, stop, resolving_power))


def edges_of_width(start: float, stop: float, width: float) -> FloatArray:
    """Edges from `start` to `stop`, both included, of bands of one width, (n_band + 1,), all cm-1.

    Raises InputError unless the range is a whole number of widths.
    """
    return as_band_edges(uniform_wavenumbers(start, stop, width))


def edges_of_wavelengths(wavelength: Sequence[float] | NDArray[Any]) -> FloatArray:
    """Edges in cm-1, rising, (n_band + 1,), of bands whose edges are wavelengths in vacuum, micrometres.

    The wavelengths rise or fall.  Raises InputError for anything else.
    """
    axis = as_numbers("wavelength", wavelength, "numbers in micrometres")
    falls = axis.ndim == 1 and axis.size > 1 and axis[0] > axis[-1]
    axis = as_axis("wavelength", "micrometres", axis[::-1] if falls else axis)
    return as_band_edges(1e4 / axis[::-1])


def band_edges(recipe: Recipe) -> FloatArray:
    """Edges of a recipe's bands, rising, (n_band + 1,), cm-1."""
    assert recipe.k_coefficient is not None
    bands, nu = recipe.k_coefficient.bands, recipe.grid.wavenumber
    first, last = float(nu[0]), float(nu[-1])
    if bands.kind == "resolving_power":
        return edges_of_resolving_power(first, last, bands.values[0])
    if bands.kind == "width":
        return edges_of_width(first, last, bands.values[0])
    return edges_of_wavelengths(bands.values) if bands.kind == "wavelength" else np.array(bands.values)


@dataclass(frozen=True)
class BandPoints:
    """Which points of a grid have a share in each band.

    `borders` (n_nu + 1,) of the points' cells and `edges` (n_band + 1,), cm-1; band b has the points from
    `first[b]` to one before `last[b]`.
    """

    borders: FloatArray
    edges: FloatArray
    first: NDArray[np.int64]
    last: NDArray[np.int64]

    def weights(self, band: int) -> FloatArray:
        """Width (cm-1) of each point's cell inside a band, (last - first,): their sum is the band's width."""
        borders = self.borders[self.first[band] : self.last[band] + 1]
        return np.diff(np.clip(borders, self.edges[band], self.edges[band + 1]))


def band_points(wavenumber: FloatArray, edges: FloatArray) -> BandPoints:
    """The points of a rising grid (n_nu,) that each band has, edges (n_band + 1,), all cm-1.

    Raises InputError where the bands reach beyond the grid.
    """
    margin = _ROUNDING * float(wavenumber[-1])
    if wavenumber.size < 2 or edges[0] < wavenumber[0] - margin or edges[-1] > wavenumber[-1] + margin:
        expected = f"edges from {wavenumber[0]:.10g} to {wavenumber[-1]:.10g} cm-1, the ends of the grid"
        found = f"{edges[0]:.10g} to {edges[-1]:.10g}"
        raise InputError(problem("band_edges", "beyond the spectrum", expected=expected, found=found))
    middles = 0.5 * (wavenumber[:-1] + wavenumber[1:])
    borders = np.concatenate([wavenumber[:1], middles, wavenumber[-1:]])
    inside = np.clip(edges, borders[0], borders[-1])
    first = np.searchsorted(borders, inside[:-1], side="right") - 1
    last = np.searchsorted(borders, inside[1:], side="left")
    return BandPoints(borders, inside, first.astype(np.int64), last.astype(np.int64))
