"""Whether the first bytes of a file are those of what its name promises."""

from __future__ import annotations

HEAD = 512
"""Bytes of a file's beginning that are looked at."""

_MAGIC = {
    ".bz2": (b"BZh", "bzip2"),
    ".gz": (b"\x1f\x8b", "gzip"),
    ".xz": (b"\xfd7zXZ\x00", "xz"),
    ".zip": (b"PK", "zip"),
}
COMPRESSED = tuple(_MAGIC)
_PAGES = (b"<!doctype", b"<html", b"<head", b"<?xml", b"<body")


def wrong_content(name: str, head: bytes) -> str | None:
    """What is wrong with a file called `name` that begins with `head`, None if nothing can be seen."""
    if not head:
        return "an empty file"
    is_page = head.removeprefix(b"\xef\xbb\xbf").lstrip().lower().startswith(_PAGES)
    for ending, (magic, words) in _MAGIC.items():
        if name.lower().endswith(ending) and not head.startswith(magic):
            return f"{'a web page' if is_page else 'something else'} instead of a {words} file"
    return "a web page instead of a file" if is_page else None
