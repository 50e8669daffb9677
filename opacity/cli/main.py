"""The command `opacity`: arguments, exit codes, one-line failures."""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from typing import NoReturn

from opacity.cli import commands
from opacity.errors import OpacityError
from opacity.provenance import VERSION

INTERRUPTED = 130


def parser() -> argparse.ArgumentParser:
    """All commands and their options."""
    top = argparse.ArgumentParser(
        prog="opacity",
        description="Cross-section tables for model atmospheres from molecular line lists, with the proof inside.",
        epilog="Exit codes: 0 done, 1 failed or a check differs, 2 wrong use or wrong recipe, 130 interrupted.",
    )
    top.add_argument("--version", action="version", version=f"opacity {VERSION}")
    commands_parser = top.add_subparsers(title="commands", metavar="COMMAND", required=True)

    def command(name: str, words: str) -> argparse.ArgumentParser:
        made = commands_parser.add_parser(name, help=words, description=words[0].upper() + words[1:] + ".")
        made.set_defaults(run=getattr(commands, name))
        return made

    one = command("new", "write a commented recipe to fill in")
    one.add_argument("formula", metavar="FORMULA", help="the molecule, such as CO or H2O")
    one.add_argument("-o", "--output", metavar="FILE", help="where to write it (default: FORMULA.toml)")

    one = command("plan", "say what a build will do and need, without computing")
    one.add_argument("recipe", metavar="RECIPE")
    _add_shared(one)

    one = command("build", "build the table of a recipe, with its checks inside")
    one.add_argument("recipe", metavar="RECIPE")
    one.add_argument("--workers", type=_positive, metavar="N", help="threads (default: the CPUs allowed)")
    one.add_argument("--quiet", action="store_true", help="no progress, and only the last line of the result")
    _add_shared(one)

    one = command("check", "show a table right, or say what differs")
    one.add_argument("target", metavar="TABLE|RECIPE")
    one.add_argument("--recipe", metavar="RECIPE", help="the recipe that the table was built from")
    one.add_argument("--seed", type=_whole, metavar="N", help="audit with other points (default: those of the build)")
    one.add_argument("--quiet", action="store_true", help="no progress")
    _add_shared(one)

    one = command("show", "summarise a table, or draw it")
    one.add_argument("table", metavar="TABLE")
    one.add_argument("--plot", metavar="FILE.png", help="draw the table (needs the plot extra)")
    one.add_argument("--zoom", type=_range, metavar="FROM,TO", help="stretch (cm-1) to draw enlarged")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")
    return top


def _add_shared(one: argparse.ArgumentParser) -> None:
    one.add_argument("-o", "--output", metavar="DIR", default="tables", help="folder of the tables (default: tables)")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")


def _positive(value: str) -> int:
    number = int(value)
    if not 1 <= number <= 1024:
        raise argparse.ArgumentTypeError(f"expected 1 to 1024, found {value}")
    return number


def _whole(value: str) -> int:
    number = int(value)
    if number < 0:
        raise argparse.ArgumentTypeError(f"expected 0 or more, found {value}")
    return number


def _range(value: str) -> tuple[float, float]:
    parts = value.split(",")
    if len(parts) != 2:
        raise argparse.ArgumentTypeError(f"expected FROM,TO, found {value}")
    return float(parts[0]), float(parts[1])


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code."""
    parsed = parser().parse_args(arguments)
    try:
        code = int(parsed.run(parsed))
        sys.stdout.flush()
        return code
    except OpacityError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    except KeyboardInterrupt:
        print("interrupted: nothing half-written was left behind", file=sys.stderr)
        return INTERRUPTED
    except BrokenPipeError:
        # Whoever read our output has gone; keep the interpreter from complaining about it at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def run() -> NoReturn:
    """Entry point of the installed command."""
    sys.exit(main())
