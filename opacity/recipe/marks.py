"""What the comments of a recipe say of its values: undecided, or from memory.

``# DECIDE: which gas`` marks what whoever fills in a recipe has still to decide; ``# ... from memory`` behind a value
says that it has no source.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from dataclasses import dataclass

from opacity.recipe.positions import STRING, KeyPath, key_lines

DECIDE = re.compile(r"^#?\s*DECIDE\b:?|\bDECIDE:", re.MULTILINE)
"""The word, in a comment, for what is still to be decided."""

_COMMENT = re.compile(STRING.pattern + r"|(?P<comment>#[^\n]*)", re.DOTALL)
_KEY_IN_COMMENT = re.compile(r"#\s*([A-Za-z0-9_-]+)\s*=")


@dataclass(frozen=True)
class Comment:
    """A comment with its line and the key that it is about: the one whose value stands before it on the line, or
    that begins above.  `alone` tells one that has its line for itself; a key that is commented out is named then.
    """

    line: int
    text: str
    key: KeyPath
    alone: bool


def comments_of(text: str) -> tuple[Comment, ...]:
    """All comments of a valid TOML text, in its order."""
    text = text.replace("\r\n", "\n")
    by_line: dict[int, KeyPath] = {}
    for key, line in key_lines(text).items():
        if line not in by_line or len(key) < len(by_line[line]):
            by_line[line] = key
    rows, found = sorted(by_line), []
    line, counted = 1, 0
    for match in _COMMENT.finditer(text):
        if match["comment"] is None:
            continue
        start = match.start()
        line, counted = line + text.count("\n", counted, start), start
        above = bisect_right(rows, line)
        key = by_line[rows[above - 1]] if above else ()
        alone = not text[text.rfind("\n", 0, start) + 1 : start].strip()
        if alone:
            named = _KEY_IN_COMMENT.match(match["comment"])
            section = _section(key)
            key = (*section, named[1]) if named else section
        found.append(Comment(line, match["comment"][1:].strip(), key, alone))
    return tuple(found)


def _section(key: KeyPath) -> KeyPath:
    """The table that a key stands in, as far as a comment needs it: without the key's own name."""
    if len(key) > 1 and isinstance(key[1], int):
        return key[:2]
    return key[:1]


def undecided(text: str) -> tuple[tuple[int, KeyPath, str], ...]:
    """Line, key and words of all that is marked as undecided; nothing where the text is no TOML."""
    marked: list[tuple[int, KeyPath, str]] = []
    if "DECIDE" not in text or not _is_toml(text):
        return ()
    for one in comments_of(text):
        mark = DECIDE.search(one.text)
        if mark is not None:
            marked.append((one.line, one.key, one.text[mark.end() :].strip()))
    return tuple(marked)


def undecided_warnings(text: str) -> tuple[str, ...]:
    """What to warn of where a recipe is used with decisions still marked."""
    lines = [str(line) for line, _, _ in undecided(text)]
    if not lines:
        return ()
    return (f"still marked DECIDE in the recipe: line{'s' * (len(lines) > 1)} {', '.join(lines)}",)


def _is_toml(text: str) -> bool:
    try:
        tomllib.loads(text.replace("\r\n", "\n"))
    except ValueError:
        return False
    return True
