"""Each command from its words to its output: text for people, JSON for programs, exit codes."""

from __future__ import annotations

import json
import re
import tomllib
from pathlib import Path

import numpy as np
import pytest

from opacity.check import table_facts
from opacity.cli import commands


def test_plan_tells_what_a_build_needs(opacity, project):
    code, out, err = opacity("plan", "co.toml")
    assert code == 0
    assert err == ""
    assert "4 nodes of 101 points" in out
    assert "26 lines in reach of the grid (202 records read)" in out
    assert "left out: 176 lines, beyond the reach of the grid" in out
    assert "assumed for 26 lines: no pressure shift by air given: taken as 0" in out
    assert "tables/co.cross-section.h5" in out
    assert "by cells" not in out
    assert re.search(r"time +about \S+ s of one core for spectra, checks and writing\n", out)
    code, out, _ = opacity("plan", "co.toml", "--json")
    assert 0.0 <= json.loads(out)["by_cells"] <= 1.0


def test_plan_tells_the_time_of_all_its_workers(opacity, project, monkeypatch):
    monkeypatch.setattr("opacity.pipeline.plan.allowed_cpus", lambda: 2)
    for name in ("FEWEST_VALUES", "MOST_VALUES"):
        monkeypatch.setattr(f"opacity.pipeline.units.{name}", 101)
    made = json.loads(opacity("plan", "co.toml", "--json")[1])
    assert (made["workers"], made["units"]) == (2, 4)
    assert 0.5 * made["seconds"] <= made["wall_seconds"] < made["seconds"]
    text = opacity("plan", "co.toml")[1]
    assert re.search(r"time +about \S+ s of one core for spectra, checks and writing; \S+ s with 2 workers\n", text)


def test_chi_factors_from_memory_are_told(opacity, write_recipe):
    chi = ("tolerance = 1e-3", 'tolerance = 1e-3\nchi = "Tonkov-1996"')
    code, _, err = opacity("plan", write_recipe("co", chi))
    assert code == 2
    assert "co.toml:22: profile.chi: a value from memory; expected a published source, found" in err
    path = write_recipe("co", chi, ("[molecule]", "accept_unverified = true\n[molecule]"))
    text = one_line(opacity("plan", path)[1])
    assert "warning: chi factors Tonkov-1996: Tonkov et al. 1996, Appl. Opt. 35, 4863 (constants from memory);" in text
    assert "warning: the chi factors Tonkov-1996 are for pure CO2 and are used for CO" in text


def test_plan_warns(opacity, write_recipe):
    path = write_recipe(wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.01 }")
    code, out, _ = opacity("plan", path, "-o", "elsewhere")
    assert code == 0
    assert "warning: the step is too coarse at 2 of 4 nodes: at 296 K, 0.01 bar 50 % of the strength" in one_line(out)
    assert "elsewhere/co.cross-section.h5" in out


def one_line(text: str) -> str:
    """Words in a row, however they were wrapped."""
    return " ".join(text.split())


def test_plan_is_printed_even_where_it_does_not_fit(opacity, write_recipe, monkeypatch):
    monkeypatch.setattr("opacity.pipeline.plan.free_disk", lambda folder: 1000)
    path = write_recipe()
    for option in ([], ["--json"]):
        code, out, err = opacity("plan", path, *option)
        assert code == 1
        assert err.startswith(f"warning: {path}: the build does not fit in disk; expected at most 0.001 MB, found 1.0")
        assert err.count("\n") == 1
        assert "4 nodes of 1001 points" in out or json.loads(out)["points"] == 1001
    code, out, err = opacity("build", path)
    assert (code, out) == (1, "")
    assert err.startswith(f"{path}: the build does not fit in disk;")


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
    words = (
        r"interpolating at the middle of 1 cell: half of the points within [0-9.]+ %, 99 % within [0-9.]+ %: not judged"
    )
    assert re.search(words, one_line(out))
    assert rows[-1].startswith(f"table: {tmp_path}/out/co.cross-section.h5 (4 nodes, ")
    code, out, _ = opacity("build", path, "-o", tmp_path / "out", "--workers", "2")
    assert code == 0
    assert out.splitlines()[-1].startswith(f"table: {tmp_path}/out/co.cross-section.h5 (up to date, ")
    assert max(len(row) for row in rows if str(tmp_path) not in row) <= 100


def test_build_quietly_prints_one_line(opacity, write_recipe, tmp_path):
    code, out, err = opacity("build", write_recipe(), "-o", tmp_path / "out", "--quiet")
    assert (code, err) == (0, "")
    assert out.startswith("table: ")
    assert out.count("\n") == 1


COARSE = {"wavenumber": "{ start = 2145.0, stop = 2149.0, step = 0.01 }"}


@pytest.mark.parametrize("options", [[], ["--quiet"], ["--json"]], ids=str)
def test_build_warns_on_stderr_before_the_work_and_again_when_it_keeps_the_table(
    opacity, write_recipe, tmp_path, options
):
    for kept in (False, True):
        code, out, err = opacity("build", write_recipe(**COARSE), "-o", tmp_path / "out", *options)
        assert code == 0
        assert err.startswith("warning: the step is too coarse at 2 of 4 nodes: at 296 K, 0.01 bar 50 % of the")
        assert err.count("warning") == 1
        assert max(map(len, err.splitlines())) <= 100
        assert ("too coarse at 2 of 4 nodes: at 296 K, 0.01 bar 50 %" in out) is (options == ["--json"])
        if options == ["--json"]:
            found = json.loads(out)
            assert found["reused"] is kept
            assert found["warnings"][0].startswith("the step is too coarse")
            assert found["assumptions"] == [{"what": "no pressure shift by air given: taken as 0", "lines": 29}]
            assert found["left_out"] == {"beyond the reach of the grid": 173}


def test_a_warning_is_told_before_a_build_that_fails(opacity, write_recipe, tmp_path, monkeypatch):
    from opacity.pipeline import units as units_module

    def fail(*_):
        raise MemoryError

    monkeypatch.setattr(units_module, "compute", fail)
    code, _, err = opacity("build", write_recipe(**COARSE), "-o", tmp_path / "out", "--quiet")
    assert code == 1
    assert err.startswith("warning: the step is too coarse")
    assert err.splitlines()[-1].startswith("not enough memory")


def test_notes_are_told_apart_from_assumptions(opacity, tmp_path, write_recipe, samples):
    rows = (samples / "carbon-monoxide.par").read_text().splitlines(keepends=True)
    (tmp_path / "turned.par").write_text("".join(reversed(rows)))
    path = write_recipe("co", (f"{samples}/carbon-monoxide.par", "turned.par"))
    code, out, _ = opacity("plan", path)
    assert code == 0
    assert "note: 201 records, out of order in wavenumber: sorted\n" in out
    assert out.count("assumed") == 1


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
        "stored as float32",
        "isotopologues (12C)(16O) 1",
        "partition TIPS-2021, valid 20 to 9000 K",
        "cut-off 25 cm-1",
        "plinth kept",
        "tolerance 0.001",
        "left out 176 lines, beyond the reach of the grid",
        "assumed for 26 lines: no pressure shift by air given: taken as 0",
    ):
        assert words in one_line(out)
    assert out.splitlines()[-1] == f"table: {table}"
    code, out, _ = opacity("show", table, "--json")
    found = json.loads(out)
    assert code == 0
    assert found["temperature"] == [296.0, 480.0]
    assert found["wavenumber"] == {"first": 2146.9, "last": 2147.3, "points": 101}
    assert found["stored_as"] == "float32"


@pytest.mark.parametrize("dtype, why", [("<f4", ""), ("<f8", " (values below 1e-37, where float32 loses digits)")])
def test_show_says_why_values_take_eight_bytes(dtype, why):
    class Stored:
        pass

    Stored.dtype = np.dtype(dtype)
    assert table_facts._stored_as(Stored) == f"{np.dtype(dtype).name}{why}"


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
    assert out.splitlines()[-2:] == [f"table: {table}", f"picture: {tmp_path}/co.png"]
    assert (tmp_path / "co.png").read_bytes().startswith(b"\x89PNG\r\n")
    code, out, err = opacity("show", table, "--plot", tmp_path / "2.png", "--json")
    assert code == 0
    assert err == f"picture: {tmp_path}/2.png\n"
    assert json.loads(out)["formula"] == "CO"


def test_show_tells_cutoffs_fractions_and_warnings_of_the_build(opacity, write_recipe, tmp_path):
    path = write_recipe(
        "co",
        ('abundance = "pure"', 'abundance = { "1" = 0.25 }'),
        ("tolerance = 1e-3", "tolerance = 1e-4\nplinth = true"),
        cutoff="[{ to_pressure = 0.1, cutoff = 10.0 }, { cutoff = 25.0 }]",
        nodes="temperature = [296.0, 800.0]\npressure = [0.01, 1.0]",
    )
    assert opacity("build", path, "-o", tmp_path, "--quiet")[0] == 0
    out = one_line(opacity("show", tmp_path / "co.cross-section.h5")[1])
    for words in (
        "isotopologues (12C)(16O) 0.25",
        "cut-off 10 cm-1 up to 0.1 bar, then 25 cm-1",
        "plinth removed",
        "tolerance 0.0001",
        "warning a list made for 296 K lacks hot lines, and the grid goes to 800 K",
    ):
        assert words in out


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
    *unknown, last = out.splitlines()
    assert last == f"{formula}.toml: fill in what is marked DECIDE; `opacity check {formula}.toml` says what is missing"
    words = f"{formula}: not in hapi's tables; give its mass and a partition-function file, or mend it"
    assert unknown == ([] if known else [words])
    text = (tmp_path / f"{formula}.toml").read_text()
    recipe = tomllib.loads(text)
    assert recipe["molecule"]["formula"] == formula
    assert recipe["partition_function"]["source"] == ("TIPS-2021" if known else "file")
    assert ("mass = 28.01" in text) is not known
    assert recipe["isotopologues"]["abundance"] == ("terrestrial" if known else "pure")
    assert all(f"# [broadening.default.{name}]" in text for name in recipe["broadening"]["mixture"])
    assert all(
        "DECIDE" in line for line in text.splitlines() if line.startswith(("wavenumber", "temperature = {", "pres"))
    )
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
    assert opacity("new", "CO", "-o", "-") == (0, Path("other.toml").read_text(), "")
    assert not Path("-").exists()
    code, out, err = opacity("new", "FeH", "-o", "-")
    assert (code, tomllib.loads(out)["molecule"]["formula"]) == (0, "FeH")
    assert err.startswith("FeH: not in hapi's tables; ")
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
