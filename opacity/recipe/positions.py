"""Lines of the keys of a TOML text: the standard parser keeps none, and an error has to name one.

The scanner takes text that the parser has accepted, with LF line ends, and walks through keys and
values without interpreting the values.  A key path is a tuple of names and, inside arrays, indices
counted from 0: ``("line_list", 1, "files", 0)``.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right

KeyPath = tuple[str | int, ...]

_BLANK = re.compile(r"(?:[ \t\n]+|#[^\n]*)*")
_INLINE_BLANK = re.compile(r"[ \t]*")
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
_BARE_VALUE = re.compile(r"[^,\]}#\n]*")
# A multi-line string may end in one or two quotes of its own before the closing three.
STRING = re.compile(
    r'"""(?:[^\\]|\\.)*?"""(?:"{0,2})'
    r"|'''.*?'''(?:'{0,2})"
    r'|"(?:[^"\\\n]|\\.)*"'
    r"|'[^'\n]*'",
    re.DOTALL,
)


def key_lines(text: str) -> dict[KeyPath, int]:
    """The line, counted from 1, of each key and table of a valid TOML text with LF line ends.

    Elements of arrays are there only where their line is not that of the nearest parent, so that
    a long array on few lines costs nothing: look up with `line_of`.
    """
    return _Scanner(text).scan()


def line_of(lines: dict[KeyPath, int], key: KeyPath) -> int:
    """The line of a key, or of its nearest known parent; 1 where there is none."""
    for length in range(len(key), 0, -1):
        line = lines.get(key[:length])
        if line is not None:
            return line
    return 1


class _Scanner:
    def __init__(self, text: str) -> None:
        self._text = text
        self._at = 0
        self._starts = [0, *(match.end() for match in re.finditer("\n", text))]
        self._lines: dict[KeyPath, int] = {}
        self._array_tables: dict[KeyPath, int] = {}

    def scan(self) -> dict[KeyPath, int]:
        table: KeyPath = ()
        self._skip(_BLANK)
        while self._at < len(self._text):
            if self._peek() == "[":
                table = self._header()
            else:
                self._key_value(table)
            self._skip(_BLANK)
        return self._lines

    def _peek(self) -> str:
        return self._text[self._at : self._at + 1]

    def _skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self._text, self._at)
        if match is None:
            # Only text that the parser refused gets here; the end of the text stops every loop.
            self._at = len(self._text)
            return ""
        self._at = match.end()
        return match.group()

    def _line(self) -> int:
        return bisect_right(self._starts, self._at)

    def _header(self) -> KeyPath:
        line = self._line()
        is_array = self._text.startswith("[[", self._at)
        self._at += 2 if is_array else 1
        *parents, last = self._dotted_key()
        self._at += 2 if is_array else 1
        path: KeyPath = ()
        for name in parents:
            path = self._newest((*path, name))
            self._lines.setdefault(path, line)
        path = (*path, last)
        if is_array:
            index = self._array_tables.get(path, -1) + 1
            self._array_tables[path] = index
            self._lines.setdefault(path, line)
            path = (*path, index)
        self._lines[path] = line
        return path

    def _newest(self, path: KeyPath) -> KeyPath:
        """The path itself, or the last element of the array of tables that it names."""
        index = self._array_tables.get(path)
        return path if index is None else (*path, index)

    def _dotted_key(self) -> list[str]:
        names = []
        while True:
            self._skip(_INLINE_BLANK)
            names.append(self._key_part())
            self._skip(_INLINE_BLANK)
            if self._peek() != ".":
                return names
            self._at += 1

    def _key_part(self) -> str:
        if self._peek() in ('"', "'"):
            quoted = self._skip(STRING)
            return str(tomllib.loads(f"key = {quoted}")["key"]) if quoted else ""
        return self._skip(_BARE_KEY)

    def _key_value(self, table: KeyPath) -> None:
        line = self._line()
        path = table
        for name in self._dotted_key():
            path = (*path, name)
            self._lines.setdefault(path, line)
        self._at += 1  # the equals sign
        self._skip(_INLINE_BLANK)
        self._value(path, line)

    def _value(self, path: KeyPath, line: int) -> None:
        first = self._peek()
        if first == "[":
            self._array(path, line)
        elif first == "{":
            self._inline_table(path)
        elif first in ('"', "'"):
            self._skip(STRING)
        else:
            self._skip(_BARE_VALUE)

    def _array(self, path: KeyPath, parent_line: int) -> None:
        self._at += 1
        index = 0
        self._skip(_BLANK)
        while self._peek() not in ("]", ""):
            line = self._line()
            element = (*path, index)
            if line != parent_line:
                self._lines[element] = line
            self._value(element, line)
            index += 1
            self._skip_separator()
        self._at += 1

    def _inline_table(self, path: KeyPath) -> None:
        self._at += 1
        self._skip(_BLANK)
        while self._peek() not in ("}", ""):
            self._key_value(path)
            self._skip_separator()
        self._at += 1

    def _skip_separator(self) -> None:
        self._skip(_BLANK)
        if self._peek() == ",":
            self._at += 1
        self._skip(_BLANK)
