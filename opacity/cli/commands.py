"""One small function a command: from parsed arguments to a library call and what is printed.

What loads slowly is imported inside the functions, so that `opacity --help` is instant.
"""

from __future__ import annotations

import sys
from argparse import Namespace
from pathlib import Path

from opacity.cli import text
from opacity.cli.build import DONE, FAILED
from opacity.cli.build import build as build
from opacity.cli.build import plan as plan
from opacity.cli.fetch import fetch as fetch
from opacity.cli.k_tables import g_points as g_points
from opacity.cli.k_tables import mix as mix
from opacity.cli.lists import check_list, is_list
from opacity.cli.lists import ingest as ingest
from opacity.cli.recipes import check_recipe, is_recipe_without_table
from opacity.cli.recipes import new as new
from opacity.cli.results import tell_checks
from opacity.cli.tables import compare as compare
from opacity.cli.tables import explain as explain
from opacity.errors import InputError, problem


def check(arguments: Namespace) -> int:
    """`opacity check TABLE|RECIPE`: the tables of results, exit code 1 where a check differs."""
    target = Path(arguments.target)
    if is_list(target):
        if arguments.report:
            raise InputError(problem("--report", "is of tables", remedy="give a table, or a recipe that has one"))
        return check_list(target, arguments.recipe, arguments.json)
    if not (arguments.recipe or arguments.report) and is_recipe_without_table(target, Path(arguments.output)):
        return check_recipe(arguments)
    from opacity.pipeline.recheck import check_table_file, find_tables_and_recipe
    from opacity.pipeline.report import report_table, require_page, write_report

    page = require_page(arguments.report) if arguments.report else None
    targets = find_tables_and_recipe(
        target, Path(arguments.recipe) if arguments.recipe else None, Path(arguments.output)
    )
    found, reported = [], []
    for number, one in enumerate(targets, start=1):
        if page is None:
            found.append((one.table, *check_table_file(one, arguments.seed, arguments.quiet)))
        else:
            reported.append(report_table(one, number, arguments.seed, arguments.quiet))
            found.append((one.table, reported[-1].report, reported[-1].basis))
    if page is not None:
        write_report(page, reported)
    tell_checks(found, arguments.json)
    if page is not None:
        print(f"report: {page}", file=sys.stderr if arguments.json else sys.stdout)
    return DONE if all(report.passed for _, report, _ in found) else FAILED


def show(arguments: Namespace) -> int:
    """`opacity show TABLE`: a summary, and with --plot a picture."""
    from opacity.cli.summary import summary, summary_lines
    from opacity.tables.k_read import KCoefficientTable
    from opacity.tables.open import open_table

    if arguments.zoom and not arguments.plot:
        raise InputError(problem("--zoom", "enlarges a part of a picture", remedy="give --plot FILE.png too"))
    with open_table(arguments.table) as table:
        if arguments.zoom and isinstance(table, KCoefficientTable):
            raise InputError(problem("--zoom", "is for tables of cross-sections", remedy="leave it out"))
        if arguments.json:
            print(text.as_json(summary(table)))
        else:
            print(text.facts(summary_lines(table)))
            print(f"table: {table.path}")
        if arguments.plot:
            from opacity.tables.draw import draw_table
            from opacity.tables.k_draw import draw_k_table

            path = Path(arguments.plot)
            if isinstance(table, KCoefficientTable):
                picture = draw_k_table(table, path)
            else:
                picture = draw_table(table, path, zoom=arguments.zoom)
            print(f"picture: {picture}", file=sys.stderr if arguments.json else sys.stdout)
    return DONE
