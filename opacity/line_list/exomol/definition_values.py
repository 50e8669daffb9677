"""What a definition says, as text with its place, and the way from there to values that can be right."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field
from pathlib import Path

from opacity.errors import LineListError, excerpt, problem

_WORD = re.compile(r"[\x21-\x7e]([\x20-\x7e]{0,198}[\x21-\x7e])?")
_NUMBER = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?")
_LARGEST_COUNT = 10**15


@dataclass
class Values:
    """Statements by key, each with its place (`file:line`, or `file`), in the words of the file.

    `columns` are the columns of the .states file behind J; `broadeners` pairs of name and file, with their place.
    """

    path: Path
    scalars: dict[str, tuple[str, str]] = field(default_factory=dict)
    columns: list[str] = field(default_factory=list)
    broadeners: list[tuple[str, str, str]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    def state(self, key: str, text: str, where: str) -> None:
        """Enter a statement.  Raises LineListError if there is one for this key already."""
        if key in self.scalars:
            raise LineListError(problem(where, f"{key} given twice", expected="one", found=f'"{excerpt(text)}"'))
        self.scalars[key] = (text, where)

    def text(self, key: str) -> str:
        """A word or a few.  Raises LineListError naming a key that is missing or has no printable value."""
        if key not in self.scalars:
            raise LineListError(
                problem(
                    self.path, f"no {key} in this definition", expected=_EXPECTED.get(key, f"a record of the {key}")
                )
            )
        text, where = self.scalars[key]
        return checked_word(text, key, where)

    def number(self, key: str, lowest: float, highest: float) -> float | None:
        """The first number of a statement, None if there is no such one.  Raises LineListError outside the limits."""
        if key not in self.scalars:
            return None
        text, where = self.scalars[key]
        value = to_number((text.split() or [""])[0])
        if not lowest <= value <= highest:
            expected = f"a number from {lowest:g} to {highest:g}"
            raise LineListError(problem(where, f"{key} is impossible", expected=expected, found=f'"{excerpt(text)}"'))
        return value

    def count(self, key: str, highest: int = _LARGEST_COUNT) -> int | None:
        """A whole number, None if there is no such statement.  Raises LineListError for anything else."""
        value = self.number(key, 0.0, float(highest))
        if value is not None and value != math.floor(value):
            text, where = self.scalars[key]
            raise LineListError(
                problem(where, f"{key} is no count", expected="a whole number", found=f'"{excerpt(text)}"')
            )
        return None if value is None else int(value)

    def flag(self, key: str) -> bool:
        """A statement of 0 or 1; False if there is no such one."""
        return self.count(key, 1) == 1


_EXPECTED = {
    "isotopologue formula": 'a record "... # IsoFormula" or a key iso_formula',
    "isotopologue slug": 'a record "... # Iso-slug" or a key iso_slug',
    "dataset name": 'a record "... # Isotopologue dataset name" or a key name in dataset',
    "version": 'a record "... # Version number" or a key version',
    "mass": 'a record "... # Isotopologue mass (Da) and (kg)" or a key mass_in_Da',
}


def checked_word(text: str, key: str, where: str) -> str:
    """A text without blanks around it.  Raises LineListError unless it is printable, not empty and not too long."""
    word = text.strip()
    if not _WORD.fullmatch(word):
        raise LineListError(
            problem(where, f"{key} is impossible", expected="1 to 200 printable characters", found=f'"{excerpt(word)}"')
        )
    return word


def to_number(word: str) -> float:
    """A decimal number, infinite where it is beyond the range of f8; NaN for anything else."""
    return float(word) if _NUMBER.fullmatch(word) else math.nan
