from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from opacity.errors import InputError, RecipeError
from opacity.recipe.downloads import HitranDownload, load_downloads
from opacity.recipe.load import load_recipe
from opacity.recipe.template import MoleculeFacts, recipe_template

RECIPES = Path(__file__).parents[2] / "recipes"
CO = MoleculeFacts("Carbon Monoxide", (("(12C)(16O)", 0.986544), ("(13C)(16O)", 0.011084)))


@pytest.fixture
def place(tmp_path: Path) -> Path:
    (tmp_path / "lines").mkdir()
    (tmp_path / "lines" / "CO.par").touch()
    (tmp_path / "partition-function.pf").touch()
    return tmp_path / "co.toml"


def filled(text: str) -> str:
    assert text.count('reference = ""') == 1
    return text.replace('reference = ""', 'reference = "a publication"')


@pytest.mark.parametrize("facts", [CO, None, MoleculeFacts('odd "name"\x7f\n')])
def test_template_loads_once_filled(place: Path, facts: MoleculeFacts | None) -> None:
    text = filled(recipe_template("CO", facts))
    if facts is not None and facts.name and "\n" in facts.name:
        assert tomllib.loads(text)["molecule"]["name"] == facts.name
        return
    place.write_text(text)
    recipe = load_recipe(place)
    assert recipe.molecule.formula == "CO"
    assert recipe.molecule.name == ("Carbon Monoxide" if facts else "CO")
    assert recipe.partition_function.source == ("TIPS-2021" if facts else "file")
    assert recipe.profile.cutoff.at(200.0) == 25.0
    assert recipe.profile.cutoff.at(201.0) == 100.0


def test_an_unfilled_template_names_what_is_open(tmp_path: Path) -> None:
    path = tmp_path / "co.toml"
    text = recipe_template("CO", None)
    path.write_text(text)
    with pytest.raises(RecipeError) as caught:
        load_recipe(path)
    keys = [line.split(": ")[1] for line in caught.value.problems]
    assert keys == ["line_list[0].files[0]", "line_list[0].reference", "partition_function.file"]
    for line in caught.value.problems:
        number = int(line.removeprefix(f"{path}:").split(":")[0])
        assert "DECIDE:" in text.splitlines()[number - 1]


def test_commented_parts_load_too(place: Path) -> None:
    text = filled(recipe_template("CO", CO)).replace("name.pf", "partition-function.pf")
    lines = [
        line[2:] if line.startswith(("# [", "# gamma", "# exponent", "# source", "# name", "# range", "# strength",
                                     "# unit", "# temperature =", "# uncertainty", "# bands",
                                     "# g_points", "# transmission_error")) else line
        for line in text.splitlines()
    ]  # fmt: skip
    place.write_text("\n".join(lines))
    recipe = load_recipe(place)
    assert recipe.line_lists[0].range == (0.0, 9000.0)
    assert recipe.broadening.default["H2"].gamma == 0.07
    assert recipe.band_strengths[0].name == "1-0"
    assert recipe.k_coefficient is not None
    assert recipe.k_coefficient.g_points is None


@pytest.mark.parametrize("key", ["urls", "hitran"])
def test_a_commented_origin_loads_and_says_what_is_to_be_fetched(place: Path, key: str) -> None:
    text = filled(recipe_template("CO", CO))
    assert text.count(f"\n# {key} = ") == 1
    text = text.replace(f"\n# {key} = ", f"\n{key} = ").replace("CO*.par", "CO.par")
    place.write_text(text.replace("\n# files = ", "\nfiles = "))
    (place.parent / "H2.broad").touch()
    recipe = load_recipe(place)
    (one,) = load_downloads(place)
    assert [download.path for download in one.downloads] == list(recipe.line_lists[0].paths)
    assert recipe.broadening.files == {"H2": place.parent / "H2.broad"}


@pytest.mark.parametrize("name", ["carbon-monoxide", "water"])
def test_recipes_on_lines_of_hitran_say_how_to_get_them(name: str) -> None:
    (one,) = load_downloads(RECIPES / f"{name}.toml")
    (query,) = one.downloads
    assert isinstance(query, HitranDownload)
    assert query.path == RECIPES / one.files[0]
    assert query.isotopologues == (1,)


def test_isotopologues_are_listed_by_local_number() -> None:
    text = recipe_template("CO", CO)
    assert "#   1   (12C)(16O)               0.986544\n#   2   (13C)(16O)               0.011084\n" in text


def test_no_line_is_too_wide() -> None:
    assert max(len(line) for line in recipe_template("ClONO2", CO).splitlines()) <= 120


@pytest.mark.parametrize("formula", ["", "co", 'C"O', "C O", "CO\n", "../CO"])
def test_what_is_no_formula_is_refused(formula: str) -> None:
    with pytest.raises(InputError, match=r"^formula: impossible formula; expected one such as CO or H2O, found"):
        recipe_template(formula, CO)
