"""`opacity plan` and `opacity build`: what a build will do, and what it made."""

from __future__ import annotations

import sys
from argparse import Namespace
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

from opacity.cli import text

if TYPE_CHECKING:
    from opacity.pipeline.build import BuildResult
    from opacity.pipeline.plan import Plan

DONE, FAILED = 0, 1


def plan(arguments: Namespace) -> int:
    """`opacity plan RECIPE`: what a build will do and need; exit code 1 where it cannot fit here."""
    from opacity.api import plan as make_plan
    from opacity.recipe.load import load_recipe

    made = make_plan(load_recipe(arguments.recipe), arguments.output, memory=arguments.memory, quiet=arguments.quiet)
    plans = (made, *made.others)
    if arguments.json:
        print(text.as_json(made.as_dict()))
    else:
        for one in plans:
            print(text.facts(_plan_facts(one)))
        _print_notes(made.ledger, _assumptions(made))
        for warning in dict.fromkeys(words for one in plans for words in (*one.warnings, *one.limited)):
            print(text.wrapped(f"warning: {warning}"))
    for obstacle in dict.fromkeys(words for one in plans for words in one.obstacles):
        print(f"warning: {obstacle}", file=sys.stderr)
    return FAILED if any(one.obstacles for one in plans) else DONE


def _plan_facts(made: Plan) -> list[tuple[str, str]]:
    lines, read = text.counted(made.lines, "line"), text.counted(made.ledger["read"], "record")
    nodes, points = text.counted(made.nodes, "node"), text.counted(made.points, "point")
    if made.bands:
        bands = text.counted(made.bands, "band")
        grid = f"{nodes} of {bands}, from spectra of {made.points:.2g} points in the mean"
        accuracy = f"every cross-section within {made.predicted_error:.1e} of the exact sum, predicted"
    else:
        grid = f"{nodes} of {points}"
        accuracy = f"every value within {made.predicted_error:.1e} of the exact sum, predicted"
    return [
        ("recipe", made.recipe),
        ("table", made.table),
        ("grid", grid),
        ("lines", f"{lines} in reach of the grid ({read} read)"),
        ("work", f"{made.profile_values:.2g} profile values"),
        ("time", _time(made)),
        ("accuracy", accuracy),
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
    """`opacity build RECIPE`: the tables, with their checks inside."""
    from opacity.pipeline.build import Crew, build_tables
    from opacity.recipe.load import load_recipe

    made = build_tables(
        load_recipe(arguments.recipe),
        Path(arguments.output),
        crew=Crew(arguments.workers, arguments.using, arguments.task, arguments.scheduler),
        memory=arguments.memory,
        quiet=arguments.quiet,
        announce=lambda plan: _warn((*plan.warnings, *plan.limited)),
    )
    for one in made:
        if one.reused:
            _warn(one.figures["warnings"])
    if arguments.json:
        contents = [_as_dict(one) for one in made]
        print(text.as_json(contents[0] if len(made) == 1 else {"tables": contents}))
    else:
        for one in made:
            _tell(one, arguments.quiet)
    return FAILED if any(_failed(one) for one in made) else DONE


def _failed(made: BuildResult) -> bool:
    from opacity.check.result import DIFFERS

    return any(row["verdict"] == DIFFERS for row in made.figures.get("results", []))


def _as_dict(made: BuildResult) -> dict[str, Any]:
    figures, done = made.figures, made.units - made.missing
    if not figures:
        return {"table": None, "units": made.units, "done": done, "seconds": made.seconds}
    return {
        "table": str(made.table),
        "log": str(made.log),
        "reused": made.reused,
        "seconds": made.seconds,
        "passed": not _failed(made),
        "warnings": figures["warnings"],
        "assumptions": figures["assumptions"],
        "left_out": figures["ledger"]["left_out"],
        "results": figures["results"],
    }


def _tell(made: BuildResult, quiet: bool) -> None:
    """What was made, for people."""
    from opacity.check.result import CheckResult

    figures, done = made.figures, made.units - made.missing
    if not figures and made.missing:
        print(f"{done} of {made.units} units done; the table is made when all are, by the last task or `opacity build`")
        return
    if not figures:
        print(f"all {made.units} units done; another task is putting the table together")
        return
    if not quiet:
        _print_notes(figures["ledger"], figures["assumptions"])
        print_results([CheckResult(**row) for row in figures["results"]], figures)
    if _failed(made):
        print("a check differs: do not use this table before you know why", file=sys.stderr)
    nodes = "up to date" if made.plan is None else text.counted(made.plan.nodes, "node")
    print(f"table: {made.table} ({nodes}, {text.duration(made.seconds)})")


def print_results(rows: Iterable[Any], figures: Mapping[str, Any]) -> None:
    """The results of a table's checks, what interpolating costs, and apart from these what its lists state."""
    print(text.results_table(rows))
    between, certificate, stated = (figures.get(key) for key in ("interpolation", "certificate", "uncertainty"))
    if between:
        print(text.wrapped(text.interpolation_line(between)))
    if certificate:
        for line in text.certificate_lines(certificate):
            print(text.wrapped(line))
    if stated:
        print()
        print("the list's own uncertainty, by band and node; it is no check of the table's numbers:")
        for line in text.uncertainty_lines(stated):
            print(text.wrapped(f"    {line}"))
