"""Typed access to the tables of a recipe; what does not fit becomes a fault.

A value that is missing or wrong is reported and a stand-in handed back: NaN for a number, empty
text, an empty table.  NaN fails every comparison, so one fault does not bring others with it.
No stand-in leaves `load_recipe`, because any fault ends it.
"""

from __future__ import annotations

import math
import re
import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from opacity.recipe.faults import Faults, listed, nearest, shown
from opacity.recipe.positions import KeyPath

_LINE_BREAKING = ("Cc", "Zl", "Zp")
"""Unicode categories of control characters and line breaks; a no-break space in a reference does no harm."""


@dataclass(frozen=True)
class Bounds:
    """Range of a number; `open_low` leaves the lower end itself out."""

    low: float
    high: float
    unit: str = ""
    open_low: bool = False

    def holds(self, value: float) -> bool:
        """Whether a value lies inside; never for NaN."""
        return (self.low < value if self.open_low else self.low <= value) and value <= self.high

    def __str__(self) -> str:
        unit = f" {self.unit}" if self.unit else ""
        if self.open_low:
            return f"a number above {self.low:g} and at most {self.high:g}{unit}"
        return f"a number from {self.low:g} to {self.high:g}{unit}"


class Table:
    """One table of a recipe and the keys allowed in it; unknown keys are reported at once.

    `later` names keys that the recipe's format has but this version does not read.
    """

    def __init__(
        self,
        faults: Faults,
        key: KeyPath,
        values: Mapping[str, Any],
        allowed: Sequence[str],
        later: Sequence[str] = (),
    ) -> None:
        self.faults = faults
        self.key = key
        self.values = values
        self._meant: set[str] = set()
        for name in values:
            if name not in allowed:
                self._report_unknown(name, allowed, later)

    def _report_unknown(self, name: str, allowed: Sequence[str], later: Sequence[str]) -> None:
        expected = listed(allowed) or "no keys"
        if name in later:
            self.faults.add((*self.key, name), "not in this version", expected=expected)
            return
        meant = nearest(name, [key for key in allowed if key not in self.values])
        if meant is None:
            meant = nearest(name, allowed)
        else:
            self._meant.add(meant)
        remedy = f"did you mean {meant}?" if meant else None
        if name == "accept_unverified":  # written behind a section's header it is a key of that section
            remedy = "put it at the top of the recipe, before the first section"
        self.faults.add((*self.key, name), "unknown key", expected=expected, found=shown(name), remedy=remedy)

    def __contains__(self, name: str) -> bool:
        return name in self.values

    def path(self, *names: str | int) -> KeyPath:
        """The full key path of a key of this table."""
        return (*self.key, *names)

    def misspelt(self, name: str) -> bool:
        """Whether an unknown key was probably meant to be `name`: then its lack is no second fault."""
        return name in self._meant

    def missing(self, name: str, expected: object, remedy: str | None = None) -> None:
        """Report that a required key is not there."""
        if not self.misspelt(name):
            self.faults.add(self.path(name), "missing", expected=expected, remedy=remedy)

    def number(self, name: str, bounds: Bounds, default: float | None = None) -> float:
        """A finite number within bounds; whole numbers are numbers, booleans are not.  Required without default."""
        if name in self.values:
            return checked_number(self.faults, self.path(name), self.values[name], bounds)
        if default is None:
            self.missing(name, bounds)
            return math.nan
        return default

    def count(self, name: str, low: int, high: int) -> int:
        """A required whole number from `low` to `high`; 0 stands in for a wrong one."""
        expected = f"a whole number from {low} to {high}"
        if name not in self.values:
            self.missing(name, expected)
            return 0
        value = self.values[name]
        if not isinstance(value, int) or isinstance(value, bool) or not low <= value <= high:
            self.faults.add(self.path(name), "impossible value", expected=expected, found=shown(value))
            return 0
        return value

    def flag(self, name: str, default: bool) -> bool:
        """A boolean."""
        value = self.values.get(name, default)
        if isinstance(value, bool):
            return value
        self.faults.add(self.path(name), "not a boolean", expected="true or false", found=shown(value))
        return default

    def text(
        self, name: str, expected: str, *, pattern: re.Pattern[str] | None = None, required: bool = True
    ) -> str | None:
        """Text on one line, not blank, that matches `pattern` whole; None where it is not required and not there."""
        if name in self.values:
            return checked_text(self.faults, self.path(name), self.values[name], expected, pattern)
        if not required:
            return None
        self.missing(name, expected)
        return ""

    def required_text(self, name: str, expected: str, pattern: re.Pattern[str] | None = None) -> str:
        """Text that has to be there; see `text`."""
        return self.text(name, expected, pattern=pattern) or ""

    def choice(
        self,
        name: str,
        allowed: Sequence[str],
        *,
        default: str | None = None,
        later: Sequence[str] = (),
        also: str | None = None,
        remedies: Mapping[str, str] | None = None,
    ) -> str:
        """One of the allowed words, empty where it is none of them; required without default.

        `also` says what else the caller takes, for the error line; `remedies` what to do about certain other words.
        """
        expected = listed(allowed, quoted=True) + (f", or {also}" if also else "")
        if name not in self.values:
            if default is None:
                self.missing(name, expected)
            return default or ""
        value = self.values[name]
        if isinstance(value, str) and value in allowed:
            return value
        if isinstance(value, str) and value in later:
            self.faults.add(self.path(name), "not in this version", expected=expected, found=shown(value))
            return ""
        meant = nearest(value, allowed) if isinstance(value, str) else None
        remedy = f'did you mean "{meant}"?' if meant else None
        if isinstance(value, str) and remedies and " ".join(value.split()) in remedies:
            remedy = remedies[" ".join(value.split())]
        self.faults.add(self.path(name), "unknown value", expected=expected, found=shown(value), remedy=remedy)
        return ""

    def table(self, name: str, expected: str, *, required: bool = True) -> dict[str, Any] | None:
        """The values of a table inside this one, None where there is none."""
        if name not in self.values:
            if required:
                self.missing(name, expected)
            return None
        value = self.values[name]
        if isinstance(value, dict):
            return value
        self.faults.add(self.path(name), "not a table", expected=expected, found=shown(value))
        return None

    def interval(self, name: str, bounds: Bounds, *, required: bool) -> tuple[float, float] | None:
        """A pair ``[lo, hi]`` with lo < hi, both within bounds; None where it is not there or wrong."""
        expected = f"[lo, hi] {bounds.unit} with {bounds.low:g} <= lo < hi <= {bounds.high:g}"
        if name not in self.values:
            if required:
                self.missing(name, expected)
            return None
        value = self.values[name]
        if not isinstance(value, list) or len(value) != 2:
            self.faults.add(self.path(name), "not a range", expected=expected, found=shown(value))
            return None
        low, high = (checked_number(self.faults, self.path(name, i), value[i], bounds) for i in (0, 1))
        if low >= high:
            self.faults.add(self.path(name), "empty range", expected=expected, found=f"[{low:g}, {high:g}]")
        return (low, high) if low < high else None


def checked_number(faults: Faults, key: KeyPath, value: object, bounds: Bounds) -> float:
    """A finite number within bounds as float, NaN after a fault."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        faults.add(key, "not a number", expected=bounds, found=shown(value))
        return math.nan
    if not bounds.holds(value):
        faults.add(key, "impossible value", expected=bounds, found=shown(value))
        return math.nan
    return float(value)


def checked_text(
    faults: Faults, key: KeyPath, value: object, expected: str, pattern: re.Pattern[str] | None = None
) -> str:
    """Text on one line, not blank, that matches `pattern` whole; empty after a fault."""
    if not isinstance(value, str):
        faults.add(key, "not text", expected=expected, found=shown(value))
    elif not value.strip():
        faults.add(key, "empty text", expected=expected, found=shown(value))
    elif any(unicodedata.category(character) in _LINE_BREAKING for character in value):
        faults.add(key, "text with a control character or a line break", expected=expected, found=shown(value))
    elif pattern is not None and not pattern.fullmatch(value):
        faults.add(key, "impossible value", expected=expected, found=shown(value))
    else:
        return value
    return ""
