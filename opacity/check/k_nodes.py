"""k-coefficients against their fine cells at every node of a table."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import Executor
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from opacity.check.k_samples import KValues
from opacity.check.result import AGREES, CheckResult, judge
from opacity.check.spectra import Node
from opacity.grids import FloatArray
from opacity.k_coefficient.certificate import BandError, BandErrors, NodeErrors, errors_at_node
from opacity.k_coefficient.collapse import CELL_WIDTHS
from opacity.k_coefficient.quadrature import INTERVALS, GPoints, g_points, k_from_cells, points_of_bounds
from opacity.k_coefficient.transmission import BLACK, COLUMN_A_BAR, N_COLUMNS, THINNEST, means_over_g

ROUNDING = 4e-7
"""k, and the cells that it is made of, are stored as f4."""
_AT_ONCE = 8


def points_of(table: KValues) -> GPoints:
    """The quadrature of a table."""
    if table.quadrature not in INTERVALS:
        return g_points(table.g_weight.shape[-1], table.quadrature)
    bounds = table.g_bounds
    return points_of_bounds(np.concatenate([bounds[..., 0], bounds[..., -1:, 1]], axis=-1), table.quadrature)


@dataclass(frozen=True)
class AtNodes:
    """What was found at all nodes: errors of all `bands`; `off`, by how much k differs from what follows from the
    cells (relative), and `where`; the `integrals` of the nodes (n_node,), cm/molecule.
    """

    bands: tuple[BandError, ...]
    off: float
    where: Node
    integrals: FloatArray


def at_all_nodes(table: KValues, nodes: list[Node], progress: Callable[[], None], executor: Executor | None) -> AtNodes:
    """Every node against its cells; with an executor of threads some of them side by side."""
    points, widths = points_of(table), np.diff(table.band_bounds)[:, 0]
    errors, off, where, integrals = BandErrors(widths.size), -1.0, nodes[0], []

    def one(values: tuple[Node, FloatArray, FloatArray]) -> tuple[NodeErrors, float, float]:
        (_, _, pressure), k, cells = values
        expected = k_from_cells(cells, points)
        difference = np.abs(k - expected) / np.maximum(expected, 1e-300)
        found = errors_at_node(k, table.g_weight, cells, pressure)
        return found, float(np.max(difference)), float(np.sum(means_over_g(cells, CELL_WIDTHS) * widths))

    # HDF5 reads under a lock, so that values are read here, some nodes at a time.
    for first in range(0, len(nodes), _AT_ONCE):
        some = nodes[first : first + _AT_ONCE]
        values = [(node, table.k(*node[0]), table.cells(*node[0])) for node in some]
        results = map(one, values) if executor is None else executor.map(one, values)
        for number, (node, (found, differs, integral)) in enumerate(zip(some, results, strict=True), start=first):
            errors.add(number, found)
            integrals.append(integral)
            if differs > off:
                off, where = differs, node
            progress()
    return AtNodes(errors.found(), off, where, np.array(integrals))


def place_of(node: Node) -> str:
    """A node in words."""
    return f"{node[1]:g} K, {node[2]:.3g} bar"


def follows(found: AtNodes, closed: bool) -> CheckResult:
    """Whether the stored k are those of the cells and, where the quadrature is `closed`, so are the bands' means."""
    mean = max(abs(one.mean) for one in found.bands)
    means = f"; means of bands within {mean:.1e} of the cells'" if closed else f"; means of bands off by {mean:.1e}"
    value = max(found.off, mean if closed else 0.0)
    detail = f"k follows from the fine cells within {found.off:.1e}, worst at {place_of(found.where)}{means}"
    return judge("k", value, ROUNDING, detail)


def within(bands: tuple[BandError, ...], nodes: list[Node], table: KValues, target: float | None) -> CheckResult:
    """The largest error of transmission, held against what was promised, if anything was."""
    worst = max(range(len(bands)), key=lambda band: abs(bands[band].largest))
    one, (lower, upper) = bands[worst], table.band_bounds[worst]
    detail = (
        f"every band within {abs(one.largest):.1e} of the cells' at all {len(nodes)} nodes, worst {lower:.8g} to"
        f" {upper:.8g} cm-1 at {place_of(nodes[one.node])}"
    )
    if target is None:
        return CheckResult("transmission", AGREES, detail, one.largest)
    return judge("transmission", one.largest, target, f"{detail}; promised {target:g}")


def certificate_of(bands: Sequence[BandError]) -> dict[str, Any]:
    """Errors of all bands, and the columns at which they were found, as plain values for JSON."""
    return {
        "bands": [asdict(one) for one in bands],
        "columns": N_COLUMNS,
        "thinnest": THINNEST,
        "black": BLACK,
        "column_a_bar": COLUMN_A_BAR,
    }
