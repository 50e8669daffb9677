"""One ingest at a time in a store's folder: a lock file that says who is at work."""

from __future__ import annotations

import contextlib
import json
import os
import platform
import secrets
import time
from collections.abc import Iterator
from pathlib import Path

from opacity.errors import ResourceError, problem
from opacity.line_store.layout import LOCK
from opacity.tables.atomic import process_runs

_SECONDS_A_WEEK = 7 * 24 * 3600.0
_held: set[str] = set()


@contextlib.contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold the folder's lock.  Raises ResourceError saying who holds it.

    A lock of a process of this host that no longer runs, or one older than a week, is taken over.
    """
    path = folder / LOCK
    try:
        if not _create(path):
            _take_over(path)
    except OSError as error:
        raise ResourceError(problem(path, f"cannot be written ({error.strerror or error})")) from error
    _held.add(os.path.abspath(path))
    try:
        yield
    finally:
        _held.discard(os.path.abspath(path))
        with contextlib.suppress(OSError):
            path.unlink()


def _create(path: Path) -> bool:
    """Make the lock with its text in it at once, whoever looks; whether it was not there."""
    own = path.with_name(f"{path.name}-{os.getpid()}-{secrets.token_hex(8)}")
    try:
        own.write_text(json.dumps({"host": platform.node(), "pid": os.getpid()}), encoding="utf-8")
        try:
            os.link(own, path)
            return True
        except FileExistsError:
            return False
        except OSError:  # a file system without links
            try:
                descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o666)
            except FileExistsError:
                return False
            with os.fdopen(descriptor, "wb") as stream:
                stream.write(own.read_bytes())
            return True
    finally:
        own.unlink(missing_ok=True)


def _take_over(path: Path) -> None:
    text = _text(path)
    if text is not None and not _is_left_behind(path, text):
        raise _in_use(path, text)
    # Renamed first: of several that take over, one gets what it looked at, and what another made meanwhile goes back.
    aside = path.with_name(f"{path.name}-old-{secrets.token_hex(8)}")
    with contextlib.suppress(FileNotFoundError):
        os.rename(path, aside)
        if _text(aside) != text:
            with contextlib.suppress(OSError):
                os.link(aside, path)
        aside.unlink()
    if not _create(path):
        raise _in_use(path, _text(path) or "")


def _text(path: Path) -> str | None:
    try:
        return path.read_text(encoding="utf-8", errors="replace")
    except FileNotFoundError:
        return None


def _holder(text: str) -> tuple[str, int] | None:
    try:
        values = json.loads(text)
        return str(values["host"]), int(values["pid"])
    except (KeyError, TypeError, ValueError):
        return None


def _in_use(path: Path, text: str) -> ResourceError:
    holder = _holder(text)
    who = "another process" if holder is None else f"process {holder[1]} on {holder[0]}"
    remedy = f"wait for it, or remove {path.name} if it no longer runs"
    return ResourceError(problem(path.parent, f"this line store is being made by {who}", remedy=remedy))


def _is_left_behind(path: Path, text: str) -> bool:
    try:
        if time.time() - path.stat().st_mtime > _SECONDS_A_WEEK:
            return True
    except FileNotFoundError:
        return True
    holder = _holder(text)
    if holder is None or holder[0] != platform.node():
        return False
    if holder[1] == os.getpid():  # an earlier process of the same number, unless it is this one
        return os.path.abspath(path) not in _held
    return not process_runs(holder[1])
