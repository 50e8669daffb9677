"""All checks of a k-coefficient table, and its certificate, as a build stores them and as `check` repeats them."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor, ThreadPoolExecutor
from contextlib import nullcontext
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from opacity.check.closure import strength_between
from opacity.check.k_samples import BandSample, KValues, draw, sample_band
from opacity.check.result import AGREES, CANNOT_JUDGE, CheckResult, finite, judge
from opacity.check.run import CheckReport
from opacity.check.spectra import Node, nodes_of
from opacity.cross_sections.source import LineSource
from opacity.grids import FloatArray
from opacity.k_coefficient.certificate import BandError, BandErrors, NodeErrors, errors_at_node
from opacity.k_coefficient.collapse import CELL_WIDTHS
from opacity.k_coefficient.quadrature import INTERVALS, GPoints, g_points, k_from_cells, points_of_bounds
from opacity.k_coefficient.transmission import BLACK, COLUMN_A_BAR, N_COLUMNS, THINNEST
from opacity.recipe.model import Profile, Recipe

ROUNDING = 4e-7
"""k, and the cells that it is made of, are stored as f4."""
CELL_ERROR = 2e-4
"""The fine cells' own error of transmission, twice the largest seen, beside what the tolerance allows."""
COLUMN_SHARE = 0.37
"""A relative error of all cross-sections changes a transmission by at most this share of it: the top of x exp(-x)."""
SAMPLED = 1e-4
"""By how much a band's mean may be off by sampling lines at two points a half-width and at a band's ends."""


def run_k_checks(
    table: KValues,
    recipe: Recipe,
    source: LineSource,
    seed: int,
    chosen: dict[str, Any],
    progress: Callable[[], None] = lambda: None,
    workers: int = 1,
) -> CheckReport:
    """The certificate at every node, closure, and bands made again line by line at nodes and between them.

    `chosen` says how the points in g were chosen, and with "target" the error promised.  Threads do it side by side
    where `workers` is above 1; the results have the same bits for any number of them.
    """
    nodes, profile = nodes_of(table), recipe.profile
    with ThreadPoolExecutor(workers) if workers > 1 else nullcontext() as executor:
        found = _at_all_nodes(table, nodes, progress, executor)
        expected = _strengths(table, nodes, source, profile)
        drawn = draw(table, nodes, seed)
        samples = [sample_band(table, source, profile, drawn, band, seed, executor) for band in drawn.bands]
    looked_at = [one for one in samples if one is not None]
    rows = [
        _follows(found, table.quadrature in INTERVALS),
        _within(found.bands, nodes, table, chosen.get("target")),
        _closure(found.integrals, expected, nodes, profile.tolerance),
        *_sampled(looked_at, profile.tolerance),
    ]
    certificate = {
        **chosen,
        "bands": [asdict(one) for one in found.bands],
        "columns": N_COLUMNS,
        "thinnest": THINNEST,
        "black": BLACK,
        "column_a_bar": COLUMN_A_BAR,
        "seed": seed,
        "sampled": [asdict(one) for one in looked_at],
        "bands_too_wide_to_sample": len(samples) - len(looked_at),
        "pairs": [[list(drawn.nodes[i][1:]) for i in pair] for pair in drawn.pairs],
        "middles": [list(one) for one in drawn.middles],
    }
    figures = {
        "tolerance": profile.tolerance,
        "results": [row.as_dict() for row in rows],
        "certificate": certificate,
        "ledger": source.ledger.as_dict(),
        "assumptions": [{"what": one.what, "lines": one.lines} for one in source.assumptions],
    }
    return CheckReport(tuple(rows), finite(figures))


def points_of(table: KValues) -> GPoints:
    """The quadrature of a table."""
    if table.quadrature not in INTERVALS:
        return g_points(table.g_weight.shape[-1], table.quadrature)
    bounds = table.g_bounds
    return points_of_bounds(np.concatenate([bounds[..., 0], bounds[..., -1:, 1]], axis=-1), table.quadrature)


@dataclass(frozen=True)
class _Found:
    """Errors of all `bands`; `off` by how much k differs from what follows from the cells (relative), and where; the
    `integrals` of the nodes (n_node,), cm/molecule.
    """

    bands: tuple[BandError, ...]
    off: float
    where: Node
    integrals: FloatArray


def _at_all_nodes(table: KValues, nodes: list[Node], progress: Callable[[], None], executor: Executor | None) -> _Found:
    points, widths = points_of(table), np.diff(table.band_bounds)[:, 0]
    errors, off, where, integrals = BandErrors(widths.size), -1.0, nodes[0], []

    def one(values: tuple[Node, FloatArray, FloatArray]) -> tuple[NodeErrors, float, float]:
        (_, _, pressure), k, cells = values
        expected = k_from_cells(cells, points)
        difference = np.abs(k - expected) / np.maximum(expected, 1e-300)
        found = errors_at_node(k, table.g_weight, cells, pressure)
        return found, float(np.max(difference)), float(cells @ CELL_WIDTHS @ widths)

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
    return _Found(errors.found(), off, where, np.array(integrals))


_AT_ONCE = 8


def _strengths(table: KValues, nodes: list[Node], source: LineSource, profile: Profile) -> FloatArray:
    """What the lines of each node have inside cut-off and bands, (n_node,), cm/molecule."""
    between, sums = (float(table.band_bounds[0, 0]), float(table.band_bounds[-1, 1])), np.zeros(len(nodes))
    rows: dict[float, list[int]] = {}
    for row, (_, temperature, _) in enumerate(nodes):
        rows.setdefault(temperature, []).append(row)
    for lines in source.stretches():
        for temperature, here in rows.items():
            columns = lines.at_temperature(temperature)
            for row in here:
                sums[row] += strength_between(columns, nodes[row][2], between, profile)
    return sums


def _place(node: Node) -> str:
    return f"{node[1]:g} K, {node[2]:.3g} bar"


def _follows(found: _Found, closed: bool) -> CheckResult:
    mean = max(abs(one.mean) for one in found.bands)
    means = f"; means of bands within {mean:.1e} of the cells'" if closed else f"; means of bands off by {mean:.1e}"
    value = max(found.off, mean if closed else 0.0)
    detail = f"k follows from the fine cells within {found.off:.1e}, worst at {_place(found.where)}{means}"
    return judge("k", value, ROUNDING, detail)


def _within(bands: tuple[BandError, ...], nodes: list[Node], table: KValues, target: float | None) -> CheckResult:
    worst = max(range(len(bands)), key=lambda band: abs(bands[band].largest))
    one, (lower, upper) = bands[worst], table.band_bounds[worst]
    detail = (
        f"every band within {abs(one.largest):.1e} of the cells' at all {len(nodes)} nodes, worst {lower:.8g} to"
        f" {upper:.8g} cm-1 at {_place(nodes[one.node])}"
    )
    if target is None:
        return CheckResult("transmission", AGREES, detail, one.largest)
    return judge("transmission", one.largest, target, f"{detail}; promised {target:g}")


def _closure(integrals: FloatArray, expected: FloatArray, nodes: list[Node], tolerance: float) -> CheckResult:
    difference = np.where(expected > 0.0, integrals / np.where(expected > 0.0, expected, 1.0) - 1.0, 0.0)
    difference = np.where((expected <= 0.0) & (integrals > 0.0), np.inf, difference)
    worst = int(np.argmax(np.abs(difference)))
    detail = f"{len(nodes)} of {len(nodes)} nodes; worst {difference[worst]:+.1e} at {_place(nodes[worst])}"
    return judge("closure", float(difference[worst]), tolerance + SAMPLED, detail)


def _sampled(samples: list[BandSample], tolerance: float) -> list[CheckResult]:
    """What was made again line by line."""
    if not samples:
        what = "every band drawn has too many points to be made again"
        return [CheckResult("fine cells", CANNOT_JUDGE, what), CheckResult("audit", CANNOT_JUDGE, what)]
    bands = f"{len(samples)} bands made again line by line"
    cells, exact = max(one.fine_cells for one in samples), max(one.exact for one in samples)
    mean = max(one.mean for one in samples)
    return [
        judge("fine cells", cells, CELL_ERROR + COLUMN_SHARE * tolerance, f"transmission within {cells:.1e}, {bands}"),
        judge("band means", mean, tolerance + SAMPLED, f"within {mean:.1e}, {bands}"),
        judge("audit", exact, tolerance, f"spectra of these bands within {exact:.1e} of the exact sum"),
    ]
