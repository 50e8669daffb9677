"""The faults of a recipe, gathered so that all of them are reported at once."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence

from opacity.errors import OpacityError, printable, problem
from opacity.recipe.model import Recipe
from opacity.recipe.positions import KeyPath, key_lines, line_of

_LONGEST_SHOWN = 60


class Faults:
    """Problem lines of one recipe file, each with the line of its key."""

    def __init__(self, file: str, lines: dict[KeyPath, int]) -> None:
        self._file = printable(file)
        self._lines = lines
        self._problems: list[tuple[int, str]] = []

    def __len__(self) -> int:
        return len(self._problems)

    def add(
        self,
        key: KeyPath,
        what: str,
        *,
        expected: object = None,
        found: object = None,
        remedy: str | None = None,
    ) -> None:
        """Add one fault of `key`; a key that is not in the file gets its nearest parent's line."""
        line = line_of(self._lines, key)
        where = f"{self._file}:{line}: {dotted(key)}"
        self._problems.append((line, problem(where, what, expected=expected, found=found, remedy=remedy)))

    def add_error(self, key: KeyPath, error: OpacityError) -> None:
        """Add the faults, one a line, that another layer found, with `key` in place of the place that each names."""
        for line in str(error).split("\n"):
            self.add(key, line.partition(": ")[2])

    def problems(self) -> tuple[str, ...]:
        """All faults so far as lines, in the order of the file."""
        return tuple(text for _, text in sorted(self._problems, key=lambda pair: pair[0]))


def faults_of(recipe: Recipe) -> Faults:
    """A collection for what is wrong with a recipe that has been read: its choices against the files it names."""
    return Faults(str(recipe.path), key_lines(recipe.text.replace("\r\n", "\n")))


def dotted(key: KeyPath) -> str:
    """A key path as it is written in messages: ``line_list[1].files``, indices from 0."""
    text = ""
    for part in key:
        if isinstance(part, int):
            text += f"[{part}]"
        else:
            plain = part.replace("_", "").replace("-", "").isalnum() and part.isascii()
            name = part if plain else f'"{printable(part)}"'
            text += f".{name}" if text else name
    return text


def shown(value: object) -> str:
    """A value of a recipe as an error line shows it: short and on one line."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        text = printable(value)
        return f'"{text}"' if len(text) <= _LONGEST_SHOWN else f'"{text[:_LONGEST_SHOWN]}..."'
    if isinstance(value, dict):
        return "a table" if value else "an empty table"
    if isinstance(value, list):
        return f"a list of {len(value)}" if value else "an empty list"
    if isinstance(value, int) and value.bit_length() > 64:
        return "a whole number of more than 19 digits"
    return printable(str(value))


def nearest(word: str, allowed: Iterable[str]) -> str | None:
    """The allowed word that `word` was probably meant to be, whatever its case."""
    by_lower = {name.lower(): name for name in allowed}
    found = difflib.get_close_matches(word.lower()[:_LONGEST_SHOWN], by_lower, n=1)
    return by_lower[found[0]] if found else None


def listed(words: Sequence[str], *, quoted: bool = False) -> str:
    """Words as a phrase: ``a, b or c``."""
    names = [f'"{word}"' for word in words] if quoted else list(words)
    if len(names) < 2:
        return "".join(names)
    return f"{', '.join(names[:-1])} or {names[-1]}"
