"""`opacity g-points` and `opacity mix`: k-coefficient tables out of others."""

from __future__ import annotations

import argparse
import sys
from argparse import Namespace
from collections.abc import Callable
from pathlib import Path
from typing import Any

from opacity.cli import text
from opacity.cli.build import DONE, FAILED, print_results

QUADRATURES = ("matched", "gauss-legendre", "split", "interval-mean")
WEIGHTS = ("optimised", "optimised-per-band", "fixed")


def add_commands(command: Callable[[str, str], argparse.ArgumentParser]) -> None:
    """The parsers of both commands."""
    one = command("g-points", "choose the g points of k-coefficient tables again, without reading a line")
    one.add_argument("tables", metavar="TABLE", nargs="+", help="one, or several that are to share their points")
    one.add_argument("--count", type=int, metavar="N", help="so many (default: as few as --transmission-error needs)")
    one.add_argument("--transmission-error", type=float, metavar="E", default=5e-3, help="promised (default: 0.005)")
    one.add_argument("--quadrature", choices=QUADRATURES, default="matched")
    one.add_argument("--weights", choices=WEIGHTS, help="made to fit, all bands alike or each, or fixed")
    one.add_argument("-o", "--output", metavar="DIR", required=True, help="folder of the new tables")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")
    one.add_argument("--quiet", action="store_true", help="only warnings and the table's name")
    one = command("mix", "mix k-coefficient tables of several species by random overlap")
    one.add_argument("parts", metavar="TABLE=FRACTION", nargs="+", type=_part, help="with its mole fraction")
    one.add_argument("-o", "--output", metavar="FILE.h5", required=True, help="the table of the mixture")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")
    one.add_argument("--quiet", action="store_true", help="only warnings and the table's name")


def _part(word: str) -> tuple[Path, float]:
    name, equals, fraction = word.rpartition("=")
    try:
        number = float(fraction)
    except ValueError:
        number = -1.0
    if not equals or not name or not 1e-30 <= number <= 1.0:
        raise argparse.ArgumentTypeError(f"expected TABLE=FRACTION, 1e-30 to 1, found {word!r}")
    return Path(name), number


def g_points(arguments: Namespace) -> int:
    """`opacity g-points TABLE... -o DIR`: the same tables with other points in g."""
    from opacity.k_coefficient.choose import Wanted
    from opacity.pipeline.k_files import choose_again

    quadrature = arguments.quadrature
    weights = arguments.weights or ("optimised" if quadrature == "matched" else "fixed")
    wanted = Wanted(arguments.count, arguments.transmission_error, quadrature, weights)
    made = choose_again([Path(one) for one in arguments.tables], wanted, Path(arguments.output), quiet=arguments.quiet)
    return _tell(made, arguments.json, arguments.quiet)


def mix(arguments: Namespace) -> int:
    """`opacity mix TABLE=FRACTION... -o FILE.h5`: the table of the mixture."""
    from opacity.pipeline.k_files import mix_tables

    made = mix_tables(arguments.parts, Path(arguments.output), arguments.quiet)
    return _tell([made], arguments.json, arguments.quiet)


def _tell(made: list[tuple[Path, dict[str, Any]]], as_json: bool, quiet: bool) -> int:
    """What was made, and what is to be warned of."""
    from opacity.check.result import DIFFERS, CheckResult

    failed = any(row["verdict"] == DIFFERS for _, checks in made for row in checks["results"])
    if as_json:
        tables = [{"table": str(path), "results": checks["results"]} for path, checks in made]
        print(text.as_json({"passed": not failed, "tables": tables}))
    else:
        for path, checks in made:
            for warning in checks.get("warnings", []):
                print(text.wrapped(f"warning: {warning}"), file=sys.stderr)
            if not quiet:
                print_results([CheckResult(**row) for row in checks["results"]], checks)
            print(f"table: {path}")
    return FAILED if failed else DONE
