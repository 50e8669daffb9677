"""Values of a recipe that have no source but somebody's memory; only a recipe that accepts them is built.

They are found by what is said of them: by a key `source` or `reference`, by the set of chi factors chosen, or by a
comment behind a value on its line.
"""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from opacity.chi_factors import CHI_FACTORS
from opacity.errors import RecipeError, printable
from opacity.recipe.faults import Faults, dotted, faults_of
from opacity.recipe.marks import comments_of
from opacity.recipe.model import Recipe
from opacity.recipe.positions import KeyPath, key_lines, line_of

WORDS = re.compile(r"from[\s-]+memory", re.IGNORECASE)
ACCEPT = "accept_unverified"
_SOURCES = ("source", "reference")


@dataclass(frozen=True)
class Unverified:
    """A value from memory: its key, its line in the recipe, and what is said of it."""

    key: KeyPath
    line: int
    says: str

    @property
    def name(self) -> str:
        """The value's key as it is written in messages, without that of its source."""
        return dotted(self.key[:-1] if self.key[-1] in _SOURCES else self.key)


def unverified_values(text: str) -> tuple[Unverified, ...]:
    """All values from memory of a recipe's text, in the order of its lines; none where the text is no TOML."""
    if not WORDS.search(text) and not any(name in text for name in CHI_FACTORS):
        return ()  # a recipe may have a million nodes
    text = text.replace("\r\n", "\n")
    try:
        document = tomllib.loads(text)
    except ValueError:
        return ()
    lines = key_lines(text)
    found = {key: Unverified(key, line_of(lines, key), says) for key, says in _said(document, ())}
    for comment in comments_of(text):
        if comment.key not in ((), (ACCEPT,)) and not comment.alone and WORDS.search(comment.text):
            found.setdefault(comment.key, Unverified(comment.key, comment.line, comment.text))
    return tuple(sorted(found.values(), key=lambda one: one.line))


def _said(value: Any, key: KeyPath) -> Iterator[tuple[KeyPath, str]]:
    """Keys that say that something is from memory, and their words."""
    if isinstance(value, dict):
        for name, inner in value.items():
            yield from _said(inner, (*key, name))
    elif isinstance(value, list):
        for index, inner in enumerate(value):
            yield from _said(inner, (*key, index))
    elif isinstance(value, str) and key:
        says = CHI_FACTORS[value].source if key[-1] == "chi" and value in CHI_FACTORS else value
        if (key[-1] in _SOURCES or says is not value) and WORDS.search(says):
            yield key, says


def add_unverified(faults: Faults, text: str) -> None:
    """Add a line for each value from memory that a recipe has and does not accept."""
    for one in unverified_values(text):
        faults.add(
            one.key,
            f"{one.name} is from memory" if one.name != dotted(one.key) else "a value from memory",
            expected="a published source",
            found=f'"{printable(one.says)}"',
            remedy=f"look it up, or put {ACCEPT} = true at the top of the recipe",
        )


def refuse_unverified(recipe: Recipe) -> None:
    """Raise RecipeError, a line for each, where values from memory are not accepted."""
    if recipe.accept_unverified:
        return
    faults = faults_of(recipe)
    add_unverified(faults, recipe.text)
    if faults.problems():
        raise RecipeError(faults.problems())


def accepted(recipe: Recipe) -> list[dict[str, Any]]:
    """The values from memory that a recipe accepts, as plain values for JSON: key, line and what is said of each."""
    if not recipe.accept_unverified:
        return []
    return [{"key": one.name, "line": one.line, "says": one.says} for one in unverified_values(recipe.text)]


def accepted_in_words(values: list[dict[str, Any]]) -> str:
    """The same as one phrase."""
    return ", ".join(f"{one['key']} ({one['says']})" for one in values)
