"""Checking a table that lies on disk: integrity always, the physics where its recipe and lines are at hand."""

from __future__ import annotations

from collections.abc import Callable

from opacity.check.result import AGREES, CheckResult
from opacity.check.run import CheckReport, run_checks
from opacity.cross_sections.prepare import PreparedLines
from opacity.errors import TableError, problem
from opacity.recipe.model import Recipe
from opacity.tables.read import Table


def check_integrity(table: Table) -> CheckResult:
    """Read every block and compare it with its sha256.  Raises TableError naming the first damaged block."""
    table.verify()
    nodes = table.temperature.size if table.profile else table.temperature.size * table.pressure.size
    return CheckResult("integrity", AGREES, f"all blocks of {nodes} spectra match their sha256")


def stored_results(table: Table) -> list[CheckResult]:
    """The results that the build stored in the table.  Raises TableError where they do not look like results."""
    try:
        return [CheckResult(**row) for row in table.checks.get("results", [])]
    except TypeError as error:
        raise TableError(problem(table.path, f"checks are not as this version writes them ({error})")) from error


def require_same_inputs(table: Table, recipe: Recipe, provenance: dict[str, object]) -> None:
    """Raise TableError unless the table was built from this recipe and these line lists."""
    if table.recipe != recipe.text:
        raise TableError(
            problem(
                table.path,
                f"was not built from {recipe.path} as it stands now",
                remedy="build it again, or check it with the recipe it was built from",
            )
        )
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
    table: Table, recipe: Recipe, lines: PreparedLines, seed: int, progress: Callable[[], None] = lambda: None
) -> CheckReport:
    """Integrity and all checks of the physics, recomputed from the recipe's lines."""
    integrity = check_integrity(table)
    report = run_checks(table, recipe, lines, seed, progress)
    return CheckReport((integrity, *report.results), report.figures)
