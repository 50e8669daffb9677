"""Faults planted in tables of k-coefficients, whole and with their hashes made again: `opacity check` finds them."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from opacity.pipeline.build import Crew, build_tables
from opacity.pipeline.k_files import _table_of
from opacity.recipe.load import load_recipe
from opacity.tables.k_model import KTable
from opacity.tables.k_read import open_k_table
from opacity.tables.k_write import write_k_table

Opacity = Callable[..., tuple[int, str, str]]
SECTION = '[k_coefficient]\nbands = { width = 5.0 }\ng_points = 4\nweights = "fixed"\n'
AXIS = "{ start = 2140.0, stop = 2150.0 }"
NAME = "co.k-coefficient.h5"


@pytest.fixture
def project(write_recipe: Callable[..., Path], tmp_path: Path) -> Path:
    """A folder with co.toml and its table."""
    path = write_recipe("co", ("[cross_section]\n", SECTION), wavenumber=AXIS)
    build_tables(load_recipe(path), tmp_path, crew=Crew(1), quiet=True)
    return tmp_path


@pytest.fixture
def plant(project: Path) -> Callable[..., Path]:
    """Write the table again, with k, cells or anything else changed, as if a build had made it so."""

    def write(change: Callable[[np.ndarray, np.ndarray], dict[str, Any]]) -> Path:
        path = project / NAME
        with open_k_table(path) as table:
            k = np.array([[table.k(i, j) for j in range(2)] for i in range(2)])
            cells = np.array([[table.cells(i, j) for j in range(2)] for i in range(2)])
            from opacity.check.k_nodes import points_of

            whole: KTable = replace(_table_of(table, points_of(table)), k_coefficient=k, checks=table.checks)
            whole = replace(whole, fine_cells=cells)
            changed = replace(whole, **change(k, cells))
            target = project / "planted.h5"
            write_k_table(target, changed)
        target.replace(path)
        return path

    return write


def differs(opacity: Opacity, project: Path) -> tuple[int, set[str]]:
    code, out, err = opacity("check", project / "co.toml", "-o", project, "--quiet", "--json")
    if "results" not in json.loads(out):
        return code, set(err.splitlines()) or set(json.loads(out)["error"]["problems"])
    return code, {row["check"] for row in json.loads(out)["results"] if row["verdict"] == "differs"}


def test_an_untouched_table_agrees(opacity: Opacity, project: Path, plant: Callable[..., Path]) -> None:
    before = (project / NAME).read_bytes()
    plant(lambda k, cells: {})
    assert (project / NAME).read_bytes() == before
    assert differs(opacity, project) == (0, set())


def test_a_k_that_does_not_follow(opacity: Opacity, project: Path, plant: Callable[..., Path]) -> None:
    def change(k: np.ndarray, cells: np.ndarray) -> dict[str, Any]:
        k[1, 0, 1, 2] *= 1.0 + 2e-6
        return {"k_coefficient": k}

    plant(change)
    assert differs(opacity, project) == (1, {"k"})


def test_a_k_that_is_no_number_of_the_cells(opacity: Opacity, project: Path, plant: Callable[..., Path]) -> None:
    """An infinite relative difference must not hide: k where the cells have none."""

    def change(k: np.ndarray, cells: np.ndarray) -> dict[str, Any]:
        cells[0, 0, 0] = 0.0
        return {"fine_cells": cells}

    plant(change)
    code, found = differs(opacity, project)
    assert code == 1
    assert "k" in found


@pytest.mark.parametrize("what", ["pressures", "temperatures", "bands"])
def test_values_of_another_node(opacity: Opacity, project: Path, plant: Callable[..., Path], what: str) -> None:
    """k and cells changed alike, so that k follows from the cells: found by what is made again line by line."""

    def change(k: np.ndarray, cells: np.ndarray) -> dict[str, Any]:
        axis = {"temperatures": 0, "pressures": 1, "bands": 2}[what]
        return {"k_coefficient": np.flip(k, axis), "fine_cells": np.flip(cells, axis)}

    plant(change)
    code, found = differs(opacity, project)
    assert code == 1
    assert "fine cells" in found
    assert "k" not in found


def test_a_factor(opacity: Opacity, project: Path, plant: Callable[..., Path]) -> None:
    """Of 1 %, with k and cells alike."""
    plant(lambda k, cells: {"k_coefficient": 1.01 * k, "fine_cells": 1.01 * cells})
    code, found = differs(opacity, project)
    assert code == 1
    assert {"closure", "band means"} <= found


def test_a_table_of_another_recipe(opacity: Opacity, project: Path, write_recipe: Callable[..., Path]) -> None:
    """The recipe changed since, in its text or in its bands alone."""
    text = (project / "co.toml").read_text(encoding="utf-8")
    (project / "co.toml").write_text(text.replace("width = 5.0", "width = 2.5"), encoding="utf-8")
    code, (message,) = differs(opacity, project)
    assert code == 1
    assert message.startswith(f"{project / NAME}: was not built from {project / 'co.toml'} as it stands now")
    assert len(message.splitlines()) == 1


def test_bands_that_are_not_those_of_its_recipe(opacity: Opacity, project: Path, plant: Callable[..., Path]) -> None:
    plant(lambda k, cells: {"band_bounds": np.array([[2140.0, 2146.0], [2146.0, 2150.0]])})
    code, (message,) = differs(opacity, project)
    assert code == 1
    assert "its axes are not those of its recipe" in message


def test_a_promise_that_is_not_kept(opacity: Opacity, project: Path, plant: Callable[..., Path]) -> None:
    with open_k_table(project / NAME) as table:
        checks = table.checks
    checks["certificate"]["target"] = 1e-4
    plant(lambda k, cells: {"checks": checks})
    assert differs(opacity, project) == (1, {"transmission"})
