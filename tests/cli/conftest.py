"""A table built once for the tests of commands that only read."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from opacity.pipeline.build import build_table
from opacity.recipe.load import load_recipe

BAND = """
[[band_strength]]
name = "all"
range = [2000.0, 2250.0]
strength = 1.013e-17
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.007
source = "a publication"
"""


@pytest.fixture(scope="session")
def built_once(tmp_path_factory: pytest.TempPathFactory, recipe_text: Callable[..., str]) -> Path:
    folder = tmp_path_factory.mktemp("cli")
    recipe = folder / "co.toml"
    text = recipe_text(wavenumber="{ start = 2146.9, stop = 2147.3, step = 0.004 }", extra=BAND)
    recipe.write_text(text, encoding="utf-8")
    build_table(load_recipe(recipe), folder / "tables", quiet=True)
    return folder


@pytest.fixture
def project(built_once: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder, the current one, with `co.toml` and its table in `tables`; both may be changed."""
    folder = tmp_path / "project"
    shutil.copytree(built_once, folder)
    log = folder / "tables" / "co.log.json"
    log.write_text(log.read_text(encoding="utf-8").replace(str(built_once), str(folder)), encoding="utf-8")
    monkeypatch.chdir(folder)
    return folder


@pytest.fixture
def table(project: Path) -> Path:
    return project / "tables" / "co.cross-section.h5"
