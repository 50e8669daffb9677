"""Builds of k-coefficient tables: the same bits whoever does the units, stopped, damaged or starved, nothing left."""

from __future__ import annotations

import hashlib
import os
import random
import signal
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from opacity.errors import ResourceError
from opacity.pipeline.build import Crew, build_tables
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.kinds import k_units_of
from opacity.recipe.load import load_recipe
from opacity.tables.k_read import open_k_table
from opacity.tables.sealed import is_whole

from .conftest import RECIPE, ROOT, files_in

NAME = "k.k-coefficient.h5"
DONE = [NAME, "k.log.json"]
UNITS = 6
KILLS = int(os.environ.get("OPACITY_KILLS", "3"))
EDGES = "[0.0, 1990.0, 2100.0, 2147.0, 2150.0, 2300.0]"


@pytest.fixture(scope="session")
def k_recipe(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Bands whose first begins at 0: it has units with other temperatures than the rest."""
    text = RECIPE.format(samples=ROOT / "data-samples")
    for old, new in (
        ("start = 2000.0, stop = 2300.0, step = 0.001", "start = 0.0, stop = 2300.0"),
        ("[200.0, 250.0, 296.0, 350.0, 400.0, 450.0, 500.0, 550.0]", "[200.0, 296.0, 400.0, 550.0, 900.0]"),
        ("[0.001, 0.01, 0.1, 1.0]", "[0.5, 2.0]"),
        ("[cross_section]\n", f"[k_coefficient]\nbands = {{ edges = {EDGES} }}\ng_points = 4\n"),
    ):
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    path = tmp_path_factory.mktemp("k") / "k.toml"
    path.write_text(text, encoding="utf-8")
    return path


@pytest.fixture(scope="session")
def start_k(k_recipe: Path) -> Callable[..., subprocess.Popen[bytes]]:
    def run(folder: Path, *options: str) -> subprocess.Popen[bytes]:
        command = [sys.executable, "-m", "opacity", "build", str(k_recipe), "-o", str(folder), "--quiet", *options]
        pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE}
        environment = {**os.environ, "PYTHONPATH": str(ROOT)}
        return subprocess.Popen(command, env=environment, start_new_session=True, **pipes)

    return run


@pytest.fixture(scope="session")
def build_k(k_recipe: Path) -> Callable[..., str]:
    """Build in this process; the sha256 of the table, empty where there is none yet."""

    def run(folder: Path, crew: Crew | None = None, **more: int) -> str:
        build_tables(load_recipe(k_recipe), folder, crew=crew or Crew(1), quiet=True, **more)
        return k_hash(folder)

    return run


@pytest.fixture(scope="session")
def k_undisturbed(tmp_path_factory: pytest.TempPathFactory, build_k: Callable[..., str]) -> str:
    folder = tmp_path_factory.mktemp("undisturbed")
    found = build_k(folder)
    assert files_in(folder) == DONE
    return found


def k_hash(folder: Path) -> str:
    path = folder / NAME
    return hashlib.sha256(path.read_bytes()).hexdigest() if path.exists() else ""


def test_units_are_as_many_as_the_tests_say(k_recipe: Path) -> None:
    """Their nodes differ between bands."""
    recipe = load_recipe(k_recipe)
    units = k_units_of(recipe, load_inputs(recipe))
    assert len(units) == UNITS
    assert len({unit.rows for unit in units}) == UNITS
    pairs = {(band, row) for unit in units for band in range(unit.first, unit.last) for row in unit.rows}
    assert len(pairs) == 5 * 10 == sum(len(unit.rows) * (unit.last - unit.first) for unit in units)


def test_the_checks_agree(tmp_path: Path, build_k: Callable[..., str], k_undisturbed: str) -> None:
    assert build_k(tmp_path) == k_undisturbed
    with open_k_table(tmp_path / NAME) as table:
        assert {row["verdict"] for row in table.checks["results"]} == {"agrees"}


@pytest.mark.parametrize(
    "crew",
    [Crew(2), Crew(5), Crew(2, "processes"), Crew(2, scheduler="local")],
    ids=["2 threads", "5 threads", "2 processes", "dask"],
)
def test_whoever_does_the_units(tmp_path: Path, build_k: Callable[..., str], k_undisturbed: str, crew: Crew) -> None:
    if crew.scheduler:
        pytest.importorskip("distributed")
    assert build_k(tmp_path, crew) == k_undisturbed
    assert files_in(tmp_path) == DONE


def test_little_memory(tmp_path: Path, build_k: Callable[..., str], k_undisturbed: str) -> None:
    assert build_k(tmp_path, Crew(5), memory=500_000_000) == k_undisturbed


def test_tasks_in_any_order(tmp_path: Path, build_k: Callable[..., str], k_undisturbed: str) -> None:
    assert build_k(tmp_path, Crew(1, task=(2, 3))) == ""
    assert len(files_in(tmp_path)) == UNITS // 3
    for k in (4, 1, 3, 1):
        assert build_k(tmp_path, Crew(1, task=(k, 4))) == ""
    assert build_k(tmp_path, Crew(1, task=(2, 4))) == k_undisturbed
    assert files_in(tmp_path) == DONE


def test_damaged_shards_are_made_again(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, build_k: Callable[..., str], k_undisturbed: str
) -> None:
    """Before the build goes on, and while it puts the table together."""
    for k in (1, 2, 3):
        build_k(tmp_path, Crew(1, task=(k, 4)))
    shards = sorted(tmp_path.rglob("*.shard"))
    rng = random.Random(5)
    flip(shards[0], rng)
    shards[1].write_bytes(shards[1].read_bytes()[:-1])
    shards[2].write_bytes(b"")
    from opacity.pipeline import build as build_module

    real = build_module._put_together

    def damage_first(*given: object) -> object:
        for path in sorted(tmp_path.rglob("*.shard"))[3:5]:
            flip(path, rng)
        return real(*given)

    monkeypatch.setattr(build_module, "_put_together", damage_first)
    assert build_k(tmp_path) == k_undisturbed
    assert files_in(tmp_path) == DONE


def flip(path: Path, rng: random.Random) -> None:
    data = bytearray(path.read_bytes())
    data[rng.randrange(len(data))] ^= 1 << rng.randrange(8)
    path.write_bytes(data)


def test_a_table_is_kept_until_it_is_damaged(
    tmp_path: Path, k_recipe: Path, build_k: Callable[..., str], k_undisturbed: str
) -> None:
    build_k(tmp_path)
    written = (tmp_path / NAME).stat().st_mtime_ns
    (made,) = build_tables(load_recipe(k_recipe), tmp_path, quiet=True)
    assert made.reused
    assert (tmp_path / NAME).stat().st_mtime_ns == written
    flip(tmp_path / NAME, random.Random(11))
    (made,) = build_tables(load_recipe(k_recipe), tmp_path, crew=Crew(1), quiet=True)
    assert not made.reused
    assert k_hash(tmp_path) == k_undisturbed
    assert files_in(tmp_path) == DONE


def test_kill_at_random_moments(
    tmp_path: Path, start_k: Callable[..., subprocess.Popen[bytes]], build_k: Callable[..., str], k_undisturbed: str
) -> None:
    rng, kills = random.Random(3), 0
    while kills < KILLS:
        with start_k(tmp_path, "--workers", "2") as process:
            try:
                process.wait(timeout=rng.uniform(1.5, 6.0))
            except subprocess.TimeoutExpired:
                os.killpg(process.pid, signal.SIGKILL)
                kills += 1
        if process.returncode == 0:
            assert k_hash(tmp_path) == k_undisturbed
            (tmp_path / NAME).unlink()
        else:
            assert process.returncode == -signal.SIGKILL
            assert all(is_whole(path) for path in tmp_path.rglob("*.shard"))
            assert k_hash(tmp_path) in ("", k_undisturbed)
    assert build_k(tmp_path) == k_undisturbed
    assert files_in(tmp_path) == DONE


@pytest.mark.parametrize("call", ["write", "fsync", "replace"])
def test_a_disk_that_fails_at_every_point(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, build_k: Callable[..., str], k_undisturbed: str, call: str
) -> None:
    real, n, builds = getattr(os, call), 0, 0
    state = {"left": 0}

    def failing(*given: object, **named: object) -> object:
        state["left"] -= 1
        if state["left"] < 0:
            raise OSError(28, "No space left on device")
        return real(*given, **named)

    while True:
        with monkeypatch.context() as patch:
            patch.setattr(os, call, failing)
            state["left"] = n
            try:
                build_k(tmp_path)
                break
            except ResourceError as error:
                message = str(error)
        assert "No space left on device" in message
        assert "\n" not in message
        names = files_in(tmp_path)
        assert NAME not in names or k_hash(tmp_path) == k_undisturbed
        assert all(is_whole(tmp_path / name) for name in names if name not in DONE)
        n, builds = n * 2 + 1, builds + 1
    # Shards are not synced: what a crash takes of them is found out and made again.
    assert builds >= (1 if call == "fsync" else 2)
    assert k_hash(tmp_path) == k_undisturbed
    assert files_in(tmp_path) == DONE
