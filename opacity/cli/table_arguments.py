"""Arguments of the commands that look into tables: `explain` and `compare`."""

from __future__ import annotations

import argparse
import itertools
import math
from collections.abc import Callable


def add_arguments(command: Callable[[str, str], argparse.ArgumentParser]) -> None:
    """The parsers of `explain` and `compare`; `command` makes one from a name and words."""
    one = command("explain", "say which lines make a value of a cross-section table, and where they come from")
    one.add_argument("table", metavar="TABLE")
    one.add_argument(
        "--at", type=_point, required=True, metavar="NU,T,P", help="wavenumber (cm-1), temperature (K), pressure (bar)"
    )
    one.add_argument("--recipe", metavar="RECIPE", help="the recipe that the table was built from (default: its log's)")
    one.add_argument("--lines", type=_count(1), default=10, metavar="N", help="so many lines (default: 10)")
    one.add_argument("--quiet", action="store_true", help="no progress")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")

    one = command("compare", "hold a table against another one, or against columns of numbers")
    one.add_argument("a", metavar="A", help="a table of cross-sections or k-coefficients")
    one.add_argument("b", metavar="B", help="another one, or text of columns: axis and cross-section")
    one.add_argument(
        "--bands", type=_bands, metavar="WIDTH|EDGES", help="width, or edges with commas, cm-1 (default: 10)"
    )
    one.add_argument("--plot", metavar="FILE.png", help="draw the worst node (needs the plot extra)")
    one.add_argument("--within", type=_share, metavar="X", help="exit code 1 where a ratio of bands is further from 1")
    one.add_argument(
        "--recipe", metavar="RECIPE", help="A's recipe, for the lines at the worst place (default: its log's)"
    )
    one.add_argument("--lines", type=_count(0), default=3, metavar="N", help="so many of these (default: 3)")
    one.add_argument("--quiet", action="store_true", help="no progress")
    of_columns = one.add_argument_group("columns of numbers")
    of_columns.add_argument("--at", type=_node, metavar="T,P", help="temperature (K) and pressure (bar) of the columns")
    of_columns.add_argument(
        "--columns", type=_columns, default=(1, 2), metavar="I,J", help="those of axis and cross-section (default: 1,2)"
    )
    of_columns.add_argument(
        "--axis", choices=("cm-1", "um", "nm"), default="cm-1", help="unit of the axis (default: cm-1)"
    )
    of_columns.add_argument(
        "--unit",
        choices=("cm2/molecule", "m2/molecule", "cm2/g"),
        default="cm2/molecule",
        help="unit of the cross-section (default: cm2/molecule)",
    )
    of_columns.add_argument("--mass", type=_mass, metavar="M", help="g/mol, for cm2/g (default: that of A's molecule)")
    one.add_argument("--json", action="store_true", help="the result as JSON on stdout")


def _numbers(value: str, expected: str, count: int | None) -> tuple[float, ...]:
    try:
        numbers = tuple(float(part) for part in value.split(","))
    except ValueError:
        numbers = ()
    if not numbers or (count is not None and len(numbers) != count) or not all(map(math.isfinite, numbers)):
        raise argparse.ArgumentTypeError(f"expected {expected}, found {value!r}")
    return numbers


def _positive(value: str, expected: str, count: int) -> tuple[float, ...]:
    numbers = _numbers(value, expected, count)
    if min(numbers) <= 0.0:
        raise argparse.ArgumentTypeError(f"expected {expected}, found {value!r}")
    return numbers


def _point(value: str) -> tuple[float, ...]:
    return _positive(value, "NU,T,P in cm-1, K and bar, such as 2147.08,300,0.1", 3)


def _node(value: str) -> tuple[float, ...]:
    return _positive(value, "T,P in K and bar, such as 300,0.1", 2)


def _mass(value: str) -> float:
    return _positive(value, "a mass above 0 g/mol", 1)[0]


def _share(value: str) -> float:
    return _positive(value, "a number above 0, such as 0.01 for 1 %", 1)[0]


def _bands(value: str) -> float | tuple[float, ...]:
    expected = "a width above 0 or rising edges in cm-1, such as 10 or 2000,2100,2200"
    numbers = _numbers(value, expected, None)
    rising = all(low < high for low, high in itertools.pairwise(numbers))
    if not rising or numbers[0] < 0.0 or numbers == (0.0,):
        raise argparse.ArgumentTypeError(f"expected {expected}, found {value!r}")
    return numbers[0] if len(numbers) == 1 else numbers


def _count(lowest: int) -> Callable[[str], int]:
    def count(value: str) -> int:
        if not (value.isdecimal() and len(value) <= 4 and lowest <= int(value) <= 1000):
            raise argparse.ArgumentTypeError(f"expected a whole number, {lowest} to 1000, found {value!r}")
        return int(value)

    return count


def _columns(value: str) -> tuple[int, int]:
    words = value.split(",")
    good = len(words) == 2 and all(word.isdecimal() and len(word) <= 3 and int(word) >= 1 for word in words)
    if not good or int(words[0]) == int(words[1]):
        raise argparse.ArgumentTypeError(
            f"expected two different columns, counted from 1, such as 1,3, found {value!r}"
        )
    return int(words[0]), int(words[1])
