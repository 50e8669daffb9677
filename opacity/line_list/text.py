"""Text of a line list, plain or compressed, in chunks of whole lines, so that no list is held in memory."""

from __future__ import annotations

import bz2
import contextlib
import gzip
import importlib
import stat
import zlib
from collections.abc import Iterator
from contextlib import AbstractContextManager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from opacity.errors import LineListError, one_line, problem
from opacity.kernels.text import count_newlines, find_lines

CHUNK = 4 << 20
LONGEST_LINE = 4 << 20
_BLOCK = 1 << 18
WORTH_A_SECOND_CORE = 1 << 20
"""Smaller .bz2 files (bytes) are left to the standard library."""


@dataclass(frozen=True)
class TextChunk:
    """Lines of a text that are not blank: line i is `buffer[starts[i]:stops[i]]`, without its line end.

    `line` holds the line numbers in the file, `plain` whether a line is printable ASCII throughout; all (n,).
    `read` is how many bytes of the file, compressed or not, had been read by the end of the chunk.
    """

    buffer: NDArray[np.uint8]
    starts: NDArray[np.int64]
    stops: NDArray[np.int64]
    line: NDArray[np.int64]
    plain: NDArray[np.bool_]
    read: int = 0

    def __len__(self) -> int:
        return int(self.starts.size)

    def record(self, i: int) -> bytes:
        """One line."""
        return self.buffer[self.starts[i] : self.stops[i]].tobytes()


@dataclass(frozen=True)
class RawText:
    """Bytes of whole lines: `newlines` of them ended, the first with line number `first`; `read` as in `TextChunk`."""

    buffer: NDArray[np.uint8]
    first: int
    newlines: int
    read: int

    def lines(self) -> TextChunk:
        """The lines that are not blank."""
        room = self.newlines + 1
        starts, stops, line = (np.empty(room, dtype=np.int64) for _ in range(3))
        plain = np.empty(room, dtype=np.bool_)
        count = find_lines(self.buffer, self.first, starts, stops, line, plain)
        return TextChunk(self.buffer, starts[:count], stops[:count], line[:count], plain[:count], self.read)


def read_chunks(path: Path, size: int = CHUNK) -> Iterator[TextChunk]:
    """The lines of a file, decompressed by its ending (.gz, .bz2), in chunks of about `size` bytes.

    Raises LineListError naming the file where it cannot be read, is damaged, or is no text of lines.
    """
    return (raw.lines() for raw in read_raw(path, size))


def read_raw(path: Path, size: int = CHUNK) -> Iterator[RawText]:
    """The same bytes with the lines still to be found, so that several threads can do that."""
    number = 1
    for block, read in _whole_lines(path, size):
        buffer = np.frombuffer(block, dtype=np.uint8)
        newlines = count_newlines(buffer)
        yield RawText(buffer, number, newlines, read)
        number += newlines


def read_text(path: Path) -> bytes:
    """All bytes of a small file, decompressed by its ending.  Raises LineListError naming the file."""
    return b"".join(block for block, _ in _blocks(path, CHUNK))


def _whole_lines(path: Path, size: int) -> Iterator[tuple[bytes | memoryview, int]]:
    rest, read = b"", 0
    for block, read in _blocks(path, size):
        cut = block.rfind(b"\n") + 1
        if not cut:
            rest += block
            if len(rest) > max(size, LONGEST_LINE):
                raise LineListError(problem(path, f"no line end in {len(rest)} bytes", expected="a text of lines"))
            continue
        # A view where nothing is left over from before, else one copy.
        whole = memoryview(block)[:cut]
        yield b"".join((rest, whole)) if rest else whole, read
        rest = block[cut:]
    if rest:
        yield rest, read


def _blocks(path: Path, size: int) -> Iterator[tuple[bytes, int]]:
    """Blocks of decompressed bytes, and how far into the file they go; every way of failing becomes a LineListError."""
    suffix = path.suffix.lower()
    try:
        refuse_no_file(path)
        with open(path, "rb") as file, _opened(path, file, suffix) as reader:
            while block := reader.read(size):
                yield block, reader.tell() if suffix == ".bz2" else file.tell()
    except (EOFError, zlib.error, gzip.BadGzipFile, ValueError, RuntimeError) as error:
        raise LineListError(
            problem(path, f"damaged or cut {path.suffix} file ({one_line(error)})", remedy="fetch the file again")
        ) from error
    except OSError as error:
        reason = error.strerror or f"damaged {path.suffix} file ({one_line(error)})"
        raise LineListError(problem(path, f"cannot be read ({reason})")) from error


def refuse_no_file(path: Path) -> None:
    """Raise LineListError for what is there and is no regular file: a pipe would be waited for without end."""
    mode = path.stat().st_mode
    if not stat.S_ISREG(mode) and not stat.S_ISDIR(mode):
        raise LineListError(problem(path, "not a file", expected="a regular file", remedy="write its content to one"))


def _opened(path: Path, file: BinaryIO, suffix: str) -> AbstractContextManager[Any]:
    if suffix == ".gz":
        return gzip.GzipFile(fileobj=file)
    if suffix != ".bz2":
        return contextlib.nullcontext(file)
    if path.stat().st_size < WORTH_A_SECOND_CORE:
        return contextlib.nullcontext(_Bunzip2(file))
    try:
        rapidgzip = importlib.import_module("rapidgzip")
    except ImportError:
        return contextlib.nullcontext(_Bunzip2(file))
    return contextlib.closing(_ParallelBunzip2(rapidgzip, path))


class _ParallelBunzip2:
    """bz2 by the package rapidgzip (the bz2 extra), on two cores; it must be closed, or it aborts at exit."""

    def __init__(self, rapidgzip: Any, path: Path) -> None:
        self._size = path.stat().st_size
        self._file = rapidgzip.IndexedBzip2File(str(path), parallelization=2)

    def read(self, size: int) -> bytes:
        """Up to `size` bytes, none at the end.  Raises EOFError where bytes are left over that are no bz2."""
        block = bytes(self._file.read(size))
        # The package passes over what follows the last stream that it understands, a damaged stream included.
        if not block and max(self._file.block_offsets()) != 8 * self._size:
            raise EOFError("bytes behind its end that are no bz2")
        return block

    def tell(self) -> int:
        """Bytes of the file that have been decompressed, about."""
        return int(self._file.tell_compressed()) // 8

    def close(self) -> None:
        """Close the reader."""
        self._file.close()


class _Bunzip2:
    """All streams of a bz2 file; the standard library's BZ2File passes over damage behind the first."""

    def __init__(self, file: BinaryIO) -> None:
        self._file = file
        self._stream: Any = None

    def tell(self) -> int:
        """Bytes of the file that have been read."""
        return self._file.tell()

    def read(self, size: int) -> bytes:
        """Up to `size` bytes, none at the end.  Raises EOFError where the file is cut."""
        parts, room = [], size
        while room > 0:
            if self._stream is None or self._stream.eof:
                rest = self._stream.unused_data if self._stream is not None else b""
                rest = rest or self._file.read(_BLOCK)
                if not rest:
                    break
                self._stream = bz2.BZ2Decompressor()
                self._stream.decompress(rest, 0)
                continue
            data = b""
            if self._stream.needs_input:
                data = self._file.read(_BLOCK)
                if not data:
                    raise EOFError("it ends before its end mark")
            part = self._stream.decompress(data, room)
            parts.append(part)
            room -= len(part)
        return b"".join(parts)
