"""One page on a table, to be read without anything else: what it is, what was checked, and what it rests on."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from opacity.check.run import CheckReport
from opacity.check.table_report import Evidence, table_report
from opacity.errors import InputError, ResourceError, problem
from opacity.pipeline.recheck import Checked, Target, check_open_table, find_tables_and_recipe
from opacity.pipeline.report_html import article, contents, page
from opacity.pipeline.report_sections import sections
from opacity.tables.atomic import write_atomically
from opacity.tables.open import open_table


@dataclass(frozen=True)
class Reported:
    """A table that was checked: its results, what they rest on, and what a page says of it under `name`."""

    report: CheckReport
    basis: str
    name: str
    title: str
    outcome: str
    verdict: str
    markup: tuple[str, ...]


def report(table: str | Path, path: str | Path, recipe: str | Path | None = None, quiet: bool = True) -> Path:
    """Check a table and write all that is known of it to one HTML page at `path`, which is returned.

    `table` may be a recipe whose tables are in the folder `tables`; they share the page then.
    The checks are made again from the recipe that the log beside the table names, or from `recipe`; without one,
    those that the build stored are shown.  The page needs no other file, no network and no script.
    Raises InputError for a `path` that does not end in .html, ResourceError where it can't be written, TableError and
    RecipeError as a check does.
    """
    place = require_page(path)
    targets = find_tables_and_recipe(Path(table), None if recipe is None else Path(recipe), Path("tables"))
    return write_report(place, [report_table(one, number, None, quiet) for number, one in enumerate(targets, start=1)])


def require_page(path: str | Path) -> Path:
    """The path of a page, if one can be written there; said before hours of checks and not after."""
    path = Path(path)
    if path.suffix.lower() not in (".html", ".htm"):
        raise InputError(problem(path, "a report is written as HTML", expected="a name that ends in .html"))
    folder = path.parent
    if not os.path.isdir(folder):
        raise ResourceError(problem(path, "cannot be written", found=f"no folder {folder}", remedy="make it first"))
    if os.path.isdir(path) or not os.access(folder, os.W_OK):
        found = "a folder of this name" if os.path.isdir(path) else f"no permission to write into {folder}"
        raise ResourceError(problem(path, "cannot be written", found=found, remedy="choose another name"))
    return path


def report_table(target: Target, number: int = 1, seed: int | None = None, quiet: bool = False) -> Reported:
    """Check a table and say all of it; `number` tells the ids of several tables on a page apart."""
    with open_table(target.table) as table:
        checked = check_open_table(table, target, seed, quiet)
        content = table_report(table, checked.report, checked.basis, _evidence(checked))
        name, title = f"t{number}", f"{table.title} ({table.path.name})"
        markup = tuple(sections(content, table, name))
        return Reported(checked.report, checked.basis, name, title, content.outcome, content.verdict, markup)


def _evidence(checked: Checked) -> Evidence | None:
    if checked.recipe is None or checked.inputs is None:
        return None
    inputs = checked.inputs
    return Evidence(checked.recipe, inputs.lines, inputs.isotopologues, inputs.partition)


def write_report(path: Path, found: Sequence[Reported]) -> Path:
    """Write one page on one table or several; it has its name only when it is whole."""
    body = [article(one.name, one.markup) for one in found]
    if len(found) > 1:
        body.insert(0, contents((one.name, one.title, one.outcome, one.verdict) for one in found))
    markup = page("; ".join(one.title for one in found), body)
    return write_atomically(path, markup.encode("utf-8", "backslashreplace"))
