"""Which recipe a table came from, and its checks run again."""

from __future__ import annotations

import json
import os
from pathlib import Path

from opacity.check.open_check import check_integrity, recheck, require_same_inputs, stored_results
from opacity.check.run import CheckReport
from opacity.errors import InputError, problem
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.plan import table_name
from opacity.pipeline.progress import Progress
from opacity.recipe.load import load_recipe
from opacity.tables.read import Table, open_table

TABLE_ENDING = ".cross-section.h5"


def find_table_and_recipe(target: Path, recipe: Path | None, folder: Path) -> tuple[Path, Path | None]:
    """The table to check and its recipe, from either of them.

    A recipe's table is looked for in `folder`; a table's recipe is the one given, or the one that the log
    beside the table names, None where there is none.
    """
    if target.suffix == ".toml":
        if recipe is not None:
            raise InputError(
                problem("--recipe", f"{target} is a recipe itself", remedy="give the table, or no --recipe")
            )
        return folder / table_name(load_recipe(target)), target
    return target, recipe if recipe is not None else _recipe_of_log(target)


def _recipe_of_log(table: Path) -> Path | None:
    try:
        log = table.with_name(table.name.removesuffix(TABLE_ENDING) + ".log.json")
        path = Path(json.loads(log.read_text(encoding="utf-8"))["recipe"])
    except (OSError, ValueError, KeyError, TypeError):
        return None
    return path if os.path.isfile(path) else None


def check_table_file(
    path: Path, recipe_path: Path | None, seed: int | None = None, quiet: bool = False
) -> tuple[CheckReport, str]:
    """Check a table on disk; the report and a word on what it rests on.

    Without the recipe only integrity is checked, and the results that the build stored are repeated as such.
    Raises TableError for a damaged table, or one that was not built from the recipe as it stands, RecipeError for a
    recipe that cannot be used.
    """
    with open_table(path) as table:
        if recipe_path is None:
            rows = [check_integrity(table), *stored_results(table)]
            note = "recipe not at hand: all but integrity as stored by the build; --recipe repeats them from the lines"
            return CheckReport(tuple(rows), table.checks), note
        return _with_recipe(table, recipe_path, seed, quiet)


def _with_recipe(table: Table, recipe_path: Path, seed: int | None, quiet: bool) -> tuple[CheckReport, str]:
    recipe = load_recipe(recipe_path)
    inputs = load_inputs(recipe)
    require_same_inputs(table, recipe, inputs.provenance)
    nodes = table.temperature.size if table.profile else table.temperature.size * table.pressure.size
    with Progress("checks", nodes, "nodes", quiet) as progress:
        chosen = inputs.seed if seed is None else seed
        report = recheck(table, recipe, inputs.lines, chosen, progress.step)
    return report, f"recomputed from {recipe_path} with seed {chosen}"
