"""What checks need of a table, whether it lies on disk or is still in memory."""

from __future__ import annotations

from typing import Protocol

import numpy as np

from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.tables import interpolate


class Nodes(Protocol):
    """The nodes of a table: K, bar."""

    @property
    def temperature(self) -> FloatArray:
        """Temperatures (n_T,), or those of the nodes (n_node,) along a profile."""

    @property
    def pressure(self) -> FloatArray:
        """Pressures (n_P,), or those of the nodes (n_node,) along a profile."""

    @property
    def profile(self) -> bool:
        """Whether the nodes are those of a profile."""


class Spectra(Nodes, Protocol):
    """Axes and spectra of a table: K, bar, cm-1, cm2/molecule."""

    @property
    def wavenumber(self) -> FloatArray:
        """Wavenumbers (n_nu,)."""

    def spectrum(self, *node: int) -> FloatArray:
        """The spectrum of one node, (n_nu,)."""


Node = tuple[tuple[int, ...], float, float]


def nodes_of(spectra: Nodes) -> list[Node]:
    """All nodes as (indices, temperature, pressure), temperature slowest."""
    pairs = (spectra.temperature, spectra.pressure)
    if spectra.profile:
        return [((i,), float(t), float(p)) for i, (t, p) in enumerate(zip(*pairs, strict=True))]
    return [((i, j), float(t), float(p)) for i, t in enumerate(pairs[0]) for j, p in enumerate(pairs[1])]


def interpolated(spectra: Spectra, temperature: float, pressure: float) -> FloatArray:
    """The cross-section between nodes as a reader of the table gets it, (n_nu,).  Not for profiles."""
    if spectra.profile:
        raise InputError(problem("table", "a table along a profile is not interpolated"))
    nodes = interpolate.grid_nodes(
        spectra.temperature, spectra.pressure, temperature, pressure, clamp=False, method="cubic"
    )
    return interpolate.from_nodes(nodes, spectra.wavenumber.size, spectra.spectrum)


def is_uniform(wavenumber: FloatArray) -> bool:
    """Whether the points are evenly spaced in wavenumber, to a part in 10^6 of the step."""
    if wavenumber.size < 2:
        return False
    step = (wavenumber[-1] - wavenumber[0]) / (wavenumber.size - 1)
    # Beyond rounding of the points themselves.
    slack = 1e-6 * step + 4.0 * np.spacing(wavenumber[-1])
    return bool(np.all(np.abs(np.diff(wavenumber) - step) <= slack))
