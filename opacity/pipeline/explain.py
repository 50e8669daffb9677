"""From a table on disk to the lines that make one of its values, by the recipe that it was built from."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np

from opacity.arguments import as_positive, shown
from opacity.check.explain import Explanation, judge_value, point_of, weigh
from opacity.check.open_check import require_same_recipe
from opacity.errors import InputError, TableError, problem
from opacity.pipeline.fingerprint import fingerprint
from opacity.pipeline.listed import ListedLines, open_listed
from opacity.pipeline.recheck import recipe_of_log
from opacity.pipeline.sources import DEFAULT_MEMORY
from opacity.pipeline.trace import trace
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Recipe
from opacity.tables.read import Table, open_table

MOST_LINES = 1000


@contextlib.contextmanager
def listed_lines(table: Table, recipe: Recipe, quiet: bool = True) -> Iterator[ListedLines]:
    """The lines that a table was built from.  Raises TableError where the recipe's inputs are not the table's."""
    require_same_recipe(table, recipe)
    if recipe.species:
        what, remedy = "is of several species: its lines are not traced", "ask the table of one of the species"
        raise InputError(problem(recipe.path, what, remedy=remedy))
    origin = fingerprint(recipe)
    _require_same_files(table, recipe, origin.content)
    with open_listed(recipe, table.path.parent, DEFAULT_MEMORY, quiet, origin.hashes) as listed:
        yield listed


def _require_same_files(table: Table, recipe: Recipe, content: dict[str, Any]) -> None:
    """As `require_same_inputs`, by the files' hashes alone, so that no list is gone through for it."""
    stated = table.provenance
    wanted = {"line lists": stated.get("line_lists"), "broadening files": stated.get("broadening_files") or {}}
    found = {"line lists": content["line_lists"], "broadening files": content["broadening_files"]}
    partition = stated.get("partition_function")
    if content["partition_file"] is not None and isinstance(partition, dict):
        wanted["partition function"] = {key: partition.get(key) for key in content["partition_file"]}
        found["partition function"] = content["partition_file"]
    for what, one in found.items():
        if wanted[what] != one:
            changed = f"{what} of {recipe.path} changed since the table was built"
            raise TableError(problem(table.path, changed, remedy="build it again"))


def explain(
    table: str | Path,
    *,
    wavenumber: float,
    temperature: float,
    pressure: float,
    recipe: str | Path | Recipe | None = None,
    lines: int = 10,
    quiet: bool = True,
) -> Explanation:
    """Which lines make a value of a cross-section table, and where each of them comes from.

    `wavenumber` (cm-1) is taken to the nearest grid point; `temperature` (K) and `pressure` (bar) may lie between
    nodes, where the table's value is interpolated and the exact sum is made at the very temperature and pressure.
    `recipe` is the one that the table was built from, by default the one that the log beside the table names;
    `lines` (up to 1000) is how many are told; a line store that is missing is made again, unless `quiet` with a bar of
    progress.  Raises TableError where there is no recipe, it is not the table's, or
    the point lies outside of the table, InputError for an argument that cannot be right.
    """
    check_lines(lines)
    nu = as_positive("wavenumber", wavenumber, "cm-1")
    t, p = as_positive("temperature", temperature, "K"), as_positive("pressure", pressure, "bar")
    with open_table(table) as opened:
        return explain_open(opened, recipe_for(opened, recipe), nu, t, p, int(lines), quiet)


def check_lines(lines: object, lowest: int = 1) -> None:
    """Raise InputError for a number of lines to tell that is not whole, or not from `lowest` to 1000."""
    whole = isinstance(lines, (int, np.integer)) and not isinstance(lines, bool)
    if not whole or not lowest <= int(lines) <= MOST_LINES:  # type: ignore[call-overload]
        expected = f"a whole number from {lowest} to {MOST_LINES}"
        raise InputError(problem("lines", "impossible", expected=expected, found=shown(lines)))


def recipe_for(table: Table, given: str | Path | Recipe | None) -> Recipe:
    """The recipe given, or the one that the log beside the table names.  Raises TableError where there is none."""
    if isinstance(given, Recipe):
        return given
    path = Path(given) if given is not None else recipe_of_log(table.path)
    if path is None:
        what = "no log beside it names a recipe that is there, and the lines are found by its recipe"
        raise TableError(problem(table.path, what, remedy="give the one it was built from: --recipe RECIPE"))
    return load_recipe(path)


def explain_open(
    table: Table, recipe: Recipe, wavenumber: float, temperature: float, pressure: float, most: int, quiet: bool = True
) -> Explanation:
    """As `explain`, of an open table and a recipe at hand."""
    point = point_of(table, wavenumber, temperature, pressure)
    profile = recipe.profile
    with listed_lines(table, recipe, quiet) as listed:
        found = weigh(listed, point, profile, most)
        parts = trace(recipe, found.largest, listed.places, listed.choices["defaults"])
    difference, within = judge_value(point, found, profile)
    return Explanation(
        table=str(table.path),
        recipe=str(recipe.path),
        asked=wavenumber,
        wavenumber=point.wavenumber,
        temperature=point.temperature,
        pressure=point.pressure,
        at_node=point.at_node,
        value=point.value,
        exact=found.total,
        difference=difference,
        tolerance=profile.tolerance,
        within=within,
        cutoff=profile.cutoff.at(point.pressure),
        lines=found.lines,
        share_of_ten=found.share_of_ten,
        parts=tuple(replace(one, share=one.value / found.total) for one in parts),
    )
