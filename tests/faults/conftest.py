"""A recipe of five units of work, and a way to build it as a command of its own."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
RECIPE = """\
[molecule]
name = "carbon monoxide"
formula = "CO"

[[line_list]]
format = "hitran"
files = ["{samples}/carbon-monoxide.par"]
reference = "the sample list"

[isotopologues]
abundance = "pure"

[partition_function]
source = "TIPS-2021"

[broadening]
mixture = {{ air = 1.0 }}

[profile]
cutoff = 25.0
tolerance = 1e-3

[grid]
wavenumber = {{ start = 2000.0, stop = 2300.0, step = 0.001 }}
temperature = [200.0, 250.0, 296.0, 350.0, 400.0, 450.0, 500.0, 550.0]
pressure = [0.001, 0.01, 0.1, 1.0]

[cross_section]
"""
UNITS = 5
NAME = "co.cross-section.h5"


@pytest.fixture(scope="session")
def recipe(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("faults") / "co.toml"
    path.write_text(RECIPE.format(samples=ROOT / "data-samples"), encoding="utf-8")
    return path


@pytest.fixture(scope="session")
def start(recipe: Path) -> Callable[..., subprocess.Popen[bytes]]:
    """Start `opacity build` of the recipe into a folder, in a process group of its own."""

    def run(folder: Path, *options: str) -> subprocess.Popen[bytes]:
        command = [sys.executable, "-m", "opacity", "build", str(recipe), "-o", str(folder), "--quiet", *options]
        environment = {**os.environ, "PYTHONPATH": str(ROOT)}
        pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE}
        return subprocess.Popen(command, env=environment, start_new_session=True, **pipes)

    return run


@pytest.fixture(scope="session")
def build(start: Callable[..., subprocess.Popen[bytes]]) -> Callable[..., tuple[int, str, str]]:
    """Build to the end: exit code, stdout, stderr."""

    def run(folder: Path, *options: str) -> tuple[int, str, str]:
        with start(folder, *options) as process:
            out, err = process.communicate(timeout=300.0)
            return process.returncode, out.decode(), err.decode()

    return run


@pytest.fixture(scope="session")
def undisturbed(tmp_path_factory: pytest.TempPathFactory, build: Callable[..., tuple[int, str, str]]) -> str:
    """The sha256 of the table that one worker makes."""
    folder = tmp_path_factory.mktemp("undisturbed")
    code, _, err = build(folder, "--workers", "1")
    assert code == 0, err
    return table_hash(folder)


def table_hash(folder: Path) -> str:
    return hashlib.sha256((folder / NAME).read_bytes()).hexdigest()


def files_in(folder: Path) -> list[str]:
    """Every file under a folder, by its path from there."""
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file())
