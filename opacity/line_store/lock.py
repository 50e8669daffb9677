"""One ingest at a time in a store's folder: a lock file that says who is at work, touched while the work goes on."""

from __future__ import annotations

import contextlib
import json
import os
import platform
import secrets
import threading
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from opacity.errors import InUseError, ResourceError, problem
from opacity.line_store.layout import LOCK
from opacity.tables.atomic import process_namespace, process_runs, remove_leftovers, temporary_path

REFRESH = 30.0
"""Seconds between two touches of the lock."""

LONGEST_SILENCE = 3600.0
"""Seconds after which a lock that nobody touches counts as left behind, whoever made it."""


@dataclass(frozen=True)
class Lock:
    """A lock that is held; `text` is what this holder wrote into it, unlike any other's."""

    path: Path
    text: str

    def check(self) -> None:
        """Raise ResourceError where another process took the lock over, as it may after a long silence."""
        try:
            found = _text(self.path)
        except OSError as error:
            raise ResourceError(problem(self.path, f"cannot be read ({error.strerror or error})")) from error
        if found != self.text:
            who = "nobody" if found is None else _named(found)
            what = "this process no longer holds the lock of this folder"
            raise ResourceError(problem(self.path.parent, what, found=who, remedy="the same command starts again"))

    def keep(self, stop: threading.Event) -> None:
        """Touch the lock until `stop` is set or it is another's."""
        while not stop.wait(REFRESH):
            with contextlib.suppress(OSError):
                if _text(self.path) != self.text:
                    return
                os.utime(self.path)

    def release(self) -> None:
        """Remove the lock unless it is another's."""
        with contextlib.suppress(OSError):
            if _text(self.path) == self.text:
                self.path.unlink()


_held: set[str] = set()


@contextlib.contextmanager
def locked(folder: Path, what: str = "line store") -> Iterator[Lock]:
    """Hold the folder's lock; `what` is what is made in it.  Raises ResourceError saying who holds it.

    A lock of a process of this host that no longer runs, or one that was not touched for an hour, is taken over.  What
    a holder that was silent for so long has made must not count: it calls `Lock.check` before it makes its work final.
    """
    path = folder / LOCK
    text = json.dumps({**_this_process(), "token": secrets.token_hex(8)})
    lock, stop = Lock(path, text), threading.Event()
    thread = threading.Thread(target=lock.keep, args=(stop,), daemon=True)
    # Known before it is made, so that no other thread of this process takes it for one that was left behind.
    _held.add(text)
    try:
        try:
            if not _create(path, text):
                _take_over(path, text, what)
        except OSError as error:
            raise ResourceError(problem(path, f"cannot be written ({error.strerror or error})")) from error
        thread.start()
        remove_leftovers(folder)
        yield lock
    finally:
        stop.set()
        if thread.ident is not None:
            thread.join()
        lock.release()
        _held.discard(text)


def _this_process() -> dict[str, Any]:
    return {
        "host": platform.node(),
        "namespace": process_namespace(),
        "pid": os.getpid(),
        "started": _started(os.getpid()),
    }


def _started(process: int) -> str:
    """When a process was started, in the system's own count; empty where that cannot be asked."""
    try:
        with open(f"/proc/{process}/stat", encoding="utf-8", errors="replace") as stream:
            return stream.read().rpartition(")")[2].split()[19]
    except (OSError, IndexError):
        return ""


def _create(path: Path, text: str) -> bool:
    """Make the lock with its text in it at once, whoever looks; whether it was not there."""
    own = temporary_path(path.parent)
    try:
        own.write_text(text, encoding="utf-8")
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
                stream.write(text.encode("utf-8"))
            return True
    finally:
        own.unlink(missing_ok=True)


def _take_over(path: Path, own: str, what: str) -> None:
    text = _text(path)
    if text is not None and not _is_left_behind(path, text):
        raise _in_use(path, text, what)
    # Renamed first: of several that take over, one gets what it looked at, and what another made meanwhile goes back.
    aside = temporary_path(path.parent)
    with contextlib.suppress(FileNotFoundError):
        os.rename(path, aside)
        if _text(aside) != text:
            with contextlib.suppress(OSError):
                os.link(aside, path)
        aside.unlink()
    if not _create(path, own):
        raise _in_use(path, _text(path) or "", what)


def _text(path: Path) -> str | None:
    try:
        return path.read_text(encoding="utf-8", errors="replace")
    except FileNotFoundError:
        return None


def _holder(text: str) -> dict[str, Any] | None:
    try:
        values = json.loads(text)
        return {**values, "host": str(values["host"]), "pid": int(values["pid"])}
    except (KeyError, TypeError, ValueError, OverflowError, RecursionError):
        return None


def _named(text: str) -> str:
    holder = _holder(text)
    if holder is None or not holder["host"].isprintable():
        return "another process"
    return f"process {holder['pid']} on {holder['host']}"


def _in_use(path: Path, text: str, what: str) -> InUseError:
    remedy = f"wait for it, or remove {path.name} if it no longer runs"
    return InUseError(problem(path.parent, f"this {what} is being made by {_named(text)}", remedy=remedy))


def _is_left_behind(path: Path, text: str) -> bool:
    try:
        if _is_silent(path):
            return True
    except FileNotFoundError:
        return True
    holder, own = _holder(text), _this_process()
    if holder is None or holder["host"] != own["host"] or holder.get("namespace", own["namespace"]) != own["namespace"]:
        return False
    if holder["pid"] == own["pid"]:  # an earlier process of the same number, unless it is this one
        return text not in _held
    if not process_runs(holder["pid"]):
        return True
    known = holder.get("started")
    return bool(known) and _started(holder["pid"]) not in ("", known)


def _is_silent(path: Path) -> bool:
    """Whether a lock was last touched too long ago, or far in the future as after a clock was set right.

    Asked by the clock of the file system, since that of another host may be wrong.
    """
    probe = temporary_path(path.parent)
    try:
        probe.touch(exist_ok=False)
        return abs(probe.stat().st_mtime - path.stat().st_mtime) > LONGEST_SILENCE
    finally:
        probe.unlink(missing_ok=True)
