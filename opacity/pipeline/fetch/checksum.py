"""Checksums beside fetched files, in the form that sha256sum reads: `<file>.sha256`."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from opacity.errors import LineListError, problem
from opacity.recipe.line_lists import full_name
from opacity.tables.atomic import write_atomically

_LINE = re.compile(r"([0-9a-f]{64})  ([^\n]+)\n(?:# ([^\n]*)\n)?")


def beside(path: Path) -> Path:
    """The file that holds another file's checksum."""
    return path.with_name(path.name + ".sha256")


def record_sha256(path: Path, digest: str, comment: str = "") -> None:
    """Write a file's checksum beside it; a comment follows on a line that sha256sum passes over."""
    text = f"{digest}  {path.name}\n" + (f"# {comment}\n" if comment else "")
    write_atomically(beside(path), text.encode())


def recorded_sha256(path: Path) -> tuple[str | None, str]:
    """The checksum and the comment recorded beside a file; None where there is no such record."""
    try:
        found = _LINE.fullmatch(beside(path).read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return None, ""
    return (found[1], found[3] or "") if found is not None and found[2] == path.name else (None, "")


@dataclass(frozen=True)
class Promise:
    """What a file's sha256 has to be, and who says so."""

    sha256: str
    in_recipe: bool

    def broken(self, found: str) -> str:
        """What is wrong with a file of another sha256."""
        origin = "of the recipe" if self.in_recipe else "recorded beside it"
        return f"not the sha256 {origin}; expected {self.sha256}, found {found}"


def promise_of(path: Path, stated: str | None) -> Promise | None:
    """The sha256 that the recipe states, else the one recorded beside the file; None where nobody says any."""
    if stated is not None:
        return Promise(stated, True)
    recorded, _ = recorded_sha256(path)
    return None if recorded is None else Promise(recorded, False)


def refuse_other_content(path: Path, stated: str | None, found: str) -> None:
    """Raise LineListError where a file of the sha256 `found` is not the one that recipe or record promise."""
    promise = promise_of(path, stated)
    if promise is not None and found != promise.sha256:
        record = "sha256 in the recipe" if promise.in_recipe else beside(path).name
        remedy = f"move it away and fetch it again, or, if the file is meant, remove {record}"
        raise LineListError(problem(full_name(path), promise.broken(found), remedy=remedy))
