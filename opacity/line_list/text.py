"""Text of a line list, plain or compressed, as records with their line numbers."""

from __future__ import annotations

import bz2
import gzip
import zlib
from pathlib import Path

from opacity.errors import LineListError, problem


def read_text(path: Path) -> bytes:
    """All bytes of a file, decompressed by its ending (.gz, .bz2).  Raises LineListError naming the file."""
    try:
        data = path.read_bytes()
        if path.suffix.lower() == ".gz":
            return gzip.decompress(data)
        if path.suffix.lower() == ".bz2":
            return _bunzip2(data)
        return data
    except (EOFError, zlib.error, gzip.BadGzipFile, ValueError) as error:
        raise LineListError(
            problem(path, f"damaged or cut {path.suffix} file ({error})", remedy="fetch the file again")
        ) from error
    except OSError as error:
        reason = error.strerror or f"damaged {path.suffix} file ({error})"
        raise LineListError(problem(path, f"cannot be read ({reason})")) from error


def _bunzip2(data: bytes) -> bytes:
    """All streams of a bz2 file; the standard library's `bz2.decompress` passes over damage behind the first."""
    parts = []
    while data:
        stream = bz2.BZ2Decompressor()
        parts.append(stream.decompress(data))
        if not stream.eof:
            raise EOFError("it ends before its end mark")
        data = stream.unused_data
    return b"".join(parts)


def split_records(data: bytes) -> tuple[list[bytes], list[int]]:
    """Records without their line ends (LF or CRLF) and their line numbers; blank lines are passed over."""
    records, numbers = [], []
    for number, line in enumerate(data.split(b"\n"), start=1):
        if line.strip():
            records.append(line.removesuffix(b"\r"))
            numbers.append(number)
    return records, numbers
