"""Which recipe a table came from, and its checks run again."""

from __future__ import annotations

import json
import os
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from opacity.check.open_check import check_integrity, recheck, require_same_inputs, require_same_recipe, stored_results
from opacity.check.run import CheckReport
from opacity.errors import InputError, OpacityError, TableError, problem
from opacity.pipeline.inputs import Inputs, load_inputs
from opacity.pipeline.kinds import CROSS_SECTION, K_COEFFICIENT, table_name, wanted
from opacity.pipeline.progress import Progress
from opacity.pipeline.resources import allowed_cpus
from opacity.recipe.formats import exomol_kind
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Recipe
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.open import open_table
from opacity.tables.read import Table

CHECKED = (
    "a table (.h5), a recipe (.toml), or a line list: .par, .data, .cat, .def, .states or .trans, plain or compressed"
)
"""What `opacity check` takes."""


@dataclass(frozen=True)
class Target:
    """A table to check and its recipe; `asked_for` tells a recipe that the user named from one that a log names."""

    table: Path
    recipe: Path | None
    asked_for: bool = False


def find_tables_and_recipe(target: Path, recipe: Path | None, folder: Path) -> list[Target]:
    """The tables to check and their recipe, from either of them.

    A recipe's tables are looked for in `folder`, TableError where there is none; a table's recipe is the one given, or
    the one that the log beside the table names, None where there is none.  TableError for what is neither.
    """
    if os.path.isdir(target):
        raise TableError(problem(target, "not a file", expected=CHECKED))
    if exomol_kind(target.name) in ("pf", "broad"):
        remedy = "with its data set it is looked at too: give the .states or .def file beside it"
        raise TableError(problem(target, "not checked by itself", expected=CHECKED, remedy=remedy))
    if target.suffix != ".toml":
        found = recipe if recipe is not None else recipe_of_log(target)
        return [Target(target, found, recipe is not None)]
    if recipe is not None:
        raise InputError(problem("--recipe", f"{target} is a recipe itself", remedy="give the table, or no --recipe"))
    read = load_recipe(target)
    tables = [folder / table_name(read, kind) for kind in wanted(read)]
    for table in tables:
        if not os.path.exists(table):
            command = f"opacity build {target}" + ("" if folder == Path("tables") else f" -o {folder}")
            raise TableError(problem(table, f"{target} has no table here yet", remedy=f"build it first: `{command}`"))
    return [Target(table, target, True) for table in tables]


def recipe_of_log(table: Path) -> Path | None:
    """The recipe that the log beside a table names, None where there is none."""
    try:
        name = table.name
        for kind in (CROSS_SECTION, K_COEFFICIENT):
            name = name.removesuffix(f".{kind}.h5")
        log = table.with_name(f"{name}.log.json")
        path = Path(json.loads(log.read_text(encoding="utf-8"))["recipe"])
    except (OSError, ValueError, KeyError, TypeError):
        return None
    return path if os.path.isfile(path) else None


@dataclass(frozen=True)
class Checked:
    """A table's checks and a word on what they rest on; the recipe and its lines where they were used."""

    report: CheckReport
    basis: str
    recipe: Recipe | None = None
    inputs: Inputs | None = None


def check_table_file(target: Target, seed: int | None = None, quiet: bool = False) -> tuple[CheckReport, str]:
    """Check a table on disk; the report and a word on what it rests on.

    Without a recipe, or where the one that the log names is no longer what the table was built from, only integrity is
    checked, and the results that the build stored are repeated as such.  Raises TableError for a damaged table, or
    one that was not built from the recipe asked for, RecipeError for one that cannot be used.
    """
    with open_table(target.table) as table:
        checked = check_open_table(table, target, seed, quiet)
    return checked.report, checked.basis


def check_open_table(
    table: Table | KCoefficientTable, target: Target, seed: int | None = None, quiet: bool = False
) -> Checked:
    """The same of a table that is open."""
    if target.recipe is None:
        return _as_stored(table, "recipe not at hand")
    try:
        recipe = load_recipe(target.recipe)
        require_same_recipe(table, recipe)
        inputs = load_inputs(recipe, table.path.parent, quiet=quiet)
        require_same_inputs(table, recipe, inputs.provenance)
    except OpacityError as error:
        if target.asked_for:
            raise
        reason = str(error).split("\n")[0].removeprefix(f"{table.path}: ").partition("; ")[0]
        return _as_stored(table, f"recipe of the log not used ({reason})")
    return _again(table, recipe, inputs, seed, quiet)


def _as_stored(table: Table | KCoefficientTable, why: str) -> Checked:
    rows = [check_integrity(table), *stored_results(table)]
    note = f"{why}: all but integrity as stored by the build; --recipe repeats them from the lines"
    if "mixed" in table.provenance:
        note = "mixed of other tables, and so without lines: all but integrity as stored"
    return Checked(CheckReport(tuple(rows), {**table.checks, **_unverified(table)}), note)


def _again(table: Table | KCoefficientTable, recipe: Recipe, inputs: Inputs, seed: int | None, quiet: bool) -> Checked:
    nodes = table.temperature.size if table.profile else table.temperature.size * table.pressure.size
    with Progress("checks", nodes, "nodes", quiet) as progress:
        chosen = inputs.seed if seed is None else seed
        report = recheck(table, recipe, inputs.lines, chosen, progress.step, allowed_cpus())
    # What the lists say of themselves is no matter of the table's numbers: it stays as the build found it.
    stated = {key: table.checks[key] for key in ("uncertainty",) if key in table.checks}
    report = CheckReport(report.results, {**report.figures, **stated, **_unverified(table)})
    return Checked(report, f"recomputed from {recipe.path} with seed {chosen}", recipe, inputs)


def _unverified(table: Table | KCoefficientTable) -> dict[str, Any]:
    """The values from memory that the table's recipe accepted; tables made before there was such a choice say none."""
    return {"unverified": table.provenance.get("unverified", [])}
