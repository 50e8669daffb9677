"""The only way in which a file gets its final name: written whole beside it, read back, then renamed."""

from __future__ import annotations

import contextlib
import errno
import functools
import hashlib
import os
import platform
import re
import secrets
import time
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path
from typing import Any

from opacity.errors import InputError, ResourceError, problem

_PIECE = 1 << 24
_TEMPORARY = re.compile(r"\.opacity-([0-9a-f]{8})-(\d{1,10})-[0-9a-f]{16}\.part")
_SECONDS_A_WEEK = 7 * 24 * 3600.0

_REMEDIES = {
    errno.ENOSPC: "make room on the disk or choose another folder",
    errno.EDQUOT: "your quota is used up: make room or choose another folder",
    errno.EACCES: "choose a folder in which you may write",
    errno.EPERM: "choose a folder in which you may write",
    errno.EROFS: "choose a folder in which you may write",
    errno.ENOENT: "create the folder first",
    errno.ENOTDIR: "choose a folder that is one",
    errno.EISDIR: "choose a name that no folder has",
    errno.ENAMETOOLONG: "choose a shorter name",
    errno.EIO: "the disk or the network file system failed",
}


def write_atomically(path: Path, data: bytes, check: Callable[[Path], None] | None = None) -> Path:
    """Write `data` so that `path` is at every moment absent, what it was before, or complete.

    The bytes go to a temporary name in the same folder, are synced, read back and compared;
    `check`, if given, is called with the temporary name and may raise.  Only then is the file
    renamed.  The temporary file is removed on every failure.  Raises ResourceError for all that
    the file system refuses, InputError for a path that can't be one.
    """
    path = Path(path)
    with renamed_when_done(path) as temporary:
        write_all(temporary, [data])
        _compare(temporary, data, path)
        if check is not None:
            check(temporary)
    return path


@contextlib.contextmanager
def renamed_when_done(path: Path, lasting: bool = True) -> Iterator[Path]:
    """A temporary name beside `path`; what was written to it and synced inside the `with` becomes `path` at its end.

    On any failure it is removed.  The name outlasts a crash of the machine, unless it need not (`lasting`).
    Raises ResourceError for what the file system refuses, InputError for a path that
    can't be one.
    """
    if "\0" in str(path) or path.name in ("", ".."):
        raise InputError(problem("path", "not the name of a file", found=repr(str(path))))
    temporary = temporary_path(path.parent)
    with _as_resource_error(path):
        try:
            yield temporary
            os.replace(temporary, path)
        finally:
            with contextlib.suppress(FileNotFoundError, NotADirectoryError):
                os.unlink(temporary)
        if lasting:
            _sync_folder(path.parent)


def _remembered(call: Callable[..., Any]) -> Callable[..., Any]:
    """A call from within HDF5 whose failure, a signal too, is remembered: raised through HDF5 it would be lost."""

    @functools.wraps(call)
    def run(self: CarefulFile, *given: Any) -> Any:
        try:
            return call(self, *given)
        except BaseException as error:
            self.failure = self.failure or error
            return 0

    return run


class CarefulFile:
    """A file that HDF5 writes through (as h5py's `fileobj` driver takes it) and that remembers the first failure.

    HDF5 that cannot write what it holds when it is closed takes the process down.  So after a failure, such as a full
    disk, whatever is still written is passed over, and whoever made the file asks `failure` before it counts.
    """

    def __init__(self, path: Path) -> None:
        flags = os.O_RDWR | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0)
        self._descriptor = os.open(path, flags, 0o666)
        self._position = 0
        self._at = 0  # where the descriptor is, -1 while a call moves it that may be interrupted
        self.failure: BaseException | None = None

    @_remembered
    def write(self, data: Any) -> int:
        """Write at the position."""
        rest = memoryview(data).cast("B")
        size = len(rest)
        while rest and self.failure is None:
            self._go_to_position()
            self._at = -1
            written = os.write(self._descriptor, rest[:_PIECE])
            self._position += written
            self._at = self._position
            rest = rest[written:]
        self._position += len(rest)
        return size

    @_remembered
    def readinto(self, buffer: Any) -> int:
        """Fill a buffer from the position; beyond the end with zeros."""
        view = memoryview(buffer).cast("B")
        self._go_to_position()
        self._at, done = -1, 0
        while done < len(view) and (data := os.read(self._descriptor, len(view) - done)):
            view[done : done + len(data)] = data
            done += len(data)
        view[done:] = bytes(len(view) - done)
        self._at = self._position + done
        self._position += len(view)
        return len(view)

    def read(self, size: int = -1) -> bytes:
        """Bytes from the position."""
        wanted = os.fstat(self._descriptor).st_size - self._position if size < 0 else size
        buffer = bytearray(max(wanted, 0))
        self.readinto(buffer)
        return bytes(buffer)

    @_remembered
    def seek(self, offset: int, whence: int = os.SEEK_SET) -> int:
        """Set the position."""
        if whence == os.SEEK_CUR:
            offset += self._position
        elif whence == os.SEEK_END:
            offset += os.fstat(self._descriptor).st_size
        self._position = offset
        return self._position

    @_remembered
    def tell(self) -> int:
        """The position."""
        return self._position

    @_remembered
    def truncate(self, size: int | None = None) -> int:
        """Set the file's length."""
        length = self._position if size is None else size
        if self.failure is None:
            os.ftruncate(self._descriptor, length)
        return length

    def flush(self) -> None:
        """Nothing is held back."""

    def _go_to_position(self) -> None:
        """Move the descriptor, unless it is there already."""
        if self._at != self._position:
            self._at = os.lseek(self._descriptor, self._position, os.SEEK_SET)

    def raise_failure(self) -> None:
        """Raise the first failure, if there was one."""
        if self.failure is not None:
            raise self.failure

    def finish(self) -> None:
        """Make what was written last, and close.  Raises OSError for the first failure."""
        self.raise_failure()
        os.fsync(self._descriptor)
        _drop_cached_pages(self._descriptor)
        self.close()

    def close(self) -> None:
        """Close the file."""
        if self._descriptor >= 0:
            os.close(self._descriptor)
            self._descriptor = -1


def temporary_path(folder: Path) -> Path:
    """A name in the folder that nothing has and that `remove_leftovers` knows."""
    return folder / f".opacity-{_host()}-{os.getpid()}-{secrets.token_hex(8)}.part"


def remove_leftovers(folder: Path) -> None:
    """Remove the temporary files of programs that were killed.

    A file counts as left behind if its name says that a process of this host wrote it that no longer runs, or, since
    nobody can ask another host, if nothing has been written to it for a week.
    """
    with contextlib.suppress(OSError, ValueError):
        for path in folder.iterdir():
            match = _TEMPORARY.fullmatch(path.name)
            if match is not None and (_is_old(path) or (match[1] == _host() and not process_runs(int(match[2])))):
                with contextlib.suppress(OSError):
                    path.unlink()


def remove_own_leftovers(folder: Path) -> None:
    """Remove the temporary files of this process, which is about to end."""
    with contextlib.suppress(OSError, ValueError):
        for path in folder.glob(f".opacity-{_host()}-{os.getpid()}-*.part"):
            with contextlib.suppress(OSError):
                path.unlink()


def _host() -> str:
    """A short name of this host, or of a container on it, that is fit for a file name."""
    name = f"{platform.node()} {process_namespace()}"
    return hashlib.sha256(name.encode("utf-8", "surrogateescape")).hexdigest()[:8]


def process_namespace() -> str:
    """Within what the number of a process means something: containers of one host each have their own."""
    try:
        return os.readlink("/proc/self/ns/pid")
    except OSError:
        return ""


def process_runs(process: int) -> bool:
    """Whether a process of this number runs on this host; true where that cannot be asked."""
    if os.name == "nt":  # where asking would be a signal
        return True
    try:
        os.kill(process, 0)
    except (ProcessLookupError, OverflowError):
        return False
    except OSError:  # it runs, and is another user's
        return True
    return True


def _is_old(path: Path) -> bool:
    try:
        return time.time() - path.stat().st_mtime > _SECONDS_A_WEEK
    except OSError:
        return False


@contextlib.contextmanager
def _as_resource_error(path: Path) -> Iterator[None]:
    try:
        yield
    except OSError as error:
        reason = error.strerror or str(error)
        remedy = _REMEDIES.get(error.errno or 0)
        raise ResourceError(problem(path, f"cannot be written ({reason})", remedy=remedy)) from error


def write_all(path: Path, pieces: Iterable[Any], lasting: bool = True) -> None:
    """Write pieces of bytes to a new file, and sync it unless it need not outlast a crash.  Raises OSError."""
    descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0), 0o666)
    try:
        for piece in pieces:
            rest = memoryview(piece)
            while rest:
                rest = rest[os.write(descriptor, rest[:_PIECE]) :]
        if lasting:
            os.fsync(descriptor)
            _drop_cached_pages(descriptor)
    finally:
        os.close(descriptor)


def _drop_cached_pages(descriptor: int) -> None:
    """Ask the system to forget what it holds of a file, so that reading back asks the disk."""
    if hasattr(os, "posix_fadvise"):
        with contextlib.suppress(OSError):
            os.posix_fadvise(descriptor, 0, 0, os.POSIX_FADV_DONTNEED)


def _compare(written: Path, data: bytes, path: Path) -> None:
    rest = memoryview(data)
    with open(written, "rb", buffering=0) as stream:
        while (piece := stream.read(_PIECE)) and piece == rest[: len(piece)]:
            rest = rest[len(piece) :]
    if piece or rest:
        raise ResourceError(problem(path, "what the disk gives back is not what was written to it"))


def _sync_folder(folder: Path) -> None:
    """Make the rename last; file systems that cannot sync a folder say EINVAL, and there is no more to be done."""
    if os.name == "nt":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    except OSError as error:
        if error.errno not in (errno.EINVAL, errno.ENOTSUP):
            raise
    finally:
        os.close(descriptor)
