"""A build that is killed, stopped or starved goes on where it was, and its table has the bits of an undisturbed one."""

from __future__ import annotations

import os
import random
import signal
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from opacity.errors import ResourceError
from opacity.pipeline import build as build_module
from opacity.pipeline.build import Crew, build_table
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.plan import make_plan
from opacity.pipeline.units import parted
from opacity.recipe.load import load_recipe
from opacity.tables.sealed import is_whole

from .conftest import UNITS, files_in, table_hash

DONE = ["co.cross-section.h5", "co.log.json"]
KILLS = int(os.environ.get("OPACITY_KILLS", "4"))
"""More of them by hand: OPACITY_KILLS=200 python -m pytest tests/faults/test_killed.py -k kill."""


def test_kill_at_random_moments(
    tmp_path: Path, start: Callable[..., object], build: Callable[..., tuple[int, str, str]], undisturbed: str
) -> None:
    """SIGKILL after random times, each time resumed until a build comes through, until the kills are spent."""
    rng, kills, finished = random.Random(7), 0, 0
    while kills < KILLS:
        with start(tmp_path, "--workers", "2", *rng.choice([(), ("--using", "processes")])) as process:
            try:
                process.wait(timeout=rng.uniform(0.8, 5.0))
            except Exception:
                os.killpg(process.pid, signal.SIGKILL)
                kills += 1
        if process.returncode == 0:
            finished += 1
            assert table_hash(tmp_path) == undisturbed
            (tmp_path / "co.cross-section.h5").unlink()
        else:
            assert process.returncode == -signal.SIGKILL
            # Whatever has a final name is whole.
            assert all(is_whole(path) for path in tmp_path.rglob("*.shard"))
            assert not (tmp_path / "co.cross-section.h5").exists() or table_hash(tmp_path) == undisturbed
    code, _, err = build(tmp_path)
    assert code == 0, err
    print(f"{kills} kills, {finished} builds that came through between them")
    assert table_hash(tmp_path) == undisturbed
    assert files_in(tmp_path) == DONE


@pytest.mark.parametrize(
    "number, code, word", [(signal.SIGTERM, 75, "terminated"), (signal.SIGINT, 130, "interrupted")]
)
def test_a_signal_keeps_what_is_done(
    tmp_path: Path, start: Callable[..., object], build: Callable[..., tuple[int, str, str]], number: int, code: int,
    word: str, undisturbed: str,
) -> None:  # fmt: skip
    with start(tmp_path, "--workers", "2") as process:
        deadline = time.monotonic() + 60.0
        while not list(tmp_path.rglob("*.shard")) and process.poll() is None and time.monotonic() < deadline:
            time.sleep(0.002)
        process.send_signal(number)
        _, err = process.communicate(timeout=60.0)
    assert process.returncode == code
    kept = len(files_in(tmp_path))
    last = err.decode().splitlines()[-1]
    told = f"{kept} of {UNITS} units are done and kept; the same command goes on"
    assert last == f"{word}: nothing half-written was left behind; {told}"
    assert 1 <= kept < UNITS
    assert build(tmp_path)[0] == 0
    assert table_hash(tmp_path) == undisturbed


def test_a_second_build_says_who_is_at_work(
    tmp_path: Path, start: Callable[..., object], build: Callable[..., tuple[int, str, str]], undisturbed: str
) -> None:
    with start(tmp_path, "--workers", "1") as process:
        while not list(tmp_path.rglob("*.lock")) and process.poll() is None:
            time.sleep(0.002)
        code, _, err = build(tmp_path)
        assert code == 1
        assert f"this table is being made by process {process.pid} on " in err.splitlines()[-1]
        process.communicate(timeout=60.0)
    assert process.returncode == 0
    assert table_hash(tmp_path) == undisturbed


def test_a_damaged_shard_is_made_again(
    tmp_path: Path, build: Callable[..., tuple[int, str, str]], undisturbed: str
) -> None:
    for k in (1, 2, 3):
        assert build(tmp_path, "--task", f"{k}/4")[0] == 0
    shards = sorted(tmp_path.rglob("*.shard"))
    rng = random.Random(3)
    for path in shards[:2]:
        data = bytearray(path.read_bytes())
        data[rng.randrange(len(data))] ^= 1 << rng.randrange(8)
        path.write_bytes(data)
    shards[2].write_bytes(shards[2].read_bytes()[:-1])
    shards[3].write_bytes(b"")
    code, _, err = build(tmp_path)
    assert code == 0, err
    assert table_hash(tmp_path) == undisturbed


@pytest.mark.parametrize("call", ["write", "fsync", "replace"])
def test_a_disk_that_fails_at_every_point(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, recipe: Path, undisturbed: str, call: str
) -> None:
    """After n calls all fail, as on a full disk, with n up to where it is enough: one line, nothing half-written, and
    the same command goes on.
    """
    real, loaded, builds = getattr(os, call), load_recipe(recipe), 0
    state = {"left": 0}

    def failing(*given: object, **named: object) -> object:
        state["left"] -= 1
        if state["left"] < 0:
            raise OSError(28, "No space left on device")
        return real(*given, **named)

    n = 0
    while True:
        with monkeypatch.context() as patch:
            patch.setattr(os, call, failing)
            state["left"] = n
            try:
                build_table(loaded, tmp_path, crew=Crew(1), quiet=True)
                break
            except ResourceError as error:
                message = str(error)
        assert "No space left on device" in message
        assert "\n" not in message
        builds += 1
        names = files_in(tmp_path)
        # Where only the folder could not be synced after the table got its name, the table is whole.
        tables = [name for name in names if name in DONE]
        assert not tables or table_hash(tmp_path) == undisturbed
        assert all(is_whole(tmp_path / name) for name in names if name not in DONE)
        n = n * 2 + 1
    assert builds >= 2
    assert table_hash(tmp_path) == undisturbed
    assert files_in(tmp_path) == DONE


def test_a_shard_of_another_unit_is_not_taken(
    tmp_path: Path, build: Callable[..., tuple[int, str, str]], undisturbed: str
) -> None:
    """Whole as it is, and under the name of a unit that is not done."""
    assert build(tmp_path, "--task", "1/3")[0] == 0
    assert build(tmp_path, "--task", "2/3")[0] == 0
    names = {path.name for path in tmp_path.rglob("*.shard")}
    whole = sorted(tmp_path.rglob("*.shard"))[0].read_bytes()
    assert build(tmp_path / "elsewhere", "--task", "3/3")[0] == 0
    (missing,) = {path.name for path in (tmp_path / "elsewhere").rglob("*.shard")} - names
    (tmp_path / "co.shards" / missing).write_bytes(whole)
    code, _, err = build(tmp_path)
    assert code == 0, err
    assert table_hash(tmp_path) == undisturbed


def test_the_last_of_two_tasks_leaves_the_table_to_the_first(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, recipe: Path, undisturbed: str
) -> None:
    """Both find all units done at the same moment: one puts the table together, the other has nothing left to do."""
    loaded = load_recipe(recipe)
    build_table(loaded, tmp_path, crew=Crew(1, task=(1, 2)), quiet=True)
    second = []

    real = build_module._assemble

    def meanwhile(*given: object) -> object:
        second.append(build_table(loaded, tmp_path, crew=Crew(1, task=(1, 2)), quiet=True))
        return real(*given)

    monkeypatch.setattr(build_module, "_assemble", meanwhile)
    first = build_table(loaded, tmp_path, crew=Crew(1, task=(2, 2)), quiet=True)
    assert first.figures
    assert (second[0].figures, second[0].missing) == ({}, 0)
    assert table_hash(tmp_path) == undisturbed


def test_the_bits_do_not_depend_on_memory(tmp_path: Path, recipe: Path, undisturbed: str) -> None:
    loaded, limited = load_recipe(recipe), []
    choice = {"crew": Crew(5), "memory": 600_000_000, "quiet": True}
    build_table(loaded, tmp_path, announce=lambda plan: limited.extend(plan.limited), **choice)
    assert limited == ["memory allows 3 of 5 workers"]
    assert table_hash(tmp_path) == undisturbed


def test_what_is_done_needs_no_room_twice(tmp_path: Path, recipe: Path, build: Callable[..., object]) -> None:
    """With all shards there only the table is still to be written."""
    loaded = load_recipe(recipe)
    inputs = load_inputs(loaded)
    whole = make_plan(loaded, inputs, tmp_path).disk
    for k in (1, 2):
        build_table(loaded, tmp_path, crew=Crew(1, task=(k, 3)), quiet=True)
    rest = make_plan(loaded, inputs, tmp_path).disk
    assert rest < 0.6 * whole


@pytest.mark.skipif(not os.path.exists("/proc/self/task"), reason="the system does not tell a process's children")
def test_worker_processes_end_with_a_killed_parent(tmp_path: Path, start: Callable[..., object]) -> None:
    with start(tmp_path, "--workers", "2", "--using", "processes") as process:
        deadline = time.monotonic() + 60.0
        while not list(tmp_path.rglob("*.shard")) and process.poll() is None and time.monotonic() < deadline:
            time.sleep(0.005)
        with open(f"/proc/{process.pid}/task/{process.pid}/children", encoding="ascii") as stream:
            children = [int(one) for one in stream.read().split()]
        process.kill()
    deadline = time.monotonic() + 10.0
    while any(os.path.exists(f"/proc/{one}") for one in children) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert not any(os.path.exists(f"/proc/{one}") for one in children)


def test_a_worker_that_cannot_start_says_why(tmp_path: Path, recipe: Path) -> None:
    """In its one line, and not that it was killed."""
    from opacity.pipeline.workers import Origin, in_processes

    loaded = load_recipe(recipe)
    units = parted(loaded, load_inputs(loaded).lines, "")
    origin = Origin(recipe, tmp_path, tmp_path, "of other inputs", 2_000_000_000, "cross-section")
    with pytest.raises(ResourceError, match=r"^[^\n]*co\.toml: the recipe or its files changed while the build ran; "):
        in_processes(origin, units[:2], 1, lambda unit: None)
