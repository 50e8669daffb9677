"""One small function a command: from parsed arguments to a library call and what is printed.

What loads slowly is imported inside the functions, so that `opacity --help` is instant.
"""

from __future__ import annotations

import sys
from argparse import Namespace
from pathlib import Path

from opacity.cli import text
from opacity.cli.build import DONE, FAILED, print_results
from opacity.cli.build import build as build
from opacity.cli.build import plan as plan
from opacity.cli.fetch import fetch as fetch
from opacity.cli.k_tables import g_points as g_points
from opacity.cli.k_tables import mix as mix
from opacity.cli.lists import check_list, is_list
from opacity.cli.lists import ingest as ingest
from opacity.cli.recipes import check_recipe, is_recipe_without_table
from opacity.cli.recipes import new as new
from opacity.cli.tables import compare as compare
from opacity.cli.tables import explain as explain


def check(arguments: Namespace) -> int:
    """`opacity check TABLE|RECIPE`: the tables of results, exit code 1 where a check differs."""
    if is_list(Path(arguments.target)):
        return check_list(Path(arguments.target), arguments.recipe, arguments.json)
    if not arguments.recipe and is_recipe_without_table(Path(arguments.target), Path(arguments.output)):
        return check_recipe(arguments)
    from opacity.pipeline.recheck import check_table_file, find_tables_and_recipe
    from opacity.recipe.unverified import accepted_in_words

    given = Path(arguments.recipe) if arguments.recipe else None
    targets = find_tables_and_recipe(Path(arguments.target), given, Path(arguments.output))
    passed, found = True, []
    for target in targets:
        report, basis = check_table_file(target, arguments.seed, arguments.quiet)
        passed = passed and report.passed
        if arguments.json:
            found.append(
                {
                    "table": str(target.table),
                    "passed": report.passed,
                    "basis": basis,
                    "results": [row.as_dict() for row in report.results],
                    "figures": {key: value for key, value in report.figures.items() if key != "results"},
                }
            )
        else:
            from_memory = accepted_in_words(report.figures.get("unverified", []))
            facts = [("table", str(target.table)), ("basis", basis)]
            print(text.facts([*facts, *([("accepted", f"from memory: {from_memory}")] if from_memory else [])]))
            print_results(report.results, report.figures)
    if arguments.json:
        print(text.as_json(found[0] if len(found) == 1 else {"passed": passed, "tables": found}))
    return DONE if passed else FAILED


def show(arguments: Namespace) -> int:
    """`opacity show TABLE`: a summary, and with --plot a picture."""
    from opacity.cli.summary import summary, summary_lines
    from opacity.errors import InputError, problem
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
