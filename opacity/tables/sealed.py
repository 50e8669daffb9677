"""Sealed files: finished parts of a table on disk, each of whose bytes is proved.

A line that names the format, a line with the sha256 of what follows up to the blocks, the length of a JSON header as 8
bytes, the header, and the blocks one after the other, whose crc32 are in the header.  Such a file is written whole and
never changed.
"""

from __future__ import annotations

import errno
import hashlib
import json
import os
import zlib
from collections.abc import Sequence
from pathlib import Path
from typing import Any, BinaryIO

from opacity.errors import TableError, problem
from opacity.tables.atomic import renamed_when_done, write_all

_MAGIC = b"opacity shard 2\n"
_BEGIN = len(_MAGIC) + 65
_LONGEST_HEADER = 1 << 30
ENDING = ".shard"


def write_sealed(path: Path, header: dict[str, Any], blocks: Sequence[Any]) -> None:
    """Write a header (plain values for JSON) and blocks of bytes under one seal; the file is named after its unit.

    It is neither synced nor read back: a file that a crash or a bad disk spoils is found out by its seal when it is
    read, and made again.  Raises ResourceError for what the file system refuses.
    """
    sizes, sums = [len(block) for block in blocks], [zlib.crc32(block) for block in blocks]
    header = {**header, "unit": path.stem, "bytes": sizes, "crc32": sums}
    text = json.dumps(header, sort_keys=True).encode("ascii")
    sealed = b"".join([len(text).to_bytes(8, "little"), text])
    seal = hashlib.sha256(sealed).hexdigest().encode("ascii")
    with renamed_when_done(path, lasting=False) as temporary:
        write_all(temporary, [b"".join([_MAGIC, seal, b"\n", sealed]), *blocks], lasting=False)


def read_sealed(path: Path) -> tuple[dict[str, Any], list[memoryview]]:
    """Header and blocks of a sealed file.  Raises TableError where it is missing, damaged or not one."""
    with _opened(path) as stream:
        header = _header(path, stream)
        data = memoryview(_read(path, stream, sum(header["bytes"])))
    blocks, position = [], 0
    for size, expected in zip(header["bytes"], header["crc32"], strict=True):
        blocks.append(data[position : position + size])
        position += size
        if zlib.crc32(blocks[-1]) != expected:
            raise _damaged(path)
    return header, blocks


def read_header(path: Path) -> dict[str, Any]:
    """The header of a sealed file, proved by its seal, the blocks not.  Raises TableError as `read_sealed` does."""
    with _opened(path) as stream:
        return _header(path, stream)


def is_whole(path: Path) -> bool:
    """Whether a shard is there and as it was written."""
    try:
        read_sealed(path)
    except TableError:
        return False
    return True


def _opened(path: Path) -> BinaryIO:
    try:
        if not path.is_file():
            raise FileNotFoundError(errno.ENOENT, "no such file")
        return open(path, "rb", buffering=0)
    except OSError as error:
        raise _unreadable(path, error) from error


def _header(path: Path, stream: BinaryIO) -> dict[str, Any]:
    """The header, and with it where the file must end."""
    begin = _read(path, stream, _BEGIN + 8)
    length = int.from_bytes(begin[_BEGIN:], "little")
    if not begin.startswith(_MAGIC) or not 0 < length < min(_LONGEST_HEADER, os.fstat(stream.fileno()).st_size):
        raise _damaged(path)
    text = _read(path, stream, length)
    seal = hashlib.sha256(begin[_BEGIN:] + text).hexdigest().encode("ascii") + b"\n"
    if begin[len(_MAGIC) : _BEGIN] != seal:
        raise _damaged(path)
    header: dict[str, Any] = json.loads(text)
    if header["unit"] != path.stem:
        raise TableError(problem(path, "the shard is another unit's", expected=path.stem, found=header["unit"]))
    if os.fstat(stream.fileno()).st_size != len(begin) + length + sum(header["bytes"]):
        raise _damaged(path)
    return header


def _read(path: Path, stream: BinaryIO, size: int) -> bytes:
    """So many bytes; TableError where the file ends before."""
    pieces: list[bytes] = []
    left = size
    try:
        while left and (piece := stream.read(left)):
            pieces.append(piece)
            left -= len(piece)
    except OSError as error:
        raise _unreadable(path, error) from error
    if left:
        raise _damaged(path)
    return pieces[0] if len(pieces) == 1 else b"".join(pieces)


def _damaged(path: Path) -> TableError:
    return TableError(problem(path, "the shard is not as it was written"))


def _unreadable(path: Path, error: OSError) -> TableError:
    return TableError(problem(path, f"the shard cannot be read ({error.strerror or error})"))
