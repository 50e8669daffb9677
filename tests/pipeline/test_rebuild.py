"""A build where one has been before: what is kept, what is built again, what is cleared away."""

from __future__ import annotations

import hashlib
import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from opacity.errors import ResourceError
from opacity.pipeline import build as build_module
from opacity.pipeline import units as units_module
from opacity.pipeline.build import Crew, build_table
from opacity.recipe.load import load_recipe
from opacity.tables.read import open_table

SHORT = "{ start = 2146.9, stop = 2147.3, step = 0.004 }"


def built(path: Path, folder: Path, workers: int | None = None, **options):
    return build_table(load_recipe(path), folder, quiet=True, crew=Crew(workers), **options)


def sha256(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def left_in(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_a_second_build_keeps_the_table(write_recipe, tmp_path, monkeypatch):
    path = write_recipe(wavenumber=SHORT)
    first = built(path, tmp_path)
    stamp = first.table.stat().st_mtime_ns
    # Whether it is up to date is known without a line being read, whatever memory and disk there is.
    monkeypatch.setattr(build_module, "load_inputs", lambda *a: pytest.fail("lines were read"))
    monkeypatch.setattr(build_module, "make_plan", lambda *a: pytest.fail("planned"))
    second = built(path, tmp_path)
    assert second.reused
    assert second.plan is None
    assert second.figures == first.figures
    assert first.table.stat().st_mtime_ns == stamp


@pytest.mark.parametrize(
    "change",
    [
        {"tolerance": "1e-4"},
        {"cutoff": "24.0"},
        {"wavenumber": "{ start = 2146.9, stop = 2147.3, step = 0.002 }"},
        {"nodes": "temperature = [296.0, 481.0]\npressure = [0.01, 1.0]"},
        {"extra": "# a comment belongs to the recipe too\n"},
    ],
    ids=str,
)
def test_a_changed_recipe_builds_again(write_recipe, tmp_path, change):
    before = sha256(built(write_recipe(wavenumber=SHORT), tmp_path).table)
    made = built(write_recipe(**{"wavenumber": SHORT, **change}), tmp_path)
    assert not made.reused
    assert sha256(made.table) != before


def test_a_changed_list_and_other_packages_build_again(write_recipe, tmp_path, samples, monkeypatch):
    own = tmp_path / "lines.par"
    own.write_bytes((samples / "carbon-monoxide.par").read_bytes())
    path = write_recipe("co", (f"{samples}/carbon-monoxide.par", "lines.par"), wavenumber=SHORT)
    built(path, tmp_path)
    assert built(path, tmp_path).reused
    own.write_bytes(own.read_bytes()[: 161 * 150])
    assert not built(path, tmp_path).reused
    assert built(path, tmp_path).reused
    monkeypatch.setattr("opacity.pipeline.fingerprint.package_versions", lambda: {"numpy": "99"})
    assert not built(path, tmp_path).reused


def test_what_does_not_fit_is_refused_before_the_work(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(units_module, "compute", lambda *a: pytest.fail("found out too late"))
    monkeypatch.setattr("opacity.pipeline.plan.free_disk", lambda folder: 1000)
    announced = []
    with pytest.raises(ResourceError, match="the build does not fit in disk"):
        built(write_recipe(wavenumber=SHORT), tmp_path / "out", announce=announced.append)
    assert [plan.nodes for plan in announced] == [4]
    assert not (tmp_path / "out").exists()


def test_warnings_come_before_the_work_and_stay_in_the_table(write_recipe, tmp_path, monkeypatch):
    told = []
    real = units_module.compute

    def compute(*arguments):
        assert len(told) == 1
        return real(*arguments)

    monkeypatch.setattr(units_module, "compute", compute)
    path = write_recipe(wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.01 }")
    made = built(path, tmp_path, announce=lambda plan: told.extend(plan.warnings))
    assert told[0].startswith("the step is too coarse at 2 of 4 nodes")
    with open_table(made.table) as table:
        assert table.checks["warnings"] == told
    assert built(path, tmp_path).figures["warnings"] == told


def test_what_a_killed_build_left_is_removed_by_the_next(write_recipe, tmp_path):
    out = tmp_path / "out"
    path = write_recipe(wavenumber=SHORT)
    built(path, out)
    dead = killed_while_writing(out)
    assert len(left_in(out)) == 3
    assert built(path, out).reused
    assert left_in(out) == ["co.cross-section.h5", "co.log.json"]
    # What a process that lives, another host or another program has there is not ours to remove.
    host = dead.split("-")[1]
    others = [
        f".opacity-{host}-{os.getpid()}-0123456789abcdef.part",
        ".opacity-00000000-1-0123456789abcdef.part",
        ".0123456789abcdef.part",
        "opacity.part",
    ]
    for name in others:
        (out / name).touch()
    built(path, out)
    assert left_in(out) == sorted(["co.cross-section.h5", "co.log.json", *others])
    # Nobody can ask another host, but no write rests for a week.
    os.utime(out / others[1], (1e9, 1e9))
    built(path, out)
    assert left_in(out) == sorted(["co.cross-section.h5", "co.log.json", others[0], *others[2:]])


def killed_while_writing(folder: Path) -> str:
    """Kill a process of its own in the middle of a write; the name of the file that it leaves."""
    code = f"""
import os, signal
from pathlib import Path
from opacity.tables.atomic import write_atomically
write_atomically(Path({str(folder / "a.h5")!r}), b"x", lambda written: os.kill(os.getpid(), signal.SIGKILL))
"""
    before = set(left_in(folder))
    root = Path(build_module.__file__).parents[2]
    done = subprocess.run([sys.executable, "-c", code], cwd=root, check=False)
    assert done.returncode == -signal.SIGKILL
    (left,) = set(left_in(folder)) - before
    return left


@pytest.mark.parametrize("damage", ["flip", "cut", "empty", "not HDF5"])
def test_a_damaged_table_is_built_again(write_recipe, tmp_path, damage):
    path = write_recipe(wavenumber=SHORT)
    made = built(path, tmp_path)
    data = made.table.read_bytes()
    flipped = bytearray(data)
    with open_table(made.table) as table:
        place = table._values.id.get_chunk_info(2).byte_offset + 20
    flipped[place] ^= 0x10
    made.table.write_bytes({"flip": bytes(flipped), "cut": data[:5000], "empty": b"", "not HDF5": b"x" * 999}[damage])
    again = built(path, tmp_path)
    assert not again.reused
    assert made.table.read_bytes() == data
