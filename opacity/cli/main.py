"""The command `opacity`: arguments, exit codes, one-line failures."""

from __future__ import annotations

import argparse
import contextlib
import io
import json
import math
import multiprocessing
import os
import re
import signal
import sys
from collections.abc import Callable, Sequence
from types import FrameType
from typing import NoReturn

from opacity.cli import commands, k_tables
from opacity.cli.table_arguments import add_arguments
from opacity.errors import OpacityError
from opacity.provenance import VERSION

FAILED = 1
WRONG_USE = 2
TERMINATED = 75
"""EX_TEMPFAIL of sysexits.h: stopped from outside, to be run again."""
INTERRUPTED = 130


class _UsageError(Exception):
    """Arguments that are not those of a command."""


class Terminated(KeyboardInterrupt):
    """SIGTERM: whoever runs this asks it to stop."""

    exit_code = TERMINATED


class _Parser(argparse.ArgumentParser):
    """A parser whose errors are one line, as all failures here."""

    def error(self, message: str) -> NoReturn:
        raise _UsageError(f"{self.prog}: {message}; `{self.prog} --help` tells more")


def parser() -> argparse.ArgumentParser:
    """All commands and their options."""
    top = _Parser(
        prog="opacity",
        description="Cross-section tables for model atmospheres from molecular line lists, with the proof inside.",
        epilog="Exit codes: 0 done, 1 failed or a check differs, 2 wrong use or wrong recipe, 75 terminated by SIGTERM,"
        " 130 interrupted.",
    )
    top.add_argument("--version", action="version", version=f"opacity {VERSION}")
    commands_parser = top.add_subparsers(title="commands", metavar="COMMAND", required=True)

    def command(name: str, words: str) -> argparse.ArgumentParser:
        made = commands_parser.add_parser(name, help=words, description=words[0].upper() + words[1:] + ".")
        made.set_defaults(run=getattr(commands, name.replace("-", "_")))
        return made

    one = command("new", "write a commented recipe to fill in")
    one.add_argument("formula", metavar="FORMULA", help="the molecule, such as CO or H2O")
    one.add_argument("-o", "--output", metavar="FILE", help="where to write it (default: FORMULA.toml; - for stdout)")
    one.add_argument("--from", dest="source", metavar="FOLDER|FILE", help="a data set in ExoMol format, or its .def")

    one = command("fetch", "get the files that a recipe's line lists need")
    one.add_argument("recipe", metavar="RECIPE")
    one.add_argument("--yes", action="store_true", help="start without asking")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")
    one.add_argument("--quiet", action="store_true", help="only the last line of the result, and what failed")

    one = command("ingest", "read a recipe's line lists into stores, and account for every record")
    one.add_argument("recipe", metavar="RECIPE")
    one.add_argument("--quiet", action="store_true", help="no progress")
    _add_memory(one)
    _add_shared(one)

    one = command("plan", "say what a build will do and need, without computing (large lists are read into stores)")
    one.add_argument("recipe", metavar="RECIPE")
    one.add_argument("--quiet", action="store_true", help="no progress")
    _add_memory(one)
    _add_shared(one)

    one = command("build", "build the table of a recipe, with its checks inside")
    one.add_argument("recipe", metavar="RECIPE")
    one.add_argument("--workers", type=_positive, metavar="N", help="so many side by side (default: the CPUs allowed)")
    one.add_argument("--using", choices=("threads", "processes"), default="threads", help="what workers are")
    one.add_argument("--task", type=_task, metavar="K/N", help="only the K-th of N shares, as a task of a batch array")
    one.add_argument("--scheduler", metavar="ADDR|FILE", help="a dask scheduler's address or file, or local")
    one.add_argument("--quiet", action="store_true", help="only warnings and the last line of the result")
    _add_memory(one)
    _add_shared(one)

    _add_reading_commands(command)
    k_tables.add_commands(command)
    return top


def _add_reading_commands(command: Callable[[str, str], argparse.ArgumentParser]) -> None:
    one = command("check", "show a table right, or say what differs; what a recipe lacks; or look at a line list")
    one.add_argument("target", metavar="TABLE|RECIPE|LIST")
    one.add_argument(
        "--recipe", metavar="RECIPE", help="the recipe that the table was built from, or that says what a list is of"
    )
    one.add_argument("--report", metavar="FILE.html", help="write all that is known of the table to one page too")
    one.add_argument("--seed", type=_whole, metavar="N", help="audit with other points (default: those of the build)")
    one.add_argument("--quiet", action="store_true", help="no progress")
    _add_shared(one)

    one = command("show", "summarise a table, or draw it")
    one.add_argument("table", metavar="TABLE")
    one.add_argument("--plot", metavar="FILE.png", help="draw the table (needs the plot extra)")
    one.add_argument("--zoom", type=_range, metavar="FROM,TO", help="stretch (cm-1) to draw enlarged")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")

    add_arguments(command)


def _add_shared(one: argparse.ArgumentParser) -> None:
    one.add_argument("-o", "--output", metavar="DIR", default="tables", help="folder of the tables (default: tables)")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")


def _add_memory(one: argparse.ArgumentParser) -> None:
    one.add_argument(
        "--memory",
        type=_bytes,
        metavar="SIZE",
        default=2_000_000_000,
        help="for lists and workers (default: 2GB)",
    )


def _bytes(value: str) -> int:
    match = re.fullmatch(r"(\d{1,6}(?:\.\d{1,3})?) ?([MG]B)", value)
    size = float(match[1]) * {"MB": 1e6, "GB": 1e9}[match[2]] if match else 0.0
    if not 5e7 <= size <= 1e15:
        raise argparse.ArgumentTypeError(f"expected a size such as 500MB or 2GB, 50MB or more, found {value!r}")
    return int(size)


def _positive(value: str) -> int:
    if not (value.isdecimal() and len(value) <= 4 and 1 <= int(value) <= 1024):
        raise argparse.ArgumentTypeError(f"expected a whole number, 1 to 1024, found {value!r}")
    return int(value)


def _task(value: str) -> tuple[int, int]:
    match = re.fullmatch(r"(\d{1,6})/(\d{1,6})", value)
    k, n = (int(match[1]), int(match[2])) if match else (0, 0)
    if not 1 <= k <= n:
        raise argparse.ArgumentTypeError(f"expected K/N with K from 1 to N, such as 3/20, found {value!r}")
    return k, n


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
    words = sys.argv[1:] if arguments is None else list(arguments)
    try:
        parsed = parser().parse_args(words)
        code = int(parsed.run(parsed))
        if sys.stdout is not None:  # closed by whoever started us
            sys.stdout.flush()
        return code
    except BrokenPipeError:
        # Whoever read our output has gone.
        _silence_stdout()
        return FAILED
    except (_UsageError, OpacityError, OSError, MemoryError, KeyboardInterrupt) as error:
        code, lines = _failure(error)
        return _tell(code, lines, _wants_json(words))


def _failure(error: BaseException) -> tuple[int, list[str]]:
    """Exit code and lines of an error that is told without a traceback."""
    if isinstance(error, _UsageError):
        return WRONG_USE, [str(error)]
    if isinstance(error, OpacityError):
        return error.exit_code, str(error).split("\n")
    if isinstance(error, OSError):
        return FAILED, [f"{error.filename or 'output'}: {error.strerror or error}"]
    if isinstance(error, MemoryError):
        return FAILED, ["not enough memory: use fewer nodes, fewer points or a shorter line list"]
    if isinstance(error, Terminated):
        return TERMINATED, [f"terminated: nothing half-written was left behind; {_kept(error)}"]
    return INTERRUPTED, [f"interrupted: nothing half-written was left behind; {_kept(error)}"]


def _kept(error: BaseException) -> str:
    """What a stopped command has told of what is done."""
    return str(error) or "the same command starts again"


def _wants_json(words: Sequence[str]) -> bool:
    """Options may be shortened."""
    return any(len(word) > 2 and "--json".startswith(word) for word in words)


def _tell(code: int, lines: Sequence[str], as_json: bool) -> int:
    """Lines for people on stderr and, if asked for, the same as JSON on stdout, which may be what has failed."""
    print("\n".join(lines), file=sys.stderr)
    if as_json:
        try:
            print(json.dumps({"error": list(lines)}, indent=2), flush=True)
        except (OSError, AttributeError):
            _silence_stdout()
    return code


class _Signals:
    """Handler of Ctrl-C and SIGTERM that remembers them: compiled modules, while they load, turn them into errors."""

    seen: KeyboardInterrupt | None = None

    def __call__(self, number: int, frame: FrameType | None) -> NoReturn:
        if self.seen is not None:
            # Asked twice: what runs is not waited for; what it was writing has no final name.
            os._exit(TERMINATED if number == signal.SIGTERM else INTERRUPTED)
        self.seen = Terminated() if number == signal.SIGTERM else KeyboardInterrupt()
        raise self.seen


def _silence_stdout() -> None:
    """What could not be written is lost; at exit the interpreter would try again and complain."""
    with contextlib.suppress(OSError, ValueError, AttributeError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def run() -> NoReturn:
    """Entry point of the installed command."""
    # File names need not be text, and a terminal need not know every character.
    if isinstance(sys.stdout, io.TextIOWrapper) and sys.stdout.errors == "strict":
        sys.stdout.reconfigure(errors="backslashreplace")
    signals = _Signals()
    if signal.getsignal(signal.SIGINT) is signal.default_int_handler:
        signal.signal(signal.SIGINT, signals)
    if signal.getsignal(signal.SIGTERM) is signal.SIG_DFL:
        signal.signal(signal.SIGTERM, signals)
    try:
        code = main()
    except Exception:
        if signals.seen is None:
            raise
        code = _tell(*_failure(signals.seen), _wants_json(sys.argv))
    if signals.seen is not None:
        # While the interpreter ends it puts the system's own handlers back: a second signal would have the last word.
        for number in (signal.SIGINT, signal.SIGTERM):
            signal.signal(number, signal.SIG_IGN)
        if multiprocessing.active_children():
            # Their end would be waited for, and a signal may have left them without the word for it.
            with contextlib.suppress(OSError, ValueError, AttributeError):
                sys.stdout.flush()
                sys.stderr.flush()
            os._exit(code)
    sys.exit(code)
