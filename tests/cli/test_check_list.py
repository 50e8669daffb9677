"""The command `check` of a line list: a look at it by itself."""

from __future__ import annotations

import json

import pytest


def one_line(text: str) -> str:
    return " ".join(text.split())


@pytest.mark.parametrize("ending", ["par", "data"])
def test_a_good_list_lacks_only_what_it_does_not_give(opacity, samples, ending):
    code, out, err = opacity("check", samples / f"carbon-monoxide.{ending}", "--json")
    assert (code, err) == (0, "")
    found = json.loads(out)
    assert (found["lines"], found["molecule"], found["isotopologues"]) == (202, "CO", ["(12C)(16O)"])
    assert found["ledger"]["read"] == found["ledger"]["kept"] == 202
    whats = {one["what"]: one["lines"] for one in found["findings"]}
    assert whats["no pressure shift by air"] == whats["no temperature exponent for self"] == 202
    assert all(what.startswith("no ") for what in whats)
    assert found["remarks"] == []


def test_planted_faults_are_found(opacity, samples, tmp_path):
    records = (samples / "carbon-monoxide.par").read_text().splitlines(keepends=True)
    strong = max(records, key=lambda record: float(record[15:25]))
    number = records.index(strong)
    doubled = f"{2.0 * float(strong[15:25]):10.3E}"
    records[number] = strong[:15] + doubled + strong[25:]
    path = tmp_path / "co.par"
    path.write_text("".join([*records[:100], records[99], *records[100:], "short\n"]))
    code, out, err = opacity("check", path)
    assert (code, err) == (0, "")
    text = one_line(out)
    assert "lines 203 of CO, 1886.458269 to 2289.716892 cm-1" in text
    assert "left out 1: record of the wrong length" in text
    assert "note 1: identical to another record of its file: both count, as the list says" in text
    assert "identical to another record" in text
    share = f"S and the strength from A differ by over 1 % (of 203 lines); between {float(strong[3:15]):.6g} and"
    assert share in text


def test_a_large_list_out_of_order_says_what_was_not_judged(opacity, samples, tmp_path, monkeypatch):
    from opacity.line_list import stream

    monkeypatch.setattr(stream.list_parts, "__defaults__", (1600,))
    lines = (samples / "carbon-monoxide.par").read_text().splitlines(keepends=True)
    path = tmp_path / "co.par"
    path.write_text("".join([*lines[100:], *lines[:100]]))
    code, out, _ = opacity("check", path)
    assert code == 0
    assert "the list is not in order of wavenumber: repeated records were looked for only among" in one_line(out)
    assert "`opacity ingest RECIPE`, which sorts the lines, counts them all" in one_line(out)


def test_more_than_a_band_allows_is_told_and_stops_nothing(opacity, samples, tmp_path):
    records = (samples / "carbon-monoxide.par").read_text().splitlines(keepends=True)
    path = tmp_path / "co.par"
    path.write_text("".join(f"{one[:15]}{1.1 * float(one[15:25]):10.3E}{one[25:]}" for one in records))
    code, out, _ = opacity("check", path)
    assert code == 0
    words = "band 1-0: more than the band allows; 1.1143e-17 against 1.0130e-17 cm/molecule, +10.0"
    assert words in one_line(out)
    code, out, _ = opacity("check", path, "--json")
    assert code == 0
    bands = {one["name"]: one for one in json.loads(out)["bands"]}
    assert bands["1-0"]["verdict"] == "more than the band allows"
    assert bands["1-0"]["difference"] == pytest.approx(0.1, abs=2e-3)
    assert bands["1-0"]["deviations"] == pytest.approx(0.1 / 0.007, abs=0.3)
    assert bands["2-0"]["verdict"] == "cannot judge"


def test_an_ingest_reports_bands_from_the_store(opacity, write_recipe, samples, tmp_path):
    path = write_recipe(extra=BAND)
    code, out, _ = opacity("ingest", path, "-o", tmp_path / "out", "--json", "--quiet")
    assert code == 0
    (store,) = json.loads(out)["stores"]
    code, out, _ = opacity("check", samples / "carbon-monoxide.par", "--recipe", path, "--json")
    assert code == 0
    for stored, read in zip(store["bands"], json.loads(out)["bands"], strict=True):
        assert (stored["name"], stored["verdict"]) == (read["name"], read["verdict"])
        assert stored["found"] == pytest.approx(read["found"], rel=1e-7)
    names = [one["name"] for one in store["bands"]]
    assert (names[:2], names[-1]) == (["1-0", "2-0"], "half (recipe)")
    for _ in range(2):  # made now, and up to date
        code, out, _ = opacity("ingest", path, "-o", tmp_path / "out", "--quiet")
        assert code == 0
        assert "band 1-0: agrees; 1.0130e-17 against 1.0130e-17 cm/molecule" in one_line(out)
        assert "band half (recipe): less than the band; " in one_line(out)


BAND = """
[[band_strength]]
name = "half"
range = [2143.0, 2250.0]
strength = 1.013e-17
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.007
source = "made up"
"""


def test_a_catalogue_is_told_that_a_recipe_would_name_it(opacity, tmp_path):
    path = tmp_path / "co.cat"
    path.write_text("  115271.2018  0.0005 -5.0105 2    0.0000  3  28001 101 1           0             \n")
    code, out, err = opacity("check", path)
    assert (code, err) == (0, "")
    assert "a catalogue does not name its molecule: with `--recipe RECIPE` it is held against" in one_line(out)


def test_a_recipe_says_what_a_list_of_an_unknown_molecule_is_of(opacity, samples):
    code, out, err = opacity("check", samples / "invented-molecule.par")
    assert (code, out) == (1, "")
    assert "every record was left out; found 1314 unknown isotopologue; `--recipe RECIPE` says what the list" in err
    recipe = samples.parent / "recipes" / "invented.toml"
    code, out, err = opacity("check", samples / "invented-molecule.par", "--recipe", recipe)
    assert (code, err) == (0, "")
    assert "lines 1314 of Vl, " in one_line(out)
    assert "716 lines" in out
