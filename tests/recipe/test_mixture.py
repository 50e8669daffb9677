"""Recipes of several `[[species]]`, and what is wrong with them."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from opacity.errors import RecipeError
from opacity.recipe.load import load_recipe

TEXT = """\
[[species]]
recipe = "co.toml"
fraction = 0.3

[[species]]
recipe = "n2o.toml"
fraction = 0.7

[profile]
cutoff = 30.0

[grid]
wavenumber = { start = 2000.0, stop = 2010.0 }
temperature = [300.0, 1000.0]
pressure = [0.1]

[k_coefficient]
bands = { width = 5.0 }
"""


@pytest.fixture
def mixture(folder: Path, full: str) -> Callable[..., Path]:
    """Write a recipe of two species, with parts of it replaced."""
    (folder / "co.toml").write_text(full, encoding="utf-8")
    other = full.replace('"CO"', '"N2O"').replace("carbon monoxide", "nitrous oxide")
    (folder / "n2o.toml").write_text(other, encoding="utf-8")

    def write(*changes: tuple[str, str], name: str = "mixture") -> Path:
        text = TEXT
        for old, new in changes:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        path = folder / f"{name}.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return write


@pytest.fixture
def faults_of(mixture: Callable[..., Path], folder: Path) -> Callable[..., list[str]]:
    def load(*changes: tuple[str, str]) -> list[str]:
        with pytest.raises(RecipeError) as caught:
            load_recipe(mixture(*changes))
        return [line.replace(f"{folder}/", "") for line in caught.value.problems]

    return load


def test_species_have_the_grid_and_the_profile_of_the_mixture(mixture: Callable[..., Path]) -> None:
    recipe = load_recipe(mixture())
    assert [(one.recipe.molecule.formula, one.fraction) for one in recipe.species] == [("CO", 0.3), ("N2O", 0.7)]
    assert recipe.molecule.name == "a mixture of carbon monoxide and nitrous oxide"
    assert recipe.molecule.formula == "0.3 CO + 0.7 N2O"
    for part in recipe.parts:
        assert part.grid is recipe.grid
        assert part.profile is recipe.profile
        assert part.band_strengths == ()
        assert part.broadening.mixture == {"H2": 0.85, "He": 0.15}
    assert (recipe.cross_section, recipe.line_lists) == (False, ())


FAULTS = [
    (
        [('[[species]]\nrecipe = "n2o.toml"\nfraction = 0.7\n', "")],
        "1: species: not an array of tables; expected two or more [[species]] tables, each with recipe and fraction, "
        "found a list of 1",
    ),
    (
        [('"co.toml"', '"none.toml"')],
        '2: species[0].recipe: no such file; expected a recipe, found "none.toml"; names are looked for from this '
        "recipe's folder",
    ),
    (
        [("0.3", "0.0")],
        "3: species[0].fraction: impossible value; expected a number from 1e-30 to 1, found 0.0",
    ),
    (
        [("0.3", "nan")],
        "3: species[0].fraction: impossible value; expected a number from 1e-30 to 1, found nan",
    ),
    ([("fraction = 0.7\n", "")], "5: species[1].fraction: missing; expected a number from 1e-30 to 1"),
    (
        [("0.3", "0.4")],
        "1: species: too much; expected a sum of fractions of at most 1, found 1.1; fractions are mole fractions; "
        "what is left does not absorb",
    ),
    (
        [('recipe = "co.toml"\n', "")],
        "1: species[0].recipe: missing; expected the file name of a species' recipe, from this one's folder",
    ),
    ([('"n2o.toml"', '"co.toml"')], "6: species[1].recipe: a molecule twice; found CO"),
    (
        [("[profile]", '[molecule]\nname = "x"\n\n[profile]')],
        '9: molecule: unknown key; expected species, profile, grid, cross_section or k_coefficient, found "molecule"',
    ),
    ([("[profile]\ncutoff = 30.0\n", "")], "1: profile: missing; expected a section [profile] with cutoff"),
    (
        [("bands = { width = 5.0 }", "bands = { width = 3.0 }")],
        "18: k_coefficient.bands.width: does not fit the grid; expected a whole number of widths in 2000 to 2010 cm-1, "
        "found 3.33333 of 3 cm-1; choose a width that divides the range, or other ends of the grid",
    ),
]


@pytest.mark.parametrize("changes, expected", FAULTS)
def test_one_fault_gives_one_line(
    faults_of: Callable[..., list[str]], changes: list[tuple[str, str]], expected: str
) -> None:
    assert faults_of(*changes) == [f"mixture.toml:{expected}"]


def test_a_mixture_within_a_mixture(mixture: Callable[..., Path], faults_of: Callable[..., list[str]]) -> None:
    """Nested, naming itself, or one that names the first again: each is told without its species being read."""
    mixture(name="inner")
    mixture(('"co.toml"', '"mixture.toml"'), name="round")
    for name in ("inner", "mixture", "round"):
        expected = "2: species[0].recipe: is of several species itself; expected a recipe of one molecule"
        assert faults_of(('"co.toml"', f'"{name}.toml"')) == [f"mixture.toml:{expected}"]


def test_a_fault_of_a_species_names_its_own_file(folder: Path, faults_of: Callable[..., list[str]]) -> None:
    path = folder / "co.toml"
    path.write_text(path.read_text(encoding="utf-8").replace("mass = 28", "mass = 0"), encoding="utf-8")
    (line,) = faults_of()
    assert line.startswith("co.toml:5: molecule.mass: impossible value")


def test_the_step_is_needed_for_cross_sections(faults_of: Callable[..., list[str]]) -> None:
    (line,) = faults_of(("[k_coefficient]", "[cross_section]\n\n[k_coefficient]"))
    assert line == "mixture.toml:13: grid.wavenumber.step: missing; expected a number from 1e-09 to 1e+06 cm-1"
