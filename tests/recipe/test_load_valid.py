from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from opacity.arguments import DefaultWidth
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Cutoff, CutoffStep, Recipe


def load(folder: Path, text: str, newline: str = "\n") -> Recipe:
    path = folder / "co.toml"
    path.write_bytes(text.replace("\n", newline).encode())
    return load_recipe(path)


def changed(text: str, old: str, new: str) -> str:
    assert text.count(old) == 1
    return text.replace(old, new)


def test_full_recipe_is_read_whole(folder: Path, full: str) -> None:
    recipe = load(folder, full)
    assert recipe.name == "co"
    assert recipe.text == full
    assert (recipe.molecule.name, recipe.molecule.formula, recipe.molecule.mass) == ("carbon monoxide", "CO", 28.0)
    assert isinstance(recipe.molecule.mass, float)
    assert recipe.abundance == {"(12C)(16O)": 0.9, "2": 0.1}
    assert recipe.partition_function.source == "file"
    assert recipe.partition_function.path == folder / "CO.pf"
    assert recipe.broadening.mixture == {"H2": 0.85, "He": 0.15}
    assert recipe.broadening.default == {"H2": DefaultWidth(0.07, 0.5, "from memory")}
    assert recipe.profile.cutoff == Cutoff((CutoffStep(25.0, 200.0), CutoffStep(100.0)))
    assert (recipe.profile.tolerance, recipe.profile.plinth) == (1e-4, True)


def test_line_lists_of_the_full_recipe(folder: Path, full: str) -> None:
    first, second = load(folder, full).line_lists
    assert first.paths == (folder / "lines/CO-a.par", folder / "lines/CO-b.par")
    assert (first.files, first.range, first.isotopologue) == (("lines/CO-*.par",), (0.0, 9000.0), None)
    assert (first.format, first.bad_records) == ("hitran", "stop")
    assert (second.format, second.bad_records, second.isotopologue) == ("hapi", "leave-out", "(12C)(16O)")
    assert second.paths == (folder / "lines/hot.data",)


def test_grid_of_the_full_recipe(folder: Path, full: str) -> None:
    grid = load(folder, full).grid
    np.testing.assert_array_equal(grid.wavenumber, np.arange(2000.0, 2010.5, 0.5))
    assert grid.temperature == (300.0, 1000.0)
    np.testing.assert_allclose(grid.pressure, np.logspace(-6, 2, 9), rtol=1e-14)
    assert len(grid.node_list()) == 18


def test_band_strength_of_the_full_recipe(folder: Path, full: str) -> None:
    (band,) = load(folder, full).band_strengths
    assert (band.name, band.range, band.strength, band.unit) == ("1-0", (2000.0, 2250.0), 1.013e-17, "cm/molecule")
    assert (band.temperature, band.uncertainty) == (296.0, 0.007)


def test_defaults_of_a_short_recipe(folder: Path) -> None:
    recipe = load(
        folder,
        'molecule = { name = "carbon monoxide", formula = "CO" }\n'
        'line_list = [{ format = "hitran", files = ["lines/CO-a.par"], reference = "r" }]\n'
        'partition_function.source = "TIPS-2021"\n'
        "broadening.mixture = { air = 1 }\n"
        "profile.cutoff = 25\n"
        "grid.wavenumber = { start = 2000, stop = 2001, resolving_power = 1e5 }\n"
        "grid.temperature = 300\n"
        "grid.pressure = 1\n"
        "cross_section = {}\n",
    )
    assert recipe.abundance == "terrestrial"
    assert recipe.molecule.mass is None
    assert recipe.profile.cutoff == Cutoff((CutoffStep(25.0),))
    assert (recipe.profile.tolerance, recipe.profile.plinth) == (1e-3, False)
    assert (recipe.grid.temperature, recipe.grid.pressure) == ((300.0,), (1.0,))
    assert recipe.grid.wavenumber.size == 51
    assert recipe.band_strengths == ()


def test_nodes_keep_their_order(folder: Path, full: str) -> None:
    text = changed(full, "temperature = [300.0, 1000]\n", "nodes = [[450, 0.1], [300.0, 1.0], [450, 1.0]]\n")
    start = text.index("pressure = { start")
    grid = load(folder, text[:start] + text[text.index("\n", start) :]).grid
    assert grid.nodes == ((450.0, 0.1), (300.0, 1.0), (450.0, 1.0))
    assert grid.node_list() == grid.nodes
    assert grid.temperature == (450.0, 300.0, 450.0)
    assert grid.pressure == (0.1, 1.0, 1.0)


@pytest.mark.parametrize("word", ["terrestrial", "pure"])
def test_abundance_by_word(folder: Path, full: str, word: str) -> None:
    assert load(folder, changed(full, '{ "(12C)(16O)" = 0.9, "2" = 0.1 }', f'"{word}"')).abundance == word


def test_byte_order_mark_and_crlf_change_nothing(folder: Path, full: str) -> None:
    recipe = load(folder, "\ufeff" + full, newline="\r\n")
    assert recipe.text == full.replace("\n", "\r\n")
    assert recipe.molecule == load(folder, full).molecule


def test_a_relative_recipe_finds_files_from_its_own_folder(
    folder: Path, full: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    (folder / "co.toml").write_text(full)
    (folder / "elsewhere").mkdir()
    monkeypatch.chdir(folder / "elsewhere")
    recipe = load_recipe("../co.toml")
    assert recipe.line_lists[1].paths == (Path("../lines/hot.data"),)


def test_a_folder_with_brackets_in_its_name(folder: Path, full: str) -> None:
    inner = folder / "[CO]*"
    inner.mkdir()
    os.rename(folder / "lines", inner / "lines")
    os.rename(folder / "CO.pf", inner / "CO.pf")
    assert len(load(inner, full).line_lists[0].paths) == 2


def test_loading_needs_neither_the_jit_nor_hapi_nor_h5py(folder: Path, full: str) -> None:
    load(folder, full)
    code = (
        "import sys; from opacity.recipe.load import load_recipe; load_recipe(sys.argv[1]); "
        "print([name for name in ('numba', 'hapi', 'h5py', 'scipy') if name in sys.modules])"
    )
    run = subprocess.run(
        [sys.executable, "-c", code, str(folder / "co.toml")], capture_output=True, text=True, check=True
    )
    assert run.stdout.strip() == "[]"
