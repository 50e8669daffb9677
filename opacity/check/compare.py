"""Two spectra of cross-sections held against each other, node by node and band by band."""

from __future__ import annotations

import heapq
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import Protocol

import numpy as np

from opacity.check.comparison import NodeComparison, Place, ratio_of
from opacity.check.matching import CommonNodes, CommonPoints, Nodes, common_nodes, common_points
from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import BandPoints, as_band_edges, band_points

TEN_BANDS = 10
MOST_BANDS = 10_000
MOST_PLACES = 5


class Spectrum(Nodes, Protocol):
    """A table of cross-sections, or one spectrum in columns."""

    @property
    def wavenumber(self) -> FloatArray:
        """Wavenumbers (n_nu,), cm-1, rising."""

    def at(self, temperature: float, pressure: float) -> FloatArray:
        """The cross-section (cm2/molecule) at a temperature (K) and pressure (bar), (n_nu,)."""


@dataclass(frozen=True)
class SpectrumPair:
    """Two spectra with what they have in common: nodes, points and bands."""

    a: Spectrum
    b: Spectrum
    common: CommonNodes
    points: CommonPoints
    bands: BandPoints
    notes: tuple[str, ...]

    def values(self, node: tuple[float, float]) -> tuple[FloatArray, FloatArray]:
        """Both cross-sections at the common points of a node, (n,) each."""
        return self.points.pair(self.a.at(*node), self.b.at(*node))

    def compare(self) -> tuple[tuple[NodeComparison, ...], tuple[Place, ...]]:
        """All nodes, and the worst places, one a wavenumber and few a band, largest difference first."""
        nodes: list[NodeComparison] = []
        places: list[Place] = []
        for node in self.common.nodes:
            a, b = self.values(node)
            nodes.append(self._node(node, a, b))
            # At the same wavenumber the worst node speaks for all.
            found = sorted([*places, *self._places(node, a, b)], key=_size)
            places = heapq.nlargest(MOST_PLACES, {one.wavenumber: one for one in found}.values(), key=_size)
        return tuple(nodes), tuple(places)

    def _node(self, node: tuple[float, float], a: FloatArray, b: FloatArray) -> NodeComparison:
        integrals = [(float(weights @ a[part]), float(weights @ b[part])) for part, weights in self.parts]
        both = (a > 0.0) & (b > 0.0)
        difference = a[both] / b[both] - 1.0
        sizes = np.abs(difference)
        return NodeComparison(
            *node,
            a=tuple(one for one, _ in integrals),
            b=tuple(other for _, other in integrals),
            ratio=tuple(ratio_of(*one) for one in integrals),
            largest=float(difference[np.argmax(sizes)]) if sizes.size else None,
            median=float(np.median(sizes)) if sizes.size else None,
            only_a=int(np.count_nonzero((a > 0.0) & (b == 0.0))),
            only_b=int(np.count_nonzero((b > 0.0) & (a == 0.0))),
        )

    def _places(self, node: tuple[float, float], a: FloatArray, b: FloatArray) -> Iterable[Place]:
        with np.errstate(divide="ignore", invalid="ignore"):
            difference = np.where((a > 0.0) & (b > 0.0), a / b - 1.0, 0.0)
        # The worst point of all may lie in none of the bands.
        for part in (slice(0, a.size), *(part for part, _ in self.parts)):
            worst = part.start + int(np.argmax(np.abs(difference[part])))
            if difference[worst] != 0.0:
                values = self.points.wavenumber, a, b, difference
                nu, one, other, size = (float(column[worst]) for column in values)
                yield Place(nu, *node, one, other, size)

    @cached_property
    def parts(self) -> tuple[tuple[slice, FloatArray], ...]:
        """The common points that have a share in each band, and the widths (cm-1) of these shares."""
        first, last = self.bands.first.tolist(), self.bands.last.tolist()
        return tuple(
            (slice(*ends), self.bands.weights(band)) for band, ends in enumerate(zip(first, last, strict=True))
        )


def _size(place: Place) -> float:
    return abs(place.difference)


def spectrum_pair(a: Spectrum, b: Spectrum, bands: float | tuple[float, ...] | None) -> SpectrumPair:
    """What two spectra have in common.  `bands` is a width, rising edges (cm-1), or None for ten of one width.

    Raises TableError where they have no node, no point or no band in common, InputError for impossible bands.
    """
    common = common_nodes(a, b)
    points = common_points(f"{a.path}, {b.path}", a.wavenumber, b.wavenumber)
    edges, left_out = band_edges(points.wavenumber, bands)
    notes = (f"{left_out} bands reach beyond the common range: left out",) if left_out else ()
    return SpectrumPair(a, b, common, points, band_points(points.wavenumber, edges), notes)


def band_edges(wavenumber: FloatArray, bands: float | tuple[float, ...] | None) -> tuple[FloatArray, int]:
    """Edges (n_band + 1,) of bands within a rising axis, and how many of those asked for reach beyond it.

    Bands of one width start at the first point; the last one is narrower where the range is no whole number of them.
    """
    lower, upper = float(wavenumber[0]), float(wavenumber[-1])
    if bands is None:
        return np.linspace(lower, upper, TEN_BANDS + 1), 0
    if isinstance(bands, tuple):
        edges = as_band_edges(bands)
        inside = edges[(edges >= lower * (1.0 - 1e-9)) & (edges <= upper * (1.0 + 1e-9))]
        if inside.size < 2:
            expected, found = (
                f"two edges or more from {lower:.10g} to {upper:.10g} cm-1",
                f"{edges[0]:g} to {edges[-1]:g}",
            )
            raise InputError(problem("bands", "none within the common range", expected=expected, found=found))
        return inside, edges.size - inside.size
    count = (upper - lower) / bands
    if not count <= MOST_BANDS:
        raise InputError(problem("bands", "too many", expected=f"at most {MOST_BANDS}", found=f"{count:.3g}"))
    whole = np.arange(int(count * (1.0 + 1e-9)) + 1)
    edges = np.asarray(lower + bands * whole, dtype=np.float64)
    if upper - edges[-1] > 1e-6 * bands:
        return np.append(edges, upper), 0
    edges[-1] = upper
    return edges, 0
