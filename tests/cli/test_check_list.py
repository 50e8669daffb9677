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
