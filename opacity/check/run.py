"""All checks of a table, in one place, as a build stores them and as `check` repeats them."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Executor, ThreadPoolExecutor
from contextlib import nullcontext
from dataclasses import dataclass
from typing import Any

import numpy as np

from opacity.check.audit import audit, interpolation_errors, judge_audit
from opacity.check.band_strength import check_band, choose_pressure
from opacity.check.closure import Closure, ClosureSums, closure_from, closure_sums, judge_closure
from opacity.check.result import CheckResult, finite
from opacity.check.spectra import Spectra, is_uniform, nodes_of
from opacity.cross_sections.prepare import LinesAtTemperature, PreparedLines
from opacity.cross_sections.source import LineSource, as_source
from opacity.grids import cell_widths
from opacity.recipe.model import Profile, Recipe

STRENGTHS_AT_ONCE = 8_000_000
"""Strengths (lines times temperatures) that are held at once: 64 MB, and as much for each of the widths."""


@dataclass(frozen=True)
class CheckReport:
    """Rows of results, and the figures behind them as plain values for JSON."""

    results: tuple[CheckResult, ...]
    figures: dict[str, Any]

    @property
    def passed(self) -> bool:
        """Whether no check differs."""
        return all(row.verdict != "differs" for row in self.results)


def run_checks(
    spectra: Spectra,
    recipe: Recipe,
    lines: LineSource | PreparedLines,
    seed: int,
    progress: Callable[[], None] = lambda: None,
    workers: int = 1,
) -> CheckReport:
    """Closure at every node, audit, interpolation at cell middles, and the recipe's band strengths.

    Threads do it side by side where `workers` is above 1; the results have the same bits for any number of them.
    """
    profile, source = recipe.profile, as_source(lines)
    with ThreadPoolExecutor(workers) if workers > 1 else nullcontext() as executor:
        accounts = _closures(spectra, source, profile, progress, executor)
        found = audit(spectra, source, profile, seed, executor)
        between = interpolation_errors(spectra, source, profile, seed, executor)
        rows = [judge_closure(accounts, profile.tolerance), judge_audit(found, profile.tolerance)]
        for band in recipe.band_strengths:
            pressure = choose_pressure(band, accounts, source, profile)
            rows.append(check_band(band, spectra, pressure, source, profile, executor, recipe.abundance))
    figures = {
        "tolerance": profile.tolerance,
        "results": [row.as_dict() for row in rows],
        "closure": [one.as_dict() for one in accounts],
        "audit": found.as_dict(),
        "interpolation": between,
        "ledger": source.ledger.as_dict(),
        "assumptions": [{"what": one.what, "lines": one.lines} for one in source.assumptions],
    }
    return CheckReport(tuple(rows), finite(figures))


def _closures(
    spectra: Spectra, source: LineSource, profile: Profile, progress: Callable[[], None], executor: Executor | None
) -> list[Closure]:
    """The account of every node; the lines are gone through once, some at a time, nodes side by side."""
    nodes = nodes_of(spectra)
    uniform = is_uniform(spectra.wavenumber)
    sums = [ClosureSums() for _ in nodes]
    side_by_side = map if executor is None else executor.map
    rows: dict[float, list[int]] = {}
    for row, (_, temperature, _) in enumerate(nodes):
        rows.setdefault(temperature, []).append(row)
    for lines in source.stretches():
        block = max(STRENGTHS_AT_ONCE // max(len(lines), 1), 1)
        for start in range(0, len(rows), block):
            temperatures = list(rows)[start : start + block]
            strengths = lines.strengths_at(temperatures)
            columns = dict(zip(temperatures, side_by_side(lines.at_temperature, temperatures, strengths), strict=True))

            def add(row: int, columns: dict[float, LinesAtTemperature] = columns) -> ClosureSums:
                _, temperature, pressure = nodes[row]
                choice = profile.cutoff.at(pressure), profile.plinth, uniform, profile.chi_table
                return closure_sums(columns[temperature], pressure, spectra.wavenumber, *choice)

            here = [row for temperature in temperatures for row in rows[temperature]]
            for row, one in zip(here, side_by_side(add, here), strict=True):
                sums[row] = sums[row].plus(one)
    accounts = []
    weights = cell_widths(spectra.wavenumber)
    for (index, temperature, pressure), one in zip(nodes, sums, strict=True):
        integral = float(np.sum(weights * spectra.spectrum(*index)))
        accounts.append(closure_from(one, temperature, pressure, integral))
        progress()
    return accounts
