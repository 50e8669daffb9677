"""Sealed files: finished parts of a table on disk, proved by a hash of everything in them.

A line that names the format, a line with the sha256 of all that follows, the length of a JSON header as 8 bytes, the
header, and the blocks one after the other.  Such a file is written whole and never changed.
"""

from __future__ import annotations

import errno
import hashlib
import json
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from opacity.errors import TableError, problem
from opacity.tables.atomic import write_atomically

_MAGIC = b"opacity shard 1\n"
ENDING = ".shard"


def write_sealed(path: Path, header: dict[str, Any], blocks: Sequence[bytes]) -> None:
    """Write a header (plain values for JSON) and blocks under one seal; the file is named after its unit.

    Raises ResourceError for what the file system refuses.
    """
    header = {**header, "unit": path.stem, "bytes": [len(block) for block in blocks]}
    text = json.dumps(header, sort_keys=True).encode("ascii")
    content = b"".join([len(text).to_bytes(8, "little"), text, *blocks])
    seal = hashlib.sha256(content).hexdigest().encode("ascii")
    write_atomically(path, b"".join([_MAGIC, seal, b"\n", content]))


def read_sealed(path: Path) -> tuple[dict[str, Any], list[bytes]]:
    """Header and blocks of a sealed file.  Raises TableError where it is missing, damaged or not one."""
    try:
        if not path.is_file():
            raise FileNotFoundError(errno.ENOENT, "no such file")
        data = path.read_bytes()
    except OSError as error:
        raise TableError(problem(path, f"the shard cannot be read ({error.strerror or error})")) from error
    begin = len(_MAGIC) + 65
    seal, content = data[len(_MAGIC) : begin], memoryview(data)[begin:]
    if not data.startswith(_MAGIC) or seal != hashlib.sha256(content).hexdigest().encode("ascii") + b"\n":
        raise TableError(problem(path, "the shard is not as it was written"))
    length = int.from_bytes(content[:8], "little")
    header = json.loads(bytes(content[8 : 8 + length]))
    if header.get("unit") != path.stem:
        raise TableError(problem(path, "the shard is another unit's", expected=path.stem, found=header.get("unit")))
    blocks, position = [], 8 + length
    for size in header["bytes"]:
        blocks.append(bytes(content[position : position + size]))
        position += size
    return header, blocks


def is_whole(path: Path) -> bool:
    """Whether a shard is there and as it was written."""
    try:
        read_sealed(path)
    except TableError:
        return False
    return True
