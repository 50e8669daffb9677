"""A file that is being downloaded: `<name>.part` until it is whole, with `<name>.part.json` to go on from there."""

from __future__ import annotations

import contextlib
import errno
import json
import os
from collections.abc import Iterator
from pathlib import Path
from types import TracebackType
from typing import Any

from opacity.errors import ResourceError, problem
from opacity.pipeline.fetch.contents import HEAD
from opacity.provenance import file_sha256
from opacity.tables.atomic import write_atomically

_REMEDIES = {
    errno.ENOSPC: "make room on the disk; the same command goes on from there",
    errno.EDQUOT: "your quota is used up: make room; the same command goes on from there",
    errno.EACCES: "choose a folder in which you may write",
    errno.EPERM: "choose a folder in which you may write",
    errno.EROFS: "choose a folder in which you may write",
    errno.EISDIR: "move the folder of this name away",
    errno.ENOTDIR: "choose a folder that is one",
}


@contextlib.contextmanager
def disk_work(path: Path) -> Iterator[None]:
    """Work on a file: what the file system refuses becomes a ResourceError with a remedy."""
    try:
        yield
    except OSError as error:
        remedy = _REMEDIES.get(error.errno or 0)
        raise ResourceError(problem(path, f"cannot be written ({error.strerror or error})", remedy=remedy)) from error


def part_of(path: Path) -> Path:
    """The name of a file while it is downloaded."""
    return path.with_name(path.name + ".part")


def part_length(path: Path, url: str) -> int:
    """Bytes of an earlier attempt at the same URL, 0 where there are none."""
    try:
        return part_of(path).stat().st_size if _noted(path).get("url") == url else 0
    except OSError:
        return 0


def _notes_of(path: Path) -> Path:
    return path.with_name(path.name + ".part.json")


def _noted(path: Path) -> dict[str, Any]:
    try:
        value = json.loads(_notes_of(path).read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return {}
    return value if isinstance(value, dict) else {}


class PartFile:
    """The bytes so far of one download, and what the server said of the file they belong to.

    `size` is the whole file's (None where it is not known), `validator` the entity tag or time of
    change that names this state of it.  Use it in a `with` statement; only `finish` gives a final name.
    """

    def __init__(self, path: Path, url: str) -> None:
        self.path, self.url = path, url
        self.length = 0
        self.size: int | None = None
        self.validator: str | None = None
        with disk_work(path):
            path.parent.mkdir(parents=True, exist_ok=True)
            self._stream = open(part_of(path), "a+b", buffering=0)  # noqa: SIM115 - closed by __exit__
        try:
            self._lock()
            self._recall()
        except BaseException:
            self._stream.close()
            raise

    def __enter__(self) -> PartFile:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        with contextlib.suppress(OSError):
            self._stream.close()
        if self.length == 0 and kind is not None:
            self._unlink()

    def _lock(self) -> None:
        try:
            import fcntl
        except ImportError:  # not on every system
            return
        try:
            fcntl.flock(self._stream, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError as error:
            remedy = "wait for it, or stop it"
            raise ResourceError(problem(self.path, "another process is downloading it", remedy=remedy)) from error
        except OSError:
            pass  # a file system without locks

    def _recall(self) -> None:
        notes = _noted(self.path)
        self.length = self._stream.seek(0, os.SEEK_END)
        size, validator = notes.get("size"), notes.get("validator")
        if notes.get("url") == self.url:
            self.size = size if type(size) is int else None
            self.validator = validator if isinstance(validator, str) and validator.isprintable() else None
        if self.length and notes.get("url") != self.url:
            self.restart(None, None)

    @property
    def complete(self) -> bool:
        """Whether all bytes are known to be there."""
        return self.size is not None and self.length == self.size > 0

    def restart(self, size: int | None, validator: str | None) -> None:
        """Begin at the first byte, of a file of this size and validator."""
        with disk_work(self.path):
            self._stream.truncate(0)
        self.length, self.size, self.validator = 0, size, validator
        notes = {"url": self.url, "size": size, "validator": validator}
        write_atomically(_notes_of(self.path), json.dumps(notes).encode())

    def append(self, data: bytes) -> None:
        """Add bytes at the end."""
        with disk_work(self.path):
            rest = memoryview(data)
            while rest:
                count = os.write(self._stream.fileno(), rest)
                self.length += count
                rest = rest[count:]

    def head(self) -> bytes:
        """The first bytes."""
        with disk_work(self.path):
            self._stream.seek(0)
            return self._stream.read(HEAD)

    def sha256(self) -> str:
        """Hexadecimal sha256 of all bytes, as they lie on disk."""
        with disk_work(self.path):
            os.fsync(self._stream.fileno())
        return file_sha256(part_of(self.path))

    def finish(self) -> None:
        """Give the file its final name."""
        with disk_work(self.path):
            os.fsync(self._stream.fileno())
            os.replace(part_of(self.path), self.path)
            sync_folder(self.path.parent)
            _notes_of(self.path).unlink(missing_ok=True)

    def discard(self) -> None:
        """Remove what cannot be used."""
        self.length = 0
        self._unlink()

    def _unlink(self) -> None:
        for name in (part_of(self.path), _notes_of(self.path)):
            with contextlib.suppress(OSError):
                name.unlink()


def sync_folder(folder: Path) -> None:
    """Make renames in a folder last, where the file system can."""
    if os.name == "nt":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        with contextlib.suppress(OSError):
            os.fsync(descriptor)
    finally:
        os.close(descriptor)
