"""Whoever does the units, and in whatever order, the table has the same bits."""

from __future__ import annotations

import os
import random
import signal
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from .conftest import UNITS, files_in, table_hash

DONE = ["co.cross-section.h5", "co.log.json"]


@pytest.mark.parametrize(
    "options", [("--workers", "2"), ("--workers", "5"), ("--workers", "2", "--using", "processes")], ids=" ".join
)
def test_threads_and_processes(
    tmp_path: Path, build: Callable[..., tuple[int, str, str]], undisturbed: str, options: tuple[str, ...]
) -> None:
    code, _, err = build(tmp_path, *options)
    assert code == 0, err
    assert table_hash(tmp_path) == undisturbed
    assert files_in(tmp_path) == DONE


def test_tasks_in_any_order_of_any_number(
    tmp_path: Path, build: Callable[..., tuple[int, str, str]], undisturbed: str
) -> None:
    """Some of three tasks, then all of four, one of them twice: the one that finds all units done makes the table."""
    code, out, err = build(tmp_path, "--task", "2/3")
    assert code == 0, err
    assert out.startswith("2 of 5 units done; the table is made when all are")
    assert len(files_in(tmp_path)) == 2
    order = [1, 3, 2, 3, 4]
    random.Random(1).shuffle(order)
    for k in order:
        code, out, err = build(tmp_path, "--task", f"{k}/4")
        assert code == 0, err
    assert out.startswith("table: ")
    assert table_hash(tmp_path) == undisturbed
    assert files_in(tmp_path) == DONE


def test_a_cluster_of_dask(tmp_path: Path, build: Callable[..., tuple[int, str, str]], undisturbed: str) -> None:
    pytest.importorskip("distributed")
    code, _, err = build(tmp_path, "--scheduler", "local", "--workers", "2")
    assert code == 0, err
    assert table_hash(tmp_path) == undisturbed
    assert files_in(tmp_path) == DONE


def test_a_scheduler_that_is_not_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, recipe: Path) -> None:
    pytest.importorskip("distributed")
    from opacity.errors import ResourceError
    from opacity.pipeline import cluster

    monkeypatch.setattr(cluster, "SECONDS_TO_CONNECT", 0.5)
    with (
        pytest.raises(ResourceError, match=r"^--scheduler: no scheduler answers; found tcp://127\.0\.0\.1:1; give the"),
        cluster._client("tcp://127.0.0.1:1", 1),
    ):
        pass


def children_of(process: int) -> list[int]:
    with open(f"/proc/{process}/task/{process}/children", encoding="ascii") as stream:
        return [int(one) for one in stream.read().split()]


def command_of(process: int) -> str:
    with open(f"/proc/{process}/cmdline", "rb") as stream:
        return stream.read().replace(b"\0", b" ").decode()


@pytest.mark.skipif(not os.path.exists("/proc/self/task"), reason="the system does not tell a process's children")
def test_a_killed_worker_process_is_replaced(tmp_path: Path, start: Callable[..., object], undisturbed: str) -> None:
    with start(tmp_path, "--workers", "2", "--using", "processes") as process:
        deadline, killed = time.monotonic() + 60.0, False
        while not killed and process.poll() is None and time.monotonic() < deadline:
            if len(list(tmp_path.rglob("*.shard"))) >= 1:
                workers = [one for one in children_of(process.pid) if "spawn_main" in command_of(one)]
                os.kill(workers[-1], signal.SIGKILL)
                killed = True
            time.sleep(0.005)
        _, err = process.communicate(timeout=120.0)
    assert killed
    assert process.returncode == 0, err.decode()
    assert table_hash(tmp_path) == undisturbed
    assert files_in(tmp_path) == DONE


def test_units_are_as_many_as_the_tests_say(recipe: Path) -> None:
    from opacity.pipeline.inputs import load_inputs
    from opacity.pipeline.units import parted
    from opacity.recipe.load import load_recipe

    loaded = load_recipe(recipe)
    assert len(parted(loaded, load_inputs(loaded).lines, "")) == UNITS


def test_units_of_several_processors_are_named(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, recipe: Path) -> None:
    """The last bits of a sum may differ from one type to another: a table made on both says so."""
    import opacity
    from opacity.pipeline import units as units_module
    from opacity.pipeline.build import Crew, build_table

    loaded, kinds = opacity.load_recipe(recipe), iter(["one type", "another type"] * 5)
    monkeypatch.setattr(units_module, "processor", lambda: next(kinds))
    made = build_table(loaded, tmp_path, crew=Crew(1), quiet=True)
    told = "units were computed on several types of processor, whose last bits may differ: another type; one type"
    assert told in made.figures["warnings"]
