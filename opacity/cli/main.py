"""The command `opacity`: arguments, exit codes, one-line failures."""

from __future__ import annotations

import argparse
import contextlib
import io
import math
import os
import signal
import sys
from collections.abc import Sequence
from types import FrameType
from typing import NoReturn

from opacity.cli import commands
from opacity.errors import OpacityError
from opacity.provenance import VERSION

FAILED = 1
INTERRUPTED = 130


class _Parser(argparse.ArgumentParser):
    """A parser whose errors are one line, as all failures here."""

    def error(self, message: str) -> NoReturn:
        self.exit(2, f"{self.prog}: {message}; `{self.prog} --help` tells more\n")


def parser() -> argparse.ArgumentParser:
    """All commands and their options."""
    top = _Parser(
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
    if not (value.isdecimal() and len(value) <= 4 and 1 <= int(value) <= 1024):
        raise argparse.ArgumentTypeError(f"expected a whole number, 1 to 1024, found {value!r}")
    return int(value)


def _whole(value: str) -> int:
    if not (value.isdecimal() and len(value) <= 30):
        raise argparse.ArgumentTypeError(f"expected a whole number, 0 or more, found {value!r}")
    return int(value)


def _range(value: str) -> tuple[float, float]:
    try:
        lower, upper = (float(part) for part in value.split(","))
    except ValueError:
        lower, upper = math.nan, math.nan
    if not 0.0 <= lower < upper < math.inf:
        raise argparse.ArgumentTypeError(f"expected FROM,TO in cm-1, such as 2100,2110, found {value!r}")
    return lower, upper


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit code."""
    parsed = parser().parse_args(arguments)
    try:
        code = int(parsed.run(parsed))
        if sys.stdout is not None:  # closed by whoever started us
            sys.stdout.flush()
        return code
    except OpacityError as error:
        print(error, file=sys.stderr)
        return error.exit_code
    except KeyboardInterrupt:
        return _interrupted()
    except BrokenPipeError:
        # Whoever read our output has gone.
        _silence_stdout()
        return FAILED
    except OSError as error:
        print(f"{error.filename or 'output'}: {error.strerror or error}", file=sys.stderr)
        return FAILED
    except MemoryError:
        print("not enough memory: use fewer nodes, fewer points or a shorter line list", file=sys.stderr)
        return FAILED


def _interrupted() -> int:
    print("interrupted: nothing half-written was left behind", file=sys.stderr)
    return INTERRUPTED


class _Interrupts:
    """Handler of Ctrl-C that remembers it: compiled modules turn it into errors of their own while they load."""

    seen = False

    def __call__(self, number: int, frame: FrameType | None) -> NoReturn:
        self.seen = True
        raise KeyboardInterrupt


def _silence_stdout() -> None:
    """What could not be written is lost; at exit the interpreter would try again and complain."""
    with contextlib.suppress(OSError, ValueError, AttributeError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def run() -> NoReturn:
    """Entry point of the installed command."""
    # File names need not be text, and a terminal need not know every character.
    if isinstance(sys.stdout, io.TextIOWrapper) and sys.stdout.errors == "strict":
        sys.stdout.reconfigure(errors="backslashreplace")
    interrupts = _Interrupts()
    if signal.getsignal(signal.SIGINT) is signal.default_int_handler:
        signal.signal(signal.SIGINT, interrupts)
    try:
        code = main()
    except Exception:
        if not interrupts.seen:
            raise
        code = _interrupted()
    sys.exit(code)
