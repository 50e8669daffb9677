"""The command `check`: what it finds, which recipe it takes, and what it does without one."""

from __future__ import annotations

import json

import pytest

from opacity.errors import problem

BUILT_OF = ["integrity", "closure", "audit against the exact sum", "band all"]


def one_line(text: str) -> str:
    """Words in a row, however they were wrapped."""
    return " ".join(text.split())


WRONG_BAND = """
[[band_strength]]
name = "R(0)"
range = [2146.5, 2147.7]
strength = 5e-20
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.01
source = "invented to be wrong"
"""


def test_a_check_that_differs_fails_the_build_and_the_check(opacity, write_recipe, tmp_path):
    path = write_recipe(extra=WRONG_BAND)
    code, out, err = opacity("build", path, "-o", tmp_path / "out")
    assert code == 1
    assert "band R(0)" in out
    assert "differs" in out
    assert "band R(0) (recipe): more than the band allows; " in " ".join(err.split())
    assert err.endswith("\na check differs: do not use this table before you know why\n")
    assert (tmp_path / "out" / "co.cross-section.h5").is_file()
    code, out, _ = opacity("build", path, "-o", tmp_path / "out", "--json")
    assert code == 1
    assert json.loads(out)["passed"] is False
    for target in (path, tmp_path / "out" / "co.cross-section.h5"):
        code, out, _ = opacity("check", target, "-o", tmp_path / "out", "--json")
        assert code == 1
        assert json.loads(out)["passed"] is False
    (tmp_path / "out" / "co.log.json").unlink()
    code, out, _ = opacity("check", tmp_path / "out" / "co.cross-section.h5")
    assert code == 1
    assert "recipe not at hand" in out


def test_check_finds_the_recipe_by_the_log_and_repeats_the_build(opacity, table):
    code, out, err = opacity("check", table, "--json")
    assert (code, err) == (0, "")
    found = json.loads(out)
    assert [row["check"] for row in found["results"]] == BUILT_OF
    assert [row["verdict"] for row in found["results"]] == ["agrees", "agrees", "agrees", "cannot judge"]
    assert found["basis"].startswith(f"recomputed from {table.parent.parent}/co.toml with seed ")
    code, out, _ = opacity("show", table, "--json")
    assert json.loads(out)["checks"]["audit"] == found["figures"]["audit"]


def test_check_of_a_recipe_looks_for_its_table(opacity, project):
    code, out, _ = opacity("check", "co.toml")
    assert code == 0
    assert out.startswith("table  tables/co.cross-section.h5\nbasis  recomputed from co.toml with seed ")
    assert "integrity                    agrees" in out
    assert "all blocks of 4 spectra match their sha256" in out
    assert "interpolating at the middle of 1 cell: " in out


def test_check_with_another_seed_draws_other_points(opacity, table):
    worst = []
    for seed in ("7", "7", "8"):
        code, out, _ = opacity("check", table, "--seed", seed, "--quiet", "--json")
        assert code == 0
        found = json.loads(out)
        assert found["basis"].endswith(f"with seed {seed}")
        worst.append(found["figures"]["audit"])
    assert worst[0] == worst[1]
    assert worst[0] != worst[2]


def test_check_without_the_recipe_says_so(opacity, table):
    (table.parent / "co.log.json").unlink()
    code, out, _ = opacity("check", table)
    assert code == 0
    words = "recipe not at hand: all but integrity as stored by the build; --recipe repeats them from the lines"
    assert one_line(out).startswith(f"table {table} basis {words} check verdict")
    code, out, _ = opacity("check", table, "--recipe", "co.toml", "--json")
    assert code == 0
    assert json.loads(out)["basis"].startswith("recomputed from co.toml")


@pytest.mark.parametrize("log", ["", "[]", "{}", '{"recipe": 3}', '{"recipe": "/no/such.toml"}', "\\u0000{"])
def test_a_log_that_is_no_log_is_no_recipe(opacity, table, log):
    (table.parent / "co.log.json").write_text(log, encoding="utf-8")
    code, out, _ = opacity("check", table)
    assert code == 0
    assert "recipe not at hand" in out


def test_a_recipe_that_changed_since_is_refused_only_if_it_was_asked_for(opacity, table, project):
    recipe = project / "co.toml"
    recipe.write_text(recipe.read_text().replace("tolerance = 1e-3", "tolerance = 1e-2"))
    for words in ([table, "--recipe", recipe], [recipe]):
        code, out, err = opacity("check", *words)
        assert (code, out) == (1, "")
        assert err.endswith(
            f"co.cross-section.h5: was not built from {recipe} as it stands now;"
            " build it again, or check it with the recipe it was built from\n"
        )
    # The table is as good as it was: its log names the recipe, and nobody said that it must be that one.
    code, out, err = opacity("check", table, "--json")
    assert (code, err) == (0, "")
    found = json.loads(out)
    assert [row["check"] for row in found["results"]] == BUILT_OF
    assert found["basis"].startswith(f"recipe of the log not used (was not built from {recipe} as it stands now): all")
    recipe.write_text("no recipe at all")
    code, out, err = opacity("check", table)
    assert (code, err) == (0, "")
    assert "recipe of the log not used (" in one_line(out)
    assert "not valid TOML" in one_line(out)


def test_a_list_that_changed_since_is_refused_only_if_the_recipe_was_asked_for(
    opacity, write_recipe, tmp_path, samples
):
    lines = tmp_path / "lines.par"
    lines.write_bytes((samples / "carbon-monoxide.par").read_bytes())
    path = write_recipe("co", (f"{samples}/carbon-monoxide.par", "lines.par"))
    assert opacity("build", path, "-o", tmp_path, "--quiet")[0] == 0
    lines.write_bytes(lines.read_bytes()[: 161 * 200])
    code, out, err = opacity("check", path, "-o", tmp_path)
    assert (code, out) == (1, "")
    assert err.endswith(f"line lists of {path} changed since the table was built; build it again\n")
    code, out, err = opacity("check", tmp_path / "co.cross-section.h5")
    assert (code, err) == (0, "")
    assert f"line lists of {path} changed since the table was built" in one_line(out)


def test_check_of_a_recipe_without_a_table_says_to_build_it(opacity, project):
    code, out, err = opacity("check", "co.toml", "-o", "elsewhere")
    assert (code, err) == (0, "")
    assert "co.toml: nothing is missing; there is no table yet" in one_line(out)
    assert one_line(out).endswith(
        "`opacity plan co.toml -o elsewhere`, which reads the lines; then `opacity build co.toml -o elsewhere`"
    )
    (project / "tables" / "co.cross-section.h5").unlink()
    code, out, _ = opacity("check", "co.toml", "--json")
    assert code == 0
    assert json.loads(out) == {
        "recipe": "co.toml",
        "complete": True,
        "table": None,
        "next": ["opacity plan co.toml", "opacity build co.toml"],
    }


def test_check_names_the_damaged_block(opacity, table):
    data = bytearray(table.read_bytes())
    from opacity.tables.read import open_table

    with open_table(table) as opened:
        place = opened._values.id.get_chunk_info(3).byte_offset + 30
    data[place] ^= 1
    table.write_bytes(data)
    code, out, err = opacity("check", table)
    assert (code, out) == (1, "")
    assert err.startswith(f"{table}: damaged: block cross_section[1, 1, 0:101] (480 K, 1 bar, 2146.9 to 2147.3 cm-1)")
    assert err.count("\n") == 1
    # And it is mended by building again.
    assert opacity("build", "co.toml", "--quiet")[0] == 0
    assert opacity("check", table)[0] == 0


def test_figures_that_json_does_not_know_are_null(opacity, table, monkeypatch):
    from opacity.check.result import CheckResult
    from opacity.check.run import CheckReport
    from opacity.pipeline import recheck

    row = CheckResult("audit", "differs", "planted", float("inf"), 1e-3)
    report = CheckReport((row,), {"audit": {"largest_error": float("nan"), "list": [1.0, float("-inf")]}})
    monkeypatch.setattr(recheck, "check_table_file", lambda *a: (report, problem("a", "b")))
    code, out, _ = opacity("check", table, "--json")
    assert code == 1

    def refuse(name):
        raise AssertionError(name)

    found = json.loads(out, parse_constant=refuse)
    assert found["results"][0]["value"] is None
    assert found["figures"]["audit"] == {"largest_error": None, "list": [1.0, None]}
    code, out, _ = opacity("check", table)
    assert code == 1
    assert "+inf" in out
