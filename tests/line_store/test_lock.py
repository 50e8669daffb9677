"""The lock of a store's folder: who holds it, for how long, and what a holder that lost it must not do."""

from __future__ import annotations

import json
import os
import platform
import threading
import time
from functools import partial
from pathlib import Path

import pytest

from opacity.errors import ResourceError
from opacity.line_list.batches import record_batches
from opacity.line_list.records import ReadOptions
from opacity.line_store import assemble as assemble_module
from opacity.line_store import lock as lock_module
from opacity.line_store.ingest import InputFile, ingest
from opacity.line_store.layout import INDEX, LOCK
from opacity.line_store.lock import LONGEST_SILENCE, locked
from opacity.line_store.store import LineStore
from opacity.tables.atomic import temporary_path

SAMPLE = Path(__file__).parents[2] / "data-samples" / "carbon-monoxide.par"


def sample() -> InputFile:
    return InputFile(SAMPLE, partial(record_batches, SAMPLE, "hitran", ReadOptions(), False, None, None))


def quiet(records: int, position: int) -> None:
    del records, position


def left(folder: Path, age: float = 0.0, **values: object) -> Path:
    """A lock of this host and the parent process, which runs, with some values changed, touched `age` seconds ago."""
    path = folder / LOCK
    path.write_text(json.dumps({"host": platform.node(), "pid": os.getppid(), **values}), encoding="utf-8")
    os.utime(path, (time.time() - age, time.time() - age))
    return path


def test_a_lock_is_touched_while_it_is_held(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(lock_module, "REFRESH", 0.01)
    with locked(tmp_path) as lock:
        os.utime(lock.path, (1e9, 1e9))
        stop = time.monotonic() + 20.0
        while lock.path.stat().st_mtime < 2e9 and time.monotonic() < stop:
            time.sleep(0.01)
        assert time.time() - lock.path.stat().st_mtime < 60.0
        lock.check()
    assert list(tmp_path.iterdir()) == []
    assert all(thread is threading.main_thread() or "keep" not in thread.name for thread in threading.enumerate())


@pytest.mark.parametrize("age", [0.9 * LONGEST_SILENCE, -0.9 * LONGEST_SILENCE])
@pytest.mark.parametrize(
    "values", [{}, {"host": "another"}, {"pid": 2**22 + 1, "namespace": "pid:[another container]"}]
)
def test_a_lock_that_is_touched_is_respected(tmp_path: Path, values: dict[str, object], age: float) -> None:
    path = left(tmp_path, age, **values)
    before = path.read_bytes()
    with pytest.raises(ResourceError, match=r"^[^\n]*: this line store is being made by process \d+ on [^\n]*$"):
        locked(tmp_path).__enter__()
    assert path.read_bytes() == before
    assert list(tmp_path.iterdir()) == [path]


@pytest.mark.parametrize(
    ("values", "age"),
    [
        ({"host": "another"}, 1.1 * LONGEST_SILENCE),
        ({}, 1.1 * LONGEST_SILENCE),  # the parent runs, but nobody touches the lock
        ({"host": "another"}, -1e8),  # made by a clock that was ahead
        ({"pid": 2**22 + 1}, 0.0),
        ({"started": "1"}, 0.0),  # an earlier process of the parent's number
        ({"pid": os.getpid()}, 0.0),
    ],
)
def test_a_lock_that_was_left_is_taken_over(tmp_path: Path, values: dict[str, object], age: float) -> None:
    left(tmp_path, age, **values)
    with locked(tmp_path) as lock:
        assert lock.path.read_text(encoding="utf-8") == lock.text
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    "text", ["", "{", "[]", "null", '{"host": 1}', '{"host": "a", "pid": 1e999}', "\xff", "9" * 5000]
)
def test_a_lock_with_any_text_is_respected_for_its_time(tmp_path: Path, text: str) -> None:
    path = tmp_path / LOCK
    path.write_text(text, encoding="latin-1")
    with pytest.raises(ResourceError, match=r"^[^\n]*: this line store is being made by another process; wait for it"):
        locked(tmp_path).__enter__()
    os.utime(path, (1e9, 1e9))
    with locked(tmp_path):
        pass


def test_a_holder_that_lost_its_lock_makes_no_store(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Silent for long, as after a suspension, it may find another process at work when it wakes."""
    folder = tmp_path / "store"
    merge = assemble_module._merge

    def interrupted(*given: object) -> object:
        left(folder, pid=7)
        return merge(*given)

    monkeypatch.setattr(assemble_module, "_merge", interrupted)
    what = rf"no longer holds the lock of this folder; found process 7 on {platform.node()}; the same command"
    with pytest.raises(ResourceError, match=rf"^[^\n]*: this process {what}[^\n]*$"):
        ingest(folder, [sample()], "key", 10**9, quiet)
    assert not (folder / INDEX).exists()
    assert json.loads((folder / LOCK).read_text(encoding="utf-8"))["pid"] == 7
    assert [path for path in folder.iterdir() if path.name.startswith(".opacity-")] == []


def test_half_written_files_of_a_killed_process_are_removed(tmp_path: Path) -> None:
    folder = tmp_path / "store"
    folder.mkdir()
    own = temporary_path(folder).name
    half, others = folder / own.replace(f"-{os.getpid()}-", f"-{2**22 + 1}-"), folder / own
    for path in (half, others):
        path.write_bytes(b"half a segment")
    ingest(folder, [sample()], "key", 10**9, quiet)
    assert sorted(path.name for path in folder.iterdir()) == [others.name, "000000.lines.h5", INDEX]
    with LineStore(folder) as store:
        assert len(store.window(0.0, 1e9)) == 202
