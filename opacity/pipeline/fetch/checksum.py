"""Checksums beside fetched files, in the form that sha256sum reads: `<file>.sha256`."""

from __future__ import annotations

import re
from pathlib import Path

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
