"""Every error this package raises on purpose.

Bad input gets one line that says what is wrong, where, what was expected, what was
found and how to mend it.  The command line prints that line and ends with the exit
code of the error's class; nothing else ever reaches a user as a bare traceback.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from typing import Self


class OpacityError(Exception):
    """Base of all errors of this package; `exit_code` is what the command line returns.

    `argument` names the argument of a Python call whose choice is at fault, where one is.  Each line of the message
    then starts with that name, which a recipe's key can replace.
    """

    exit_code = 1
    argument: str | None = None

    def about(self, argument: str) -> Self:
        """The error itself, with the argument that it is about."""
        self.argument = argument
        return self


class InputError(OpacityError, ValueError):
    """An argument of a Python call or of a command that cannot be right."""

    exit_code = 2


class RecipeError(OpacityError):
    """A recipe with one or more faults, all of them in `problems`, one line each."""

    exit_code = 2

    def __init__(self, problems: Sequence[str]) -> None:
        self.problems: tuple[str, ...] = tuple(problems)
        super().__init__("\n".join(self.problems))

    def __reduce__(self) -> tuple[type[RecipeError], tuple[tuple[str, ...]]]:
        return type(self), (self.problems,)


class LineListError(OpacityError):
    """A line list that cannot be read, or that holds what the recipe does not allow."""


class MoleculeError(OpacityError):
    """An isotopologue, mass, abundance, partition function or width that is not to be had."""


class TableError(OpacityError):
    """A table that is missing, damaged, of another format version, or asked beyond its grid."""


class ResourceError(OpacityError):
    """Memory, disk or permission that the work needs and does not have."""


class InUseError(ResourceError):
    """A folder in which another process is at work."""


class AssumptionWarning(UserWarning):
    """What a computation assumed because the line list does not give it, and for how many lines."""


def one_line(error: BaseException) -> str:
    """What an exception says, on one line; empty where it says nothing."""
    return printable(" ".join(str(error).split()))


def printable(text: str) -> str:
    """Text on one line: whatever is not printable is written as an escape."""
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)


def excerpt(text: str | bytes, most: int = 60) -> str:
    """The start of a text of a data file for an error line: one line of printable ASCII, `?` for anything else."""
    words = text.decode("latin-1") if isinstance(text, bytes) else text
    shown = re.sub(r"[^\x20-\x7e]", "?", words[:most].replace("\t", " "))
    return shown + "..." if len(words) > most else shown


def problem(
    where: object,
    what: str,
    *,
    expected: object = None,
    found: object = None,
    remedy: str | None = None,
) -> str:
    """Put one error line together: ``where: what; expected ..., found ...; remedy``.

    Characters that do not print, which names of files may hold, are written as escapes.
    """
    line = f"{where}: {what}" if str(where) else what
    parts = []
    if expected is not None:
        parts.append(f"expected {expected}")
    if found is not None:
        parts.append(f"found {found}")
    if parts:
        line += "; " + ", ".join(parts)
    if remedy:
        line += f"; {remedy}"
    return line if line.isprintable() else printable(line)
