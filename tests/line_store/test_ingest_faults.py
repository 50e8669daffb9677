"""What an ingest refuses, and what it leaves behind when it is stopped, repeated or run twice at once."""

from __future__ import annotations

import json
import os
import platform
import subprocess
import sys
import time
from collections.abc import Iterator
from functools import partial
from pathlib import Path

import h5py
import numpy as np
import pytest

from opacity.errors import LineListError, OpacityError, ResourceError
from opacity.line_list.batches import Batch, record_batches
from opacity.line_list.records import ReadOptions
from opacity.line_store import assemble as assemble_module
from opacity.line_store import ingest as ingest_module
from opacity.line_store.ingest import InputFile, identity, ingest, same_content
from opacity.line_store.layout import INDEX, LOCK, PARTS
from opacity.line_store.store import LineStore, read_index

RECORDS = (Path(__file__).parents[2] / "data-samples" / "carbon-monoxide.par").read_bytes().splitlines(keepends=True)


def quiet(records: int, position: int) -> None:
    del records, position


def written(path: Path, records: list[bytes], leave_out: bool = False) -> InputFile:
    path.write_bytes(b"".join(records))
    return InputFile(path, partial(record_batches, path, "hitran", ReadOptions(), leave_out, None, None))


def test_an_input_that_changes_while_it_is_read_is_refused(tmp_path: Path) -> None:
    one = written(tmp_path / "a.par", RECORDS)

    def batches() -> Iterator[Batch]:
        yield from one.batches()
        one.path.write_bytes(b"".join(RECORDS[:-1]))

    with pytest.raises(LineListError, match=r"^[^\n]*a\.par: changed while it was read[^\n]*$"):
        ingest(tmp_path / "store", [InputFile(one.path, batches)], "key", 10**9, quiet)
    assert read_index(tmp_path / "store") is None


def test_a_file_beside_several_inputs_that_changes_between_them_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """States are read once for all transition files, whose identities are taken one after the other."""
    beside = tmp_path / "a.states"
    beside.write_bytes(b"as read for both")
    parts = [written(tmp_path / name, rows) for name, rows in (("a.par", RECORDS[:9]), ("b.par", RECORDS[9:]))]
    inputs = [InputFile(one.path, one.batches, (beside,)) for one in parts]

    at_rest = ingest_module._at_rest

    def changed_before_the_second(one: InputFile) -> object:
        if one is inputs[1]:
            beside.write_bytes(b"another content")
        return at_rest(one)

    monkeypatch.setattr(ingest_module, "_at_rest", changed_before_the_second)
    with pytest.raises(LineListError, match=r"^[^\n]*a\.par: changed while it was read[^\n]*$"):
        ingest(tmp_path / "store", inputs, "key", 10**9, quiet)
    assert read_index(tmp_path / "store") is None


def test_an_ingest_anew_leaves_no_store_until_it_is_done(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder = tmp_path / "store"
    ingest(folder, [written(tmp_path / "a.par", RECORDS)], "key", 10**9, quiet)
    (folder / "000007.lines.h5").write_bytes(b"of an earlier store")
    shorter = written(tmp_path / "a.par", RECORDS[:50])

    def killed(*given: object) -> None:
        raise KeyboardInterrupt

    with monkeypatch.context() as patch:
        patch.setattr(assemble_module, "write_segment", killed)
        with pytest.raises(KeyboardInterrupt):
            ingest(folder, [shorter], "key", 10**9, quiet)
    assert read_index(folder) is None
    assert list(folder.glob("*.h5")) == []
    assert not (folder / LOCK).exists()
    ingest(folder, [shorter], "key", 10**9, quiet)
    with LineStore(folder) as store:
        assert len(store.window(0.0, 1e9)) == 50


def test_parts_left_half_removed_are_made_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder, one = tmp_path / "store", written(tmp_path / "a.par", RECORDS)
    with monkeypatch.context() as patch:
        patch.setattr(ingest_module.shutil, "rmtree", lambda *given, **named: None)
        ingest(folder, [one], "key", 10**9, quiet)
    for path in (folder / PARTS).glob("*.part"):
        path.unlink()
    with LineStore(folder) as store:
        assert len(store.window(0.0, 1e9)) == 202
    ingest(folder, [one], "key", 10**9, quiet)
    assert not (folder / PARTS).exists()
    with LineStore(folder) as store:
        assert len(store.window(0.0, 1e9)) == 202


def test_parts_of_another_format_are_made_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder, first = tmp_path / "store", written(tmp_path / "a.par", RECORDS)
    bad = written(tmp_path / "b.par", [*RECORDS[:50], b" 51 short\n"])
    manifest, read = folder / PARTS / "00000.json", []

    def batches() -> Iterator[Batch]:
        read.append(1)
        yield from first.batches()

    for version, times in ((1, 1), (1, 1), (2, 2)):
        monkeypatch.setattr(ingest_module, "FORMAT_VERSION", version)
        with pytest.raises(LineListError, match=r"b\.par"):
            ingest(folder, [InputFile(first.path, batches), bad], "key", 10**9, quiet)
        assert len(read) == times
        assert json.loads(manifest.read_bytes())["format_version"] == version


def test_parts_that_were_overwritten_are_not_taken_for_those_of_before(tmp_path: Path) -> None:
    folder, first = tmp_path / "store", written(tmp_path / "a.par", RECORDS)
    bad = [*RECORDS[:50], b" 51 short\n"]
    with pytest.raises(LineListError, match=r"b\.par"):
        ingest(folder, [first, written(tmp_path / "b.par", bad)], "key", 10**9, quiet)
    manifest = folder / PARTS / "00000.json"
    assert manifest.exists()
    with pytest.raises(LineListError, match=r"b\.par"):
        ingest(folder, [written(tmp_path / "b.par", bad)], "key", 10**9, quiet)
    assert not manifest.exists()


def test_records_that_stand_in_two_files_are_refused(tmp_path: Path) -> None:
    folder = tmp_path / "store"
    inputs = [written(tmp_path / "a.par", RECORDS[:100]), written(tmp_path / "b.par", RECORDS[97:])]
    what = r"the same records stand in a\.par and b\.par and would count twice; found 3 such records"
    with pytest.raises(LineListError, match=rf"^[^\n]*{what}[^\n]*$"):
        ingest(folder, inputs, "key", 10**9, quiet)
    assert read_index(folder) is None
    assert list(folder.glob("*.h5")) == []


def test_records_that_one_file_repeats_are_noted(tmp_path: Path) -> None:
    inputs = [written(tmp_path / "a.par", RECORDS[:5] + RECORDS[:100]), written(tmp_path / "b.par", RECORDS[100:])]
    ingest(tmp_path / "store", inputs, "key", 10**9, quiet)
    index = read_index(tmp_path / "store")
    assert index is not None
    assert index.ledger.notes["identical to another record: both count"] == 5
    assert index.lines == 207


def test_a_list_of_bad_records_only_is_refused(tmp_path: Path) -> None:
    bad = [record[:3] + b"    -1.000000" + record[16:] for record in RECORDS]
    with pytest.raises(LineListError, match=r"^a\.par: every record was left out; found 202 [^\n]*$"):
        ingest(tmp_path / "store", [written(tmp_path / "a.par", bad, leave_out=True)], "key", 10**9, quiet)
    path = written(tmp_path / "a.par", RECORDS).path
    far = InputFile(path, partial(record_batches, path, "hitran", ReadOptions(), False, (1.0, 2.0), None))
    ingest(tmp_path / "store", [far], "key", 10**9, quiet)
    with LineStore(tmp_path / "store") as store:
        assert len(store.window(0.0, 1e9)) == 0


def test_files_beside_many_inputs_are_hashed_once(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    states = tmp_path / "a.states"
    states.write_bytes(b"states")
    one = InputFile(written(tmp_path / "a.par", RECORDS).path, lambda: iter(()), (states,))
    known = identity(one)
    os.utime(states, (1e9, 1e9))
    hashed: list[Path] = []
    sha256 = ingest_module.file_sha256
    monkeypatch.setattr(ingest_module, "file_sha256", lambda path: (hashed.append(path), sha256(path))[1])
    assert all(same_content(one, known) for _ in range(20))
    assert len(hashed) == 1


@pytest.mark.parametrize("beside", [False, True])
def test_a_file_that_changes_while_it_is_hashed_is_refused(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, beside: bool
) -> None:
    states = tmp_path / "a.states"
    states.write_bytes(b"states")
    written_one = written(tmp_path / "a.par", RECORDS)
    one = InputFile(written_one.path, written_one.batches, (states,))
    changing = states if beside else one.path
    sha256 = ingest_module.file_sha256

    def changed_then_hashed(path: Path) -> str:
        if path == changing:
            path.write_bytes(path.read_bytes() + RECORDS[0])
        return sha256(path)

    monkeypatch.setattr(ingest_module, "file_sha256", changed_then_hashed)
    with pytest.raises(LineListError, match=rf"^[^\n]*{changing.name}: changed while it was read; [^\n]*at rest$"):
        ingest(tmp_path / "store", [one], "key", 10**9, quiet)
    assert read_index(tmp_path / "store") is None


def test_a_fault_found_by_the_hashing_thread_is_raised(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refused(path: Path) -> str:
        raise OpacityError(f"{path}: cannot be read (invented)")

    monkeypatch.setattr(ingest_module, "file_sha256", refused)
    with pytest.raises(OpacityError, match=r"a\.par: cannot be read \(invented\)$"):
        ingest(tmp_path / "store", [written(tmp_path / "a.par", RECORDS)], "key", 10**9, quiet)
    assert read_index(tmp_path / "store") is None


def locked_by(folder: Path, host: str, process: int) -> None:
    folder.mkdir(exist_ok=True)
    (folder / LOCK).write_text(json.dumps({"host": host, "pid": process}), encoding="utf-8")


def test_one_ingest_at_a_time_in_a_folder(tmp_path: Path) -> None:
    folder, one = tmp_path / "store", written(tmp_path / "a.par", RECORDS)
    seen: list[str] = []

    def batches() -> Iterator[Batch]:
        with pytest.raises(ResourceError, match=rf"^[^\n]*made by process {os.getpid()} on [^\n]*$"):
            ingest(folder, [one], "key", 10**9, quiet)
        seen.append((folder / LOCK).read_text(encoding="utf-8"))
        yield from one.batches()

    ingest(folder, [InputFile(one.path, batches)], "key", 10**9, quiet)
    assert len(seen) == 1
    assert sorted(path.name for path in folder.iterdir()) == ["000000.lines.h5", INDEX]
    locked_by(folder, "another host", 1)
    with pytest.raises(ResourceError, match=r"made by process 1 on another host; wait for it"):
        ingest(folder, [one], "key", 10**9, quiet)
    locked_by(folder, platform.node(), os.getppid())
    with pytest.raises(ResourceError, match=rf"made by process {os.getppid()}"):
        ingest(folder, [one], "key", 10**9, quiet)


def test_a_lock_left_behind_is_taken_over(tmp_path: Path) -> None:
    folder, one = tmp_path / "store", written(tmp_path / "a.par", RECORDS)
    with subprocess.Popen([sys.executable, "-c", ""]) as ended:
        ended.wait()
    locked_by(folder, platform.node(), ended.pid)
    ingest(folder, [one], "key", 10**9, quiet)
    locked_by(folder, platform.node(), os.getpid())  # of an earlier process of the same number
    ingest(folder, [one], "key", 10**9, quiet)
    locked_by(folder, "another host", 1)
    long_ago = time.time() - 2 * 3600
    os.utime(folder / LOCK, (long_ago, long_ago))
    ingest(folder, [one], "key", 10**9, quiet)
    assert sorted(path.name for path in folder.iterdir()) == ["000000.lines.h5", INDEX]


def test_a_segment_opens_where_nothing_can_be_locked(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    folder, opened = tmp_path / "store", h5py.File
    ingest(folder, [written(tmp_path / "a.par", RECORDS)], "key", 10**9, quiet)

    def unlockable(path: Path, mode: str, locking: bool = True) -> object:
        if locking:
            raise BlockingIOError(11, "unable to lock file")
        return opened(path, mode, locking=False)

    monkeypatch.setattr(h5py, "File", unlockable)
    with LineStore(folder) as store:
        assert len(store.window(0.0, 1e9)) == 202

    def refused(path: Path, mode: str, locking: bool = True) -> object:
        raise PermissionError(13, "unable to open file\nfor a reason")

    monkeypatch.setattr(h5py, "File", refused)
    what = r"000000\.lines\.h5: segment of the line store cannot be read \(Permission denied\)"
    with LineStore(folder) as store, pytest.raises(LineListError, match=rf"^[^\n]*{what}$"):
        store.window(0.0, 1e9)


def test_isotopologues_are_numbered_by_file() -> None:
    from opacity.line_list.packed import PackedLines, WidthClasses

    classes = WidthClasses(np.array([0, 1, 0], dtype=np.int16), np.array([0, 1, 1], dtype=np.int16), {})
    codes = np.array([0, 1, 2], dtype=np.uint32)
    packed = PackedLines(np.array([1.0, 2.0, 3.0]), codes, codes, codes, codes, classes)
    found = assemble_module._number_isotopologues(packed, [[2], [0, 1]])
    assert found.classes.isotopologue.tolist() == [2, 1, 0]
