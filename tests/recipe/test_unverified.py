"""Values from memory: found wherever a recipe says so, refused unless they are accepted, and told of in the table."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import pytest

from opacity.recipe.load import load_recipe
from opacity.recipe.marks import comments_of, undecided
from opacity.recipe.unverified import unverified_values

DEFAULT = """[broadening.default.H2]
gamma = 0.07
exponent = 0.5
source = "from memory"

[profile]"""
IN_HYDROGEN = (("mixture = { air = 1.0 }", "mixture = { H2 = 1.0 }"), ("[profile]", DEFAULT))
BAND = """
[[band_strength]]
name = "R(0)"
range = [2146.5, 2147.7]
strength = 9.4e-20
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.01
source = "From memory"
"""


def keys(text: str) -> list[tuple[str, int]]:
    return [(one.name, one.line) for one in unverified_values(text)]


def test_every_way_to_say_it_is_found_in_the_order_of_the_file() -> None:
    text = '\n'.join([
        "[molecule]",
        'name = "from memory"  # no source: a name',
        "mass = 44.0  # g/mol, From Memory",
        "# nothing here is from memory",
        "[[line_list]]",
        'reference = "A list (from memory)"',
        "files = [",
        '    "a # from memory",  # but this file is, from memory',
        "]",
        "[broadening.default.H2]",
        'gamma = 0.07  # a book, table 3',
        'source = "from memory, Smith?"  # from memory',
        "[profile]",
        'chi = "Tonkov-1996"',
        'plinth = false # "from memory"',
    ])  # fmt: skip
    assert keys(text) == [
        ("molecule.mass", 3),
        ("line_list[0]", 6),
        ("line_list[0].files[0]", 8),
        ("broadening.default.H2", 12),
        ("profile.chi", 14),
        ("profile.plinth", 15),
    ]
    assert keys(text.replace("\n", "\r\n")) == keys(text)


def test_comments_are_told_from_text_that_looks_like_them() -> None:
    text = (
        'a = "# DECIDE: no" # DECIDE: yes\nb = """\n# DECIDE: no\n""" # it\'s "DECIDE: so"\n[t]\n# c = 1 # DECIDE: c\n'
    )
    assert [(line, key) for line, key, _ in undecided(text)] == [(1, ("a",)), (4, ("b",)), (6, ("t", "c"))]
    assert undecided(text)[0][2] == "yes"
    assert [one.alone for one in comments_of(text)] == [False, False, True]


@pytest.mark.parametrize("command", ["plan", "build", "ingest"])
def test_a_recipe_with_values_from_memory_is_refused_by_line_and_key(opacity, write_recipe, tmp_path, command) -> None:
    path = write_recipe("co", *IN_HYDROGEN, extra=BAND)
    code, out, err = opacity(command, path, "-o", tmp_path / "out")
    assert (code, out) == (2, "")
    lines = path.read_text().splitlines()
    wanted = []
    for key, words in (("broadening.default.H2", "from memory"), ("band_strength[0]", "From memory")):
        number = lines.index(f'source = "{words}"') + 1
        wanted.append(
            f'{path}:{number}: {key}.source: {key} is from memory; expected a published source, found "{words}";'
            " look it up, or put accept_unverified = true at the top of the recipe"
        )
    assert err.splitlines() == wanted
    assert not (tmp_path / "out").exists()


def test_an_accepted_value_is_used_and_the_table_tells(opacity, write_recipe, tmp_path) -> None:
    head = ('[molecule]\nname = "carbon', 'accept_unverified = true\n[molecule]\nname = "carbon')
    path = write_recipe("co", head, *IN_HYDROGEN, extra=BAND)
    assert load_recipe(path).accept_unverified
    words = "values from memory are accepted: broadening.default.H2 (from memory), band_strength[0] (From memory)"
    code, out, _ = opacity("plan", path, "-o", tmp_path)
    assert code == 0
    assert f"warning: {words}" in " ".join(out.split())
    code, _, err = opacity("build", path, "-o", tmp_path)
    assert code == 0
    assert f"warning: {words}" in " ".join(err.split())
    table = tmp_path / "co.cross-section.h5"
    code, out, _ = opacity("show", table)
    assert words in " ".join(out.split())
    code, out, _ = opacity("show", table, "--json")
    stored = json.loads(out)["provenance"]["unverified"]
    assert [one["key"] for one in stored] == ["broadening.default.H2", "band_strength[0]"]
    for target in (table, path):
        code, out, _ = opacity("check", target, "-o", tmp_path)
        assert code == 0
        assert "accepted from memory: broadening.default.H2 (from memory), band" in " ".join(out.split())
    (tmp_path / "co.log.json").unlink()
    code, out, _ = opacity("check", table, "--json")
    assert json.loads(out)["figures"]["unverified"] == stored


def test_a_table_without_such_values_says_nothing_of_them(opacity, write_recipe, tmp_path) -> None:
    path = write_recipe()
    assert opacity("build", path, "-o", tmp_path)[0] == 0
    out = opacity("check", path, "-o", tmp_path)[1]
    assert "memory" not in out
    assert json.loads(opacity("show", tmp_path / "co.cross-section.h5", "--json")[1])["provenance"]["unverified"] == []


def test_the_key_in_the_wrong_place_and_of_the_wrong_kind(opacity, write_recipe) -> None:
    path = write_recipe("co", ("[cross_section]", "[cross_section]\naccept_unverified = true"))
    code, _, err = opacity("plan", path)
    assert code == 2
    assert err.endswith("put it at the top of the recipe, before the first section\n")
    head = ('[molecule]\nname = "carbon', 'accept_unverified = "yes"\n[molecule]\nname = "carbon')
    code, _, err = opacity("plan", write_recipe("co", head))
    assert code == 2
    assert 'accept_unverified: not a boolean; expected true or false, found "yes"' in err


def test_no_text_that_is_toml_trips_the_search() -> None:
    """Every recipe of the fuzzing corpus that is TOML, and all that ship, with comments planted on each line."""
    corpus = Path(__file__).parents[1] / "fuzz" / "corpus" / "recipe"
    texts = [path.read_bytes().decode("utf-8", "replace") for path in sorted(corpus.iterdir())]
    texts += [path.read_text() for path in sorted((Path(__file__).parents[2] / "recipes").glob("*.toml"))]
    tried = 0
    for text in texts:
        try:
            tomllib.loads(text.replace("\r\n", "\n"))
        except (ValueError, RecursionError):
            continue
        tried += 1
        lines = text.replace("\r\n", "\n").count("\n") + 1
        for one in (*undecided(text + "\n# DECIDE: x"), *unverified_values(text + "\n# from memory")):
            assert 1 <= (one.line if hasattr(one, "line") else one[0]) <= lines + 1
        assert [words for _, _, words in undecided(text + "\n# DECIDE: planted")][-1] == "planted"
    assert tried > 20
