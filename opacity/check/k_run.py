"""All checks of a k-coefficient table, and its certificate, as a build stores them and as `check` repeats them."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from contextlib import nullcontext
from dataclasses import asdict
from typing import Any

import numpy as np

from opacity.check.closure import strength_between
from opacity.check.k_nodes import at_all_nodes, certificate_of, follows, place_of, within
from opacity.check.k_samples import BandSample, KValues, draw, sample_band
from opacity.check.result import CANNOT_JUDGE, CheckResult, finite, judge
from opacity.check.run import CheckReport
from opacity.check.spectra import Node, nodes_of
from opacity.cross_sections.source import LineSource
from opacity.grids import FloatArray
from opacity.k_coefficient.quadrature import INTERVALS
from opacity.recipe.model import Profile, Recipe

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
        found = at_all_nodes(table, nodes, progress, executor)
        expected = _strengths(table, nodes, source, profile)
        drawn = draw(table, nodes, seed)
        samples = [sample_band(table, source, profile, drawn, band, seed, executor) for band in drawn.bands]
    looked_at = [one for one in samples if one is not None]
    rows = [
        follows(found, table.quadrature in INTERVALS),
        within(found.bands, nodes, table, chosen.get("target")),
        _closure(found.integrals, expected, nodes, profile.tolerance),
        *_sampled(looked_at, profile.tolerance),
    ]
    certificate = {
        **chosen,
        **certificate_of(found.bands),
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


def _closure(integrals: FloatArray, expected: FloatArray, nodes: list[Node], tolerance: float) -> CheckResult:
    difference = np.where(expected > 0.0, integrals / np.where(expected > 0.0, expected, 1.0) - 1.0, 0.0)
    difference = np.where((expected <= 0.0) & (integrals > 0.0), np.inf, difference)
    worst = int(np.argmax(np.abs(difference)))
    detail = f"{len(nodes)} of {len(nodes)} nodes; worst {difference[worst]:+.1e} at {place_of(nodes[worst])}"
    return judge("closure", float(difference[worst]), tolerance + SAMPLED, detail)


def _sampled(samples: list[BandSample], tolerance: float) -> list[CheckResult]:
    """What was made again line by line."""
    if not samples:
        what = "every band drawn has too many points to be made again"
        return [CheckResult("fine cells", CANNOT_JUDGE, what), CheckResult("audit", CANNOT_JUDGE, what)]
    bands = f"{len(samples)} bands made again line by line"
    worst, exact = max(samples, key=lambda one: one.fine_cells - one.border), max(one.exact for one in samples)
    cells, limit = worst.fine_cells, CELL_ERROR + COLUMN_SHARE * tolerance + worst.border
    mean = max(one.mean for one in samples)
    return [
        judge("fine cells", cells, limit, f"transmission within {max(one.fine_cells for one in samples):.1e}, {bands}"),
        judge("band means", mean, tolerance + SAMPLED, f"within {mean:.1e}, {bands}"),
        judge("audit", exact, tolerance, f"spectra of these bands within {exact:.1e} of the exact sum"),
    ]
