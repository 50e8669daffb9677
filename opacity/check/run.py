"""All checks of a table, in one place, as a build stores them and as `check` repeats them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from opacity.check.audit import audit, interpolation_errors, judge_audit
from opacity.check.band_strength import check_band, choose_pressure
from opacity.check.closure import closure_of, judge_closure
from opacity.check.result import CheckResult, finite
from opacity.check.spectra import Spectra, is_uniform, nodes_of
from opacity.cross_sections.prepare import PreparedLines
from opacity.grids import FloatArray
from opacity.recipe.model import Recipe


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
    lines: PreparedLines,
    seed: int,
    progress: Callable[[], None] = lambda: None,
) -> CheckReport:
    """Closure at every node, audit, interpolation at cell middles, and the recipe's band strengths."""
    profile = recipe.profile
    uniform = is_uniform(spectra.wavenumber)
    accounts = []
    strengths: dict[float, FloatArray] = {}
    for index, temperature, pressure in nodes_of(spectra):
        cutoff = profile.cutoff.at(pressure)
        if temperature not in strengths:
            strengths = {temperature: lines.strengths(temperature)}
        node = lines.at(temperature, pressure, strengths[temperature])
        accounts.append(closure_of(node, spectra.wavenumber, spectra.spectrum(*index), cutoff, profile.plinth, uniform))
        progress()
    found = audit(spectra, lines, profile, seed)
    between = interpolation_errors(spectra, lines, profile, seed)
    rows = [judge_closure(accounts, profile.tolerance), judge_audit(found, profile.tolerance)]
    for band in recipe.band_strengths:
        rows.append(check_band(band, spectra, choose_pressure(band, accounts, lines, profile), lines, profile))
    figures = {
        "tolerance": profile.tolerance,
        "results": [row.as_dict() for row in rows],
        "closure": [one.as_dict() for one in accounts],
        "audit": found.as_dict(),
        "interpolation": between,
        "ledger": lines.ledger.as_dict(),
        "assumptions": [{"what": one.what, "lines": one.lines} for one in lines.assumptions],
    }
    return CheckReport(tuple(rows), finite(figures))
