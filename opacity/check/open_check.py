"""Checking a table that lies on disk: integrity always, the physics where its recipe and lines are at hand."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from typing import Any

import numpy as np

from opacity.check.k_run import run_k_checks
from opacity.check.result import AGREES, CheckResult
from opacity.check.run import CheckReport, run_checks
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LineSource, as_source
from opacity.errors import TableError, problem
from opacity.k_coefficient.bands import band_edges
from opacity.recipe.model import Recipe
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.read import Table

AnyTable = Table | KCoefficientTable


def check_integrity(table: AnyTable) -> CheckResult:
    """Read every block and compare it with its sha256.  Raises TableError naming the first damaged block."""
    table.verify()
    formula = formula_of(table.recipe)
    if formula is not None and table.formula != formula:
        raise TableError(
            problem(table.path, "its formula is not that of its recipe", expected=formula, found=table.formula)
        )
    nodes = table.temperature.size if table.profile else table.temperature.size * table.pressure.size
    if isinstance(table, KCoefficientTable):
        return CheckResult("integrity", AGREES, f"k-coefficients and fine cells of {nodes} nodes match their sha256")
    return CheckResult("integrity", AGREES, f"all blocks of {nodes} spectra match their sha256")


def formula_of(recipe: str) -> str | None:
    """The molecule that a recipe's text names, None where it is not to be read."""
    try:
        return str(tomllib.loads(recipe)["molecule"]["formula"])
    except (tomllib.TOMLDecodeError, KeyError, TypeError):
        return None


def _has_axes_of(table: AnyTable, recipe: Recipe) -> bool:
    grid = recipe.grid
    if (grid.nodes is not None) != table.profile:
        return False
    wanted: list[Any] = [grid.temperature, grid.pressure]
    found: list[Any] = [table.temperature, table.pressure]
    if isinstance(table, Table):
        wanted.append(grid.wavenumber)
        found.append(table.wavenumber)
    else:
        edges = band_edges(recipe) if recipe.k_coefficient is not None else np.zeros(1)
        wanted.append(np.stack([edges[:-1], edges[1:]], axis=-1))
        found.append(table.band_bounds)
    if grid.nodes is not None:
        wanted[:2] = [tuple(t for t, _ in grid.nodes), tuple(p for _, p in grid.nodes)]
    return all(np.array_equal(axis, np.asarray(one)) for axis, one in zip(found, wanted, strict=True))


def stored_results(table: AnyTable) -> list[CheckResult]:
    """The results that the build stored in the table.  Raises TableError where they do not look like results."""
    try:
        return [CheckResult(**row) for row in table.checks.get("results", [])]
    except TypeError as error:
        raise TableError(problem(table.path, f"checks are not as this version writes them ({error})")) from error


def require_same_recipe(table: AnyTable, recipe: Recipe) -> None:
    """Raise TableError unless the table was built from a recipe of this very text."""
    if table.recipe == recipe.text and not _has_axes_of(table, recipe):
        raise TableError(problem(table.path, "its axes are not those of its recipe", remedy="build it again"))
    if table.recipe != recipe.text:
        raise TableError(
            problem(
                table.path,
                f"was not built from {recipe.path} as it stands now",
                remedy="build it again, or check it with the recipe it was built from",
            )
        )


def require_same_inputs(table: AnyTable, recipe: Recipe, provenance: dict[str, object]) -> None:
    """Raise TableError unless the table was built from the line lists and partition functions that a recipe gives."""
    for key in ("line_lists", "partition_function"):
        if table.provenance.get(key) != provenance.get(key):
            raise TableError(
                problem(
                    table.path,
                    f"{key.replace('_', ' ')} of {recipe.path} changed since the table was built",
                    remedy="build it again",
                )
            )


def recheck(
    table: AnyTable,
    recipe: Recipe,
    lines: LineSource | PreparedLines,
    seed: int,
    progress: Callable[[], None] = lambda: None,
    workers: int = 1,
) -> CheckReport:
    """Integrity and all checks of the physics, recomputed from the recipe's lines by so many threads."""
    integrity = check_integrity(table)
    if isinstance(table, Table):
        report = run_checks(table, recipe, lines, seed, progress, workers)
    else:
        chosen = {name: table.checks.get("certificate", {}).get(name) for name in ("weights", "target")}
        report = run_k_checks(table, recipe, as_source(lines), seed, chosen, progress, workers)
    return CheckReport((integrity, *report.results), report.figures)
