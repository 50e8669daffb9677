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
        if path.suffix == ".gz":
            return gzip.decompress(data)
        if path.suffix == ".bz2":
            return bz2.decompress(data)
        return data
    except (EOFError, zlib.error, gzip.BadGzipFile, ValueError) as error:
        raise LineListError(
            problem(path, f"damaged or cut {path.suffix} file ({error})", remedy="fetch the file again")
        ) from error
    except OSError as error:
        reason = error.strerror or f"damaged {path.suffix} file ({error})"
        raise LineListError(problem(path, f"cannot be read ({reason})")) from error


def split_records(data: bytes) -> tuple[list[bytes], list[int]]:
    """Records without their line ends (LF or CRLF) and their line numbers; blank lines are passed over."""
    records, numbers = [], []
    for number, line in enumerate(data.split(b"\n"), start=1):
        if line.strip():
            records.append(line.removesuffix(b"\r"))
            numbers.append(number)
    return records, numbers
