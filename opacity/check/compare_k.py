"""Tables of k-coefficients held against each other or against cross-sections: means of bands, and transmissions."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from opacity.check.comparison import NodeComparison, TransmissionPlace, ratio_of
from opacity.check.matching import CommonNodes, common_nodes
from opacity.errors import TableError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import band_points
from opacity.k_coefficient.transmission import columns_of, means_over_g, transmission
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.read import Table

COLUMNS = 8
"""Columns a band and node at which transmissions are compared, from a transmission of A of 0.98 to one of 1e-3."""
_SAME_EDGE = 1e-9


@dataclass(frozen=True)
class KPair:
    """Two tables of k-coefficients, or one and a table of cross-sections; `rows` are A's or the k-table's bands."""

    a: KCoefficientTable | Table
    b: KCoefficientTable | Table
    common: CommonNodes
    bounds: FloatArray
    rows: tuple[int, ...]
    notes: tuple[str, ...]

    def values(self, node: tuple[float, float]) -> tuple[FloatArray, FloatArray]:
        """The means of all bands of both at a node, cm2/molecule, (n_band,) each."""
        return self._means(self.a, node), self._means(self.b, node)

    def _means(self, table: KCoefficientTable | Table, node: tuple[float, float]) -> FloatArray:
        values = table.at(*node)
        if isinstance(table, KCoefficientTable):
            return means_over_g(values, table.g_weight)[list(self.rows)]
        return np.array([_band_mean(table.wavenumber, values, one) for one in self.bounds])

    def compare(self) -> tuple[tuple[NodeComparison, ...], TransmissionPlace | None]:
        """All nodes, and where the transmissions differ most."""
        nodes, worst = [], None
        for node in self.common.nodes:
            a, b = self.values(node)
            place = self._transmission(node)
            if place is not None and (worst is None or abs(place.a - place.b) > abs(worst.a - worst.b)):
                worst = place
            nodes.append(
                NodeComparison(
                    *node,
                    a=tuple(a.tolist()),
                    b=tuple(b.tolist()),
                    ratio=tuple(ratio_of(*one) for one in zip(a.tolist(), b.tolist(), strict=True)),
                    transmission=None if place is None else abs(place.a - place.b),
                )
            )
        return tuple(nodes), worst

    def _transmission(self, node: tuple[float, float]) -> TransmissionPlace | None:
        """Where the transmissions of two tables of k-coefficients differ most at a node."""
        if not (isinstance(self.a, KCoefficientTable) and isinstance(self.b, KCoefficientTable)):
            return None
        mine, theirs = self.a.at(*node), self.b.at(*node)
        columns = columns_of(mine, np.full(len(mine), node[1]), self.a.g_weight, COLUMNS)
        one = transmission(mine, self.a.g_weight, columns)
        other = transmission(theirs, self.b.g_weight, columns)
        band, column = np.unravel_index(int(np.argmax(np.abs(one - other))), one.shape)
        edges = [float(edge) for edge in self.bounds[band]]
        found = (float(values[band, column]) for values in (columns, one, other))
        return TransmissionPlace(edges[0], edges[1], *node, *found)


def _band_mean(wavenumber: FloatArray, sigma: FloatArray, bounds: FloatArray) -> float:
    points = band_points(wavenumber, bounds)
    weights = points.weights(0)
    return float(weights @ sigma[int(points.first[0]) : int(points.last[0])] / weights.sum())


def k_pair(a: KCoefficientTable | Table, b: KCoefficientTable | Table) -> KPair:
    """What a table of k-coefficients has in common with another one, of the same bands, or with cross-sections.

    Raises TableError where they have no node or no band in common.
    """
    common = common_nodes(a, b)
    if isinstance(a, KCoefficientTable):
        if isinstance(b, KCoefficientTable):
            _require_same_bands(a, b)
            return KPair(a, b, common, a.band_bounds, tuple(range(a.band.size)), ())
        rows, notes = _bands_within(a, b)
        return KPair(a, b, common, a.band_bounds[list(rows)], rows, notes)
    if isinstance(b, KCoefficientTable):
        rows, notes = _bands_within(b, a)
        return KPair(a, b, common, b.band_bounds[list(rows)], rows, notes)
    raise TableError(problem(f"{a.path}, {b.path}", "neither is a table of k-coefficients"))


def _bands_within(table: KCoefficientTable, spectra: Table) -> tuple[tuple[int, ...], tuple[str, ...]]:
    """The bands that lie within the spectra, and a note on those that do not."""
    bounds, nu = table.band_bounds, spectra.wavenumber
    margin = _SAME_EDGE * float(nu[-1])
    inside = np.flatnonzero((bounds[:, 0] >= nu[0] - margin) & (bounds[:, 1] <= nu[-1] + margin))
    if not inside.size or nu.size < 2:
        found = f"bands {_reach(bounds)}, spectra {nu[0]:.10g} to {nu[-1]:.10g} cm-1"
        raise TableError(problem(f"{table.path}, {spectra.path}", "no band lies within the spectra", found=found))
    beyond = len(bounds) - inside.size
    notes = (f"{beyond} of {len(bounds)} bands reach beyond the spectra: left out",) if beyond else ()
    return tuple(inside.tolist()), notes


def _require_same_bands(a: KCoefficientTable, b: KCoefficientTable) -> None:
    if a.band_bounds.shape == b.band_bounds.shape and np.allclose(
        a.band_bounds, b.band_bounds, rtol=_SAME_EDGE, atol=0
    ):
        return
    found = "; ".join(f"{len(one.band_bounds)} bands, {_reach(one.band_bounds)}" for one in (a, b))
    raise TableError(problem(f"{a.path}, {b.path}", "their bands differ", expected="the same bands", found=found))


def _reach(bounds: FloatArray) -> str:
    return f"{bounds[0, 0]:.10g} to {bounds[-1, 1]:.10g} cm-1"
