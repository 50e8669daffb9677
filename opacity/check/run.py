"""All checks of a table, in one place, as a build stores them and as `check` repeats them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from opacity.check.audit import audit, interpolation_errors, judge_audit
from opacity.check.band_strength import check_band, choose_pressure
from opacity.check.closure import Closure, ClosureSums, closure_from, closure_sums, judge_closure
from opacity.check.result import CheckResult, finite
from opacity.check.spectra import Spectra, is_uniform, nodes_of
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LineSource, as_source
from opacity.grids import FloatArray, cell_widths
from opacity.recipe.model import Profile, Recipe


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
) -> CheckReport:
    """Closure at every node, audit, interpolation at cell middles, and the recipe's band strengths."""
    profile, source = recipe.profile, as_source(lines)
    accounts = _closures(spectra, source, profile, progress)
    found = audit(spectra, source, profile, seed)
    between = interpolation_errors(spectra, source, profile, seed)
    rows = [judge_closure(accounts, profile.tolerance), judge_audit(found, profile.tolerance)]
    for band in recipe.band_strengths:
        rows.append(check_band(band, spectra, choose_pressure(band, accounts, source, profile), source, profile))
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


def _closures(spectra: Spectra, source: LineSource, profile: Profile, progress: Callable[[], None]) -> list[Closure]:
    """The account of every node; the lines are gone through once, some at a time."""
    nodes = nodes_of(spectra)
    uniform = is_uniform(spectra.wavenumber)
    sums = [ClosureSums() for _ in nodes]
    for lines in source.stretches():
        strengths: dict[float, FloatArray] = {}
        for number, (_, temperature, pressure) in enumerate(nodes):
            if temperature not in strengths:
                strengths = {temperature: lines.strengths(temperature)}
            node = lines.at(temperature, pressure, strengths[temperature])
            cutoff = profile.cutoff.at(pressure)
            here = closure_sums(node, spectra.wavenumber, cutoff, profile.plinth, uniform, profile.chi_table)
            sums[number] = sums[number].plus(here)
    accounts = []
    weights = cell_widths(spectra.wavenumber)
    for (index, temperature, pressure), one in zip(nodes, sums, strict=True):
        integral = float(np.sum(weights * spectra.spectrum(*index)))
        accounts.append(closure_from(one, temperature, pressure, integral))
        progress()
    return accounts
