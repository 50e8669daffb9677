"""The text of a recipe file and the values in it, with their lines."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

from opacity.errors import RecipeError, printable, problem
from opacity.recipe.positions import KeyPath, key_lines

MAX_BYTES = 64_000_000
"""Longer files are no recipes: a million nodes written out take a third of this."""

_TOML_PLACE = re.compile(r" \(at (?:line (\d+), column (\d+)|end of document)\)$")


def _refuse(where: object, what: str, **parts: Any) -> RecipeError:
    return RecipeError([problem(printable(str(where)), what, **parts)])


def read_text(path: Path) -> str:
    """The text of a file without byte-order mark.  Raises RecipeError where it is not to be had."""
    remedy = "`opacity new FORMULA` writes a recipe to fill in"
    try:
        if not path.exists():
            raise _refuse(path, "no such file", expected="a recipe", remedy=remedy)
        if not path.is_file():
            found = "a folder" if path.is_dir() else "something else"
            raise _refuse(path, "not a file", expected="a recipe", found=found)
        with path.open("rb") as stream:
            data = stream.read(MAX_BYTES + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise _refuse(path, f"cannot be read ({reason})", expected="a recipe") from error
    if len(data) > MAX_BYTES:
        raise _refuse(path, "too long for a recipe", expected=f"at most {MAX_BYTES} bytes")
    if not data.strip():
        raise _refuse(path, "empty file", expected="a recipe", remedy=remedy)
    return _decode(path, data)


def _decode(path: Path, data: bytes) -> str:
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        found = f"byte 0x{data[error.start]:02x}"
        raise _refuse(
            f"{path}:{line}", "not UTF-8 text", expected="UTF-8", found=found, remedy="save it as UTF-8"
        ) from error
    if "\0" in text:
        line = text.count("\n", 0, text.index("\0")) + 1
        raise _refuse(f"{path}:{line}", "a NUL byte", expected="text in UTF-8", remedy="save it as UTF-8")
    return text


def parse(path: Path, text: str) -> tuple[dict[str, Any], dict[KeyPath, int]]:
    """The values of a TOML text and the lines of its keys.  Raises RecipeError for what is no TOML."""
    text = text.replace("\r\n", "\n")
    try:
        return tomllib.loads(text), key_lines(text)
    except RecursionError as error:
        raise _refuse(path, "not valid TOML", found="values nested too deeply") from error
    except ValueError as error:
        raise _syntax_error(path, text, str(error)) from error


def _syntax_error(path: Path, text: str, message: str) -> RecipeError:
    """The parser's message with its place turned into file:line."""
    place = _TOML_PLACE.search(message)
    if place is None:
        return _refuse(path, f"not valid TOML: {printable(message)}")
    what = printable(message[: place.start()])
    if place[1] is None:
        line = text.rstrip().count("\n") + 1
        return _refuse(f"{path}:{line}", f"not valid TOML: {what}", found="the end of the file")
    return _refuse(f"{path}:{place[1]}", f"not valid TOML: {what} (column {place[2]})")
