"""One small function a command: from parsed arguments to a library call and what is printed.

What loads slowly is imported inside the functions, so that `opacity --help` is instant.
"""

from __future__ import annotations

import sys
from argparse import Namespace
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from opacity.cli import text
from opacity.cli.fetch import fetch as fetch
from opacity.cli.lists import check_list, is_list
from opacity.cli.lists import ingest as ingest
from opacity.cli.recipes import check_recipe, is_recipe_without_table
from opacity.cli.recipes import new as new

if TYPE_CHECKING:
    from opacity.pipeline.build import BuildResult
    from opacity.pipeline.plan import Plan

DONE, FAILED = 0, 1


def plan(arguments: Namespace) -> int:
    """`opacity plan RECIPE`: what a build will do and need; exit code 1 where it cannot fit here."""
    from opacity.api import plan as make_plan
    from opacity.recipe.load import load_recipe

    made = make_plan(load_recipe(arguments.recipe), arguments.output, memory=arguments.memory, quiet=arguments.quiet)
    if arguments.json:
        print(text.as_json(made.as_dict()))
    else:
        print(text.facts(_plan_facts(made)))
        _print_notes(made.ledger, _assumptions(made))
        for warning in (*made.warnings, *made.limited):
            print(text.wrapped(f"warning: {warning}"))
    for obstacle in made.obstacles:
        print(f"warning: {obstacle}", file=sys.stderr)
    return FAILED if made.obstacles else DONE


def _plan_facts(made: Plan) -> list[tuple[str, str]]:
    lines, read = text.counted(made.lines, "line"), text.counted(made.ledger["read"], "record")
    return [
        ("recipe", made.recipe),
        ("table", made.table),
        ("grid", f"{text.counted(made.nodes, 'node')} of {text.counted(made.points, 'point')}"),
        ("lines", f"{lines} in reach of the grid ({read} read)"),
        ("work", f"{made.profile_values:.2g} profile values"),
        ("time", _time(made)),
        ("accuracy", f"every value within {made.predicted_error:.1e} of the exact sum, predicted"),
        ("units", f"{made.units}, of up to {text.counted(made.lines_per_unit, 'line')} each"),
        ("workers", f"{made.workers}, {text.size(made.memory_per_worker)} each at most"),
        ("memory", f"up to {text.size(made.memory)} of {text.size(made.memory_available)} allowed"),
        ("disk", f"up to {text.size(made.disk)} of {text.size(made.disk_free)} free"),
    ]


def _time(made: Plan) -> str:
    one = f"about {text.duration(made.seconds)} of one core for spectra, checks and writing"
    return one if made.workers == 1 else f"{one}; {text.duration(made.wall_seconds)} with {made.workers} workers"


def _assumptions(made: Plan) -> list[dict[str, Any]]:
    return [{"what": what, "lines": lines} for what, lines in made.assumptions]


def _print_notes(ledger: Mapping[str, Any], assumptions: Iterable[Mapping[str, Any]]) -> None:
    for kind, what in text.notes(ledger, assumptions):
        print(text.wrapped(f"{kind} {what}" if kind == "assumed" else f"{kind}: {what}"))


def _warn(warnings: Iterable[str]) -> None:
    for warning in warnings:
        print(text.wrapped(f"warning: {warning}"), file=sys.stderr, flush=True)


def build(arguments: Namespace) -> int:
    """`opacity build RECIPE`: the table, with its checks inside."""
    from opacity.check.result import DIFFERS, CheckResult
    from opacity.pipeline.build import Crew, build_table
    from opacity.recipe.load import load_recipe

    made = build_table(
        load_recipe(arguments.recipe),
        Path(arguments.output),
        crew=Crew(arguments.workers, arguments.using, arguments.task, arguments.scheduler),
        memory=arguments.memory,
        quiet=arguments.quiet,
        announce=lambda plan: _warn((*plan.warnings, *plan.limited)),
    )
    if not made.figures:
        return _tell_of_task(made, arguments)
    figures = made.figures
    if made.reused:
        _warn(figures["warnings"])
    rows = [CheckResult(**row) for row in figures["results"]]
    failed = any(row.verdict == DIFFERS for row in rows)
    if arguments.json:
        content: dict[str, Any] = {
            "table": str(made.table),
            "log": str(made.log),
            "reused": made.reused,
            "seconds": made.seconds,
            "passed": not failed,
            "warnings": figures["warnings"],
            "assumptions": figures["assumptions"],
            "left_out": figures["ledger"]["left_out"],
            "results": [row.as_dict() for row in rows],
        }
        print(text.as_json(content))
        return FAILED if failed else DONE
    if not arguments.quiet:
        _print_notes(figures["ledger"], figures["assumptions"])
        _print_results(rows, figures)
    nodes = "up to date" if made.plan is None else text.counted(made.plan.nodes, "node")
    if failed:
        print("a check differs: do not use this table before you know why", file=sys.stderr)
    print(f"table: {made.table} ({nodes}, {text.duration(made.seconds)})")
    return FAILED if failed else DONE


def _tell_of_task(made: BuildResult, arguments: Namespace) -> int:
    """A share of a build is done, and other shares are not."""
    done = made.units - made.missing
    if arguments.json:
        print(text.as_json({"table": None, "units": made.units, "done": done, "seconds": made.seconds}))
    elif made.missing:
        print(f"{done} of {made.units} units done; the table is made when all are, by the last task or `opacity build`")
    else:
        print(f"all {made.units} units done; another task is putting the table together")
    return DONE


def _print_results(rows: Iterable[Any], figures: Mapping[str, Any]) -> None:
    print(text.results_table(rows))
    between = figures.get("interpolation")
    if between:
        print(text.wrapped(text.interpolation_line(between)))


def check(arguments: Namespace) -> int:
    """`opacity check TABLE|RECIPE`: the table of results, exit code 1 where a check differs."""
    if is_list(Path(arguments.target)):
        return check_list(Path(arguments.target), arguments.recipe, arguments.json)
    if not arguments.recipe and is_recipe_without_table(Path(arguments.target), Path(arguments.output)):
        return check_recipe(arguments)
    from opacity.pipeline.recheck import check_table_file, find_table_and_recipe
    from opacity.recipe.unverified import accepted_in_words

    given = Path(arguments.recipe) if arguments.recipe else None
    target = find_table_and_recipe(Path(arguments.target), given, Path(arguments.output))
    report, basis = check_table_file(target, arguments.seed, arguments.quiet)
    if arguments.json:
        content = {
            "table": str(target.table),
            "passed": report.passed,
            "basis": basis,
            "results": [row.as_dict() for row in report.results],
            "figures": {key: value for key, value in report.figures.items() if key != "results"},
        }
        print(text.as_json(content))
    else:
        from_memory = accepted_in_words(report.figures.get("unverified", []))
        facts = [("table", str(target.table)), ("basis", basis)]
        print(text.facts([*facts, *([("accepted", f"from memory: {from_memory}")] if from_memory else [])]))
        _print_results(report.results, report.figures)
    return DONE if report.passed else FAILED


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
