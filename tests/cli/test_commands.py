"""Each command from its words to its output: text for people, JSON for programs, exit codes."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

import pytest

from opacity.cli import commands
from opacity.errors import problem

BUILT_OF = ["integrity", "closure", "audit against the exact sum", "band all"]


def test_plan_tells_what_a_build_needs(opacity, project):
    code, out, err = opacity("plan", "co.toml")
    assert code == 0
    assert err == ""
    assert "4 nodes of 101 points" in out
    assert "26 in reach of the grid (202 records read)" in out
    assert "left out: 176 lines, beyond the reach of the grid" in out
    assert "assumed for 26 lines: no pressure shift by air given: taken as 0" in out
    assert "tables/co.cross-section.h5" in out


def test_plan_warns(opacity, write_recipe):
    path = write_recipe(wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.01 }")
    code, out, _ = opacity("plan", path, "-o", "elsewhere")
    assert code == 0
    assert "warning: the step is too coarse at 2 of 4 nodes: at 296 K, 0.01 bar 50% of the strength" in out
    assert "elsewhere/co.cross-section.h5" in out


def test_plan_as_json(opacity, project):
    code, out, err = opacity("plan", "co.toml", "--json")
    assert (code, err) == (0, "")
    plan = json.loads(out)
    assert (plan["nodes"], plan["points"], plan["lines"]) == (4, 101, 26)
    assert plan["warnings"] == []


def test_build_prints_notes_checks_and_the_table(opacity, write_recipe, tmp_path):
    path = write_recipe()
    code, out, err = opacity("build", path, "-o", tmp_path / "out")
    assert code == 0
    assert err == ""
    rows = out.splitlines()
    assert "assumed for 29 lines: no pressure shift by air given: taken as 0" in rows
    assert any(row.startswith("closure") and " agrees " in row for row in rows)
    assert any(row.startswith("audit against the exact sum  agrees") for row in rows)
    assert any(row.startswith("between nodes (middles of 1 cells): half of the points within") for row in rows)
    assert rows[-1].startswith(f"table: {tmp_path}/out/co.cross-section.h5 (4 nodes, ")
    code, out, _ = opacity("build", path, "-o", tmp_path / "out", "--workers", "2")
    assert code == 0
    assert out.splitlines()[-1].endswith("co.cross-section.h5 is up to date: whole, and built from these inputs")


def test_build_quietly_prints_one_line(opacity, write_recipe, tmp_path):
    code, out, err = opacity("build", write_recipe(), "-o", tmp_path / "out", "--quiet")
    assert (code, err) == (0, "")
    assert out.startswith("table: ")
    assert out.count("\n") == 1


def test_build_as_json_prints_nothing_else(opacity, write_recipe, tmp_path):
    made = []
    for _ in range(2):
        code, out, err = opacity("build", write_recipe(), "-o", tmp_path / "out", "--json")
        assert (code, err) == (0, "")
        made.append(json.loads(out))
    assert [one["reused"] for one in made] == [False, True]
    assert made[0]["passed"] is True
    assert [row["verdict"] for row in made[0]["results"]] == ["agrees", "agrees"]
    assert made[0]["results"] == made[1]["results"]


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
    assert err == "a check differs: do not use this table before you know why\n"
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
    assert out.startswith("tables/co.cross-section.h5 (recomputed from co.toml with seed ")
    assert "integrity                    agrees" in out
    assert "all blocks of 4 spectra match their sha256" in out
    assert "between nodes (middles of 1 cells)" in out


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
    words = "(recipe not at hand: all but integrity as stored by the build; --recipe repeats them from the lines)"
    assert out.splitlines()[0] == f"{table} {words}"
    code, out, _ = opacity("check", table, "--recipe", "co.toml", "--json")
    assert code == 0
    assert json.loads(out)["basis"].startswith("recomputed from co.toml")


@pytest.mark.parametrize("log", ["", "[]", "{}", '{"recipe": 3}', '{"recipe": "/no/such.toml"}', "\\u0000{"])
def test_a_log_that_is_no_log_is_no_recipe(opacity, table, log):
    (table.parent / "co.log.json").write_text(log, encoding="utf-8")
    code, out, _ = opacity("check", table)
    assert code == 0
    assert "recipe not at hand" in out


def test_check_refuses_a_recipe_that_changed(opacity, table, project):
    recipe = project / "co.toml"
    recipe.write_text(recipe.read_text().replace("tolerance = 1e-3", "tolerance = 1e-2"))
    code, out, err = opacity("check", table)
    assert (code, out) == (1, "")
    assert err == (
        f"{table}: was not built from {recipe} as it stands now;"
        " build it again, or check it with the recipe it was built from\n"
    )


def test_check_refuses_a_list_that_changed(opacity, write_recipe, tmp_path, samples):
    lines = tmp_path / "lines.par"
    lines.write_bytes((samples / "carbon-monoxide.par").read_bytes())
    path = write_recipe("co", (f"{samples}/carbon-monoxide.par", "lines.par"))
    assert opacity("build", path, "-o", tmp_path, "--quiet")[0] == 0
    lines.write_bytes(lines.read_bytes()[: 161 * 200])
    code, out, err = opacity("check", tmp_path / "co.cross-section.h5")
    assert (code, out) == (1, "")
    assert err.endswith(f"line lists of {path} changed since the table was built; build it again\n")


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


def test_show_summarises(opacity, table):
    code, out, err = opacity("show", table)
    assert (code, err) == (0, "")
    for words in (
        "Absorption cross-section of carbon monoxide (CO), cm2 per molecule, grid",
        "296, 480 K",
        "0.01, 1 bar",
        "2146.9 to 2147.3 cm-1 (4.657 to 4.658 um), 101 points",
        "line list carbon-monoxide.par",
        "cite the sample list",
        "TIPS-2021",
        "air 1",
        "Gamache et al. 2021",
        f"table {table}",
    ):
        assert words in " ".join(out.split())
    code, out, _ = opacity("show", table, "--json")
    found = json.loads(out)
    assert code == 0
    assert found["temperature"] == [296.0, 480.0]
    assert found["wavenumber"] == {"first": 2146.9, "last": 2147.3, "points": 101}
    assert found["stored_as"] == "float32"


def test_a_table_of_another_make_is_shown_as_far_as_it_goes(opacity):
    table = Path(__file__).parents[1] / "tables" / "data" / "version-1.cross-section.h5"
    code, out, err = opacity("show", table)
    assert (code, out) == (1, "")
    assert err.startswith(f"{table}: provenance or checks are not as this version writes them (AttributeError: ")
    code, out, _ = opacity("show", table, "--json")
    assert code == 0
    assert json.loads(out)["format_version"] == 1
    code, out, _ = opacity("check", table)
    assert code == 0
    assert "integrity  agrees" in out


def test_show_draws(opacity, table, tmp_path):
    code, out, err = opacity("show", table, "--plot", tmp_path / "co.png", "--zoom", "2147.0,2147.2")
    assert (code, err) == (0, "")
    assert out.splitlines()[-1] == f"picture  {tmp_path}/co.png"
    assert (tmp_path / "co.png").read_bytes().startswith(b"\x89PNG\r\n")
    code, out, err = opacity("show", table, "--plot", tmp_path / "2.png", "--json")
    assert code == 0
    assert err == f"picture  {tmp_path}/2.png\n"
    assert json.loads(out)["formula"] == "CO"


def test_show_along_a_profile(opacity, write_recipe, tmp_path):
    nodes = ", ".join(f"[{300.0 + 10.0 * i}, 0.1]" for i in range(10))
    path = write_recipe(nodes=f"nodes = [{nodes}]", wavenumber="{ start = 2147.0, stop = 2147.2, step = 0.01 }")
    assert opacity("build", path, "-o", tmp_path, "--quiet")[0] == 0
    code, out, _ = opacity("show", tmp_path / "co.cross-section.h5")
    assert code == 0
    assert "10 nodes along a profile" in " ".join(out.split())
    assert "10 values from 300 to 390 K" in out


@pytest.mark.parametrize("formula, known", [("CO", True), ("H2O", True), ("XyZ", False)])
def test_new_writes_a_recipe_to_fill_in(opacity, tmp_path, monkeypatch, formula, known):
    monkeypatch.chdir(tmp_path)
    code, out, err = opacity("new", formula)
    assert (code, err) == (0, "")
    assert out == f"{formula}.toml: fill in what is marked `decide`, then run `opacity plan {formula}.toml`\n"
    text = (tmp_path / f"{formula}.toml").read_text()
    recipe = tomllib.loads(text)
    assert recipe["molecule"]["formula"] == formula
    assert recipe["partition_function"]["source"] == ("TIPS-2021" if known else "file")
    assert ("mass = 28.01" in text) is not known
    assert ("#   1   (12C)(16O)               0.986544\n" in text) is (formula == "CO")
    # What is not yet decided is an error of the recipe, not of the program.
    code, out, err = opacity("plan", f"{formula}.toml")
    assert (code, out) == (2, "")
    assert all(line.startswith(f"{formula}.toml") for line in err.splitlines())
    assert "line_list[1].reference" in err or "line_list[0].reference" in err


def test_new_overwrites_nothing(opacity, project):
    before = (project / "co.toml").read_bytes()
    code, out, err = opacity("new", "CO", "-o", "co.toml")
    assert (code, out) == (2, "")
    assert err == "co.toml: is there already; choose another name with -o\n"
    assert (project / "co.toml").read_bytes() == before
    assert opacity("new", "CO", "-o", "other.toml")[0] == 0
    assert (project / "other.toml").is_file()


@pytest.mark.parametrize("formula", ["", "co", "C O", "../CO", "CO;rm", "C\nO", "H₂O", "-CO+"])
def test_new_refuses_what_is_no_formula(opacity, tmp_path, monkeypatch, formula):
    monkeypatch.chdir(tmp_path)
    code, out, err = opacity("new", "--", formula)
    assert (code, out) == (2, "")
    assert err.startswith("formula: impossible formula; expected one such as CO or H2O, found ")
    assert err.count("\n") == 1
    assert list(tmp_path.iterdir()) == []


def test_every_command_has_a_function_and_help(opacity):
    code, out, _ = opacity("--help")
    assert code == 0
    for name in ("new", "plan", "build", "check", "show"):
        assert f"\n    {name} " in out
        assert callable(getattr(commands, name))
        assert opacity(name, "--help")[0] == 0


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
