"""One small function a command: from parsed arguments to a library call and what is printed.

What loads slowly is imported inside the functions, so that `opacity --help` is instant.
"""

from __future__ import annotations

import sys
from argparse import Namespace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from opacity.cli import text

if TYPE_CHECKING:
    from opacity.pipeline.plan import Plan

DONE, FAILED = 0, 1


def new(arguments: Namespace) -> int:
    """`opacity new FORMULA`: a commented recipe to fill in."""
    from opacity.errors import InputError, problem
    from opacity.molecule.isotopologue import isotopologues_of
    from opacity.recipe.template import MoleculeFacts, recipe_template
    from opacity.tables.atomic import write_atomically

    known = isotopologues_of(arguments.formula)
    facts = MoleculeFacts(None, tuple((one.formula, one.abundance) for one in known)) if known else None
    recipe = recipe_template(arguments.formula, facts)
    path = Path(arguments.output or f"{arguments.formula}.toml")
    if path.exists():
        raise InputError(problem(path, "is there already", remedy="choose another name with -o"))
    write_atomically(path, recipe.encode("utf-8"))
    print(f"{path}: fill in what is marked `decide`, then run `opacity plan {path}`")
    return DONE


def plan(arguments: Namespace) -> int:
    """`opacity plan RECIPE`: what a build will do and need."""
    from opacity.api import plan as make_plan
    from opacity.recipe.load import load_recipe

    made = make_plan(load_recipe(arguments.recipe), arguments.output)
    if arguments.json:
        print(text.as_json(made.as_dict()))
        return DONE
    print(text.facts(_plan_facts(made)))
    print_notes(made)
    return DONE


def _plan_facts(made: Plan) -> list[tuple[str, str]]:
    return [
        ("recipe", made.recipe),
        ("table", made.table),
        ("grid", f"{made.nodes} nodes of {made.points} points"),
        ("lines", f"{made.lines} in reach of the grid ({made.ledger['read']} records read)"),
        ("work", f"{made.profile_values:.2g} profile values, about {text.duration(made.seconds)} on one core"),
        ("memory", f"{text.size(made.memory)} of {text.size(made.memory_available)} available"),
        ("disk", f"up to {text.size(made.disk)} of {text.size(made.disk_free)} free"),
    ]


def print_notes(made: Plan) -> None:
    """What was assumed for how many lines, what was left out, and warnings."""
    for reason, count in made.ledger["left_out"].items():
        print(f"left out: {count} lines, {reason}")
    for what, lines in made.assumptions:
        print(f"assumed for {lines} lines: {what}")
    for warning in made.warnings:
        print(f"warning: {warning}")


def build(arguments: Namespace) -> int:
    """`opacity build RECIPE`: the table, with its checks inside."""
    from opacity.check.result import DIFFERS, CheckResult
    from opacity.pipeline.build import build_table
    from opacity.recipe.load import load_recipe

    made = build_table(
        load_recipe(arguments.recipe), Path(arguments.output), workers=arguments.workers, quiet=arguments.quiet
    )
    rows = [CheckResult(**row) for row in made.figures["results"]]
    failed = any(row.verdict == DIFFERS for row in rows)
    if arguments.json:
        content: dict[str, Any] = {
            "table": str(made.table),
            "log": str(made.log),
            "reused": made.reused,
            "seconds": made.seconds,
            "passed": not failed,
            "results": [row.as_dict() for row in rows],
        }
        print(text.as_json(content))
        return FAILED if failed else DONE
    if not arguments.quiet:
        print_notes(made.plan)
        print(text.results_table(rows))
        between = made.figures.get("interpolation")
        if between:
            print(interpolation_line(between))
    if made.reused:
        print(f"table: {made.table} is up to date: whole, and built from these inputs")
    else:
        print(f"table: {made.table} ({made.plan.nodes} nodes, {text.duration(made.seconds)})")
    if failed:
        print("a check differs: do not use this table before you know why", file=sys.stderr)
    return FAILED if failed else DONE


def interpolation_line(between: dict[str, Any]) -> str:
    """What interpolating between the table's nodes costs, in one line."""
    return (
        f"between nodes (middles of {between['cells']} cells): half of the points within {between['p50']:.1e},"
        f" 99 % within {between['p99']:.1e}; not judged, it tells how fine the grid is"
    )


def check(arguments: Namespace) -> int:
    """`opacity check TABLE|RECIPE`: the table of results, exit code 1 where a check differs."""
    from opacity.pipeline.recheck import check_table_file, find_table_and_recipe

    given = Path(arguments.recipe) if arguments.recipe else None
    table, recipe = find_table_and_recipe(Path(arguments.target), given, Path(arguments.output))
    report, basis = check_table_file(table, recipe, arguments.seed, arguments.quiet)
    if arguments.json:
        content = {
            "table": str(table),
            "passed": report.passed,
            "basis": basis,
            "results": [row.as_dict() for row in report.results],
            "figures": {key: value for key, value in report.figures.items() if key != "results"},
        }
        print(text.as_json(content))
    else:
        print(f"{table} ({basis})")
        print(text.results_table(report.results))
        between = report.figures.get("interpolation")
        if between:
            print(interpolation_line(between))
    return DONE if report.passed else FAILED


def show(arguments: Namespace) -> int:
    """`opacity show TABLE`: a summary, and with --plot a picture."""
    from opacity.cli.summary import summary, summary_lines
    from opacity.errors import InputError, problem
    from opacity.tables.read import open_table

    if arguments.zoom and not arguments.plot:
        raise InputError(problem("--zoom", "enlarges a part of a picture", remedy="give --plot FILE.png too"))
    with open_table(arguments.table) as table:
        if arguments.json:
            print(text.as_json(summary(table)))
        else:
            print(text.facts(summary_lines(table)))
        if arguments.plot:
            from opacity.tables.draw import draw_table

            picture = draw_table(table, Path(arguments.plot), zoom=arguments.zoom)
            print(f"picture  {picture}", file=sys.stderr if arguments.json else sys.stdout)
    return DONE
