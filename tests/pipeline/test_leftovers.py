"""What earlier builds, killed workers and files that are none may not do to a build."""

from __future__ import annotations

import dataclasses
import os
import signal
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor

import pytest

from opacity.errors import OpacityError
from opacity.kernels import jit
from opacity.line_list.text import read_text
from opacity.pipeline import build as build_module
from opacity.pipeline import cluster, fingerprint, plan
from opacity.pipeline.build import Crew, build_table
from opacity.pipeline.fingerprint import fingerprint as fingerprint_of
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.plan import make_plan
from opacity.pipeline.workers import Origin
from opacity.recipe.load import load_recipe
from opacity.tables.atomic import CarefulFile, temporary_path

SHORT = "{ start = 2140.0, stop = 2141.0, step = 0.01 }"


def test_shards_of_a_changed_recipe_go_and_those_of_tasks_stay(write_recipe, tmp_path, monkeypatch) -> None:
    path, out = write_recipe(wavenumber=SHORT), tmp_path / "out"
    shards = out / "co.shards"

    def kept() -> list[str]:
        return sorted(one.name for one in shards.glob("*.shard"))

    def fails(*_: object) -> None:
        raise OpacityError("stop here")

    monkeypatch.setattr(build_module, "_assemble", fails)
    with pytest.raises(OpacityError, match="stop here"):
        build_table(load_recipe(path), out, quiet=True)
    first = kept()
    path = write_recipe(wavenumber=SHORT, tolerance="1e-4")
    with pytest.raises(OpacityError, match="stop here"):
        build_table(load_recipe(path), out, crew=Crew(1, task=(1, 1)), quiet=True)
    both = kept()
    assert set(first) < set(both)
    # One that a killed worker left, of a process that no longer runs.
    dead = temporary_path(shards)
    dead = dead.with_name(dead.name.replace(f"-{os.getpid()}-", "-99999999-"))
    dead.write_bytes(b"x")
    with pytest.raises(OpacityError, match="stop here"):
        build_table(load_recipe(path), out, quiet=True)
    assert kept() == sorted(set(both) - set(first))
    assert not dead.exists()


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="the system has no pipes with names")
def test_a_pipe_is_refused_and_not_waited_for(tmp_path) -> None:
    path = tmp_path / "lines.par"
    os.mkfifo(path)
    for read in (read_text, fingerprint.file_sha256):
        with pytest.raises(OpacityError, match=r"lines\.par: not a file; expected a regular file"):
            read(path)
    command = [sys.executable, "-m", "opacity", "check", str(path)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode == 1
    assert done.stderr.splitlines()[-1].startswith(f"{path}: not a file")


def test_a_plan_that_cannot_fit_makes_no_trial(write_recipe, tmp_path, monkeypatch) -> None:
    recipe = load_recipe(write_recipe(wavenumber=SHORT))
    inputs = load_inputs(recipe)
    for name in ("_calibration", "_coarse_nodes"):
        place = plan if name == "_coarse_nodes" else sys.modules["opacity.pipeline.needs"]
        monkeypatch.setattr(place, name, lambda *_: pytest.fail("looked into"))
    made = make_plan(recipe, inputs, tmp_path, memory=1)
    assert "the build does not fit in memory" in made.obstacles[0]


def test_the_hash_of_the_kernels_is_made_once() -> None:
    """It names every unit."""
    jit.source_hash()
    before = jit.source_hash.cache_info().hits
    jit.source_hash()
    assert jit.source_hash.cache_info().hits == before + 1


def test_files_are_hashed_again_only_when_they_changed(write_recipe, tmp_path, samples) -> None:
    lines = tmp_path / "own.par"
    lines.write_bytes((samples / "carbon-monoxide.par").read_bytes())
    path = write_recipe("co", (f"{samples}/carbon-monoxide.par", "own.par"), wavenumber=SHORT)
    recipe = load_recipe(path)
    known = fingerprint_of(recipe)
    assert known.still_of(recipe)
    other = dataclasses.replace(known, content={**known.content, "packages": {}})
    assert not other.still_of(recipe)
    path.write_text(path.read_text() + "# more\n")
    assert not known.still_of(load_recipe(path))
    stamp = lines.stat()
    os.utime(lines, ns=(stamp.st_atime_ns, stamp.st_mtime_ns + 1))
    assert not known.still_of(recipe)


def test_threads_of_one_dask_worker_prepare_once(tmp_path, monkeypatch) -> None:
    made, did = [], []

    class Prepared:
        def __init__(self, origin: Origin) -> None:
            self.origin = origin

        def do(self, number: int) -> None:
            did.append((self.origin.inputs_sha256, number))

    def prepare(origin: Origin) -> Prepared:
        time.sleep(0.05)
        made.append(origin)
        return Prepared(origin)

    monkeypatch.setattr(cluster, "prepare_process", prepare)
    monkeypatch.setattr(cluster, "_prepared", [])
    origins = [Origin(tmp_path, tmp_path, tmp_path, name, 1, "cross-section") for name in ("a", "b")]
    with ThreadPoolExecutor(4) as executor:
        list(executor.map(lambda number: cluster._do(origins[0], number), range(4)))
        assert made == origins[:1]
        jobs = [(origin, number) for number in range(4) for origin in origins]
        list(executor.map(lambda job: cluster._do(*job), jobs))
    assert sorted(did) == sorted([("a", n) for n in range(4)] * 2 + [("b", n) for n in range(4)])


def test_a_signal_anywhere_within_hdf5_is_kept(tmp_path, monkeypatch) -> None:
    """And raised when HDF5 has returned."""
    for call, given in (("readinto", (bytearray(4),)), ("seek", (0, os.SEEK_END)), ("write", (b"x",))):
        file = CarefulFile(tmp_path / call)
        file.write(b"abcdefgh")
        with monkeypatch.context() as patched:
            for name in ("read", "write", "fstat"):
                patched.setattr(os, name, interrupted)
            getattr(file, call)(*given)
        with pytest.raises(KeyboardInterrupt):
            file.raise_failure()
        file.close()


def interrupted(*_: object) -> None:
    raise KeyboardInterrupt


@pytest.mark.skipif(os.name == "nt", reason="signals")
def test_a_terminated_worker_takes_its_file_along(tmp_path) -> None:
    program = f"""
import os, signal, time
from pathlib import Path
from opacity.pipeline.workers import Origin, start_process
from opacity.tables.atomic import temporary_path
folder = Path({str(tmp_path)!r})
start_process(Origin(folder / "none.toml", folder, folder, "", 1, "cross-section"))
temporary_path(folder).write_bytes(b"x")
(folder / "other.shard").write_bytes(b"x")
print("ready", flush=True)
time.sleep(60)
"""
    with subprocess.Popen([sys.executable, "-c", program], stdout=subprocess.PIPE) as process:
        assert process.stdout is not None
        assert process.stdout.readline() == b"ready\n"
        process.send_signal(signal.SIGTERM)
        assert process.wait(timeout=30) == 1
    assert [one.name for one in tmp_path.iterdir()] == ["other.shard"]


@pytest.mark.skipif(os.name == "nt", reason="signals")
@pytest.mark.parametrize("first, code", [(signal.SIGTERM, 75), (signal.SIGINT, 130)])
@pytest.mark.parametrize("second", [signal.SIGTERM, signal.SIGINT])
def test_a_second_signal_at_the_end_changes_nothing(first: int, code: int, second: int) -> None:
    """While the interpreter ends, which takes a while here."""
    program = """
import atexit, os, signal, sys, time
from opacity.cli import main
def work():
    os.kill(os.getpid(), int(sys.argv[1]))
    time.sleep(10)
main.main = lambda: main._tell(*main._failure(stopped()), False)
def stopped():
    try:
        work()
    except KeyboardInterrupt as error:
        return error
class Late:
    def __del__(self, kill=os.kill, process=os.getpid(), number=int(sys.argv[2])):
        kill(process, number)
sys.late = Late()
atexit.register(os.kill, os.getpid(), int(sys.argv[2]))
main.run()
"""
    command = [sys.executable, "-c", program, str(int(first)), str(int(second))]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=False)
    assert done.returncode == code, done.stderr
    assert "Traceback" not in done.stderr
