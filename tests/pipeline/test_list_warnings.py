"""What plan and build warn of because of the lines of a list; nothing is refused for it."""

from __future__ import annotations

import pytest

from opacity.pipeline import list_warnings, sources
from opacity.pipeline.inputs import load_inputs
from opacity.recipe.load import load_recipe


@pytest.fixture
def of_records(write_recipe, samples, tmp_path):
    """The warnings about a list made of the sample's records."""

    def warnings(make, **changes: str) -> tuple[str, ...]:
        records = (samples / "carbon-monoxide.par").read_text().splitlines(keepends=True)
        (tmp_path / "carbon-monoxide.par").write_text("".join(make(records)))
        recipe = load_recipe(write_recipe(samples=str(tmp_path), **changes))
        return load_inputs(recipe, tmp_path / "tables", quiet=True).warnings

    return warnings


def test_a_good_list_is_not_warned_of(of_records):
    assert of_records(lambda records: records) == ()


@pytest.mark.parametrize("small", [True, False])
def test_a_list_four_times_too_strong(of_records, monkeypatch, small):
    if not small:
        monkeypatch.setattr(sources, "SMALL_LIST", 0)
    repeated, band, *_ = of_records(lambda records: 4 * records)
    assert "carbon-monoxide.par: 606 records repeat another one" in repeated
    assert (", with 75 % of the list's strength" in repeated) == small
    assert repeated.endswith(", and all of them count")
    assert "carbon-monoxide.par: band 1-0: more than the band allows; 4.0" in band
    assert "+300." in band


def test_one_record_twice(of_records):
    (warning,) = of_records(lambda records: [*records, records[0]])
    assert "carbon-monoxide.par: 1 record repeats another one, with " in warning


def test_bands_of_a_long_list_in_a_store_are_left_to_ingest(of_records, monkeypatch):
    monkeypatch.setattr(sources, "SMALL_LIST", 0)
    monkeypatch.setattr(list_warnings, "LINES_AT_ONCE", 100)
    (repeated,) = of_records(lambda records: 4 * records)
    assert "606 records repeat another one, and all of them count" in repeated


def test_the_command_plan_shows_them(opacity, write_recipe, samples, tmp_path):
    text = (samples / "carbon-monoxide.par").read_text()
    (tmp_path / "carbon-monoxide.par").write_text(4 * text)
    code, out, _ = opacity("plan", write_recipe(samples=str(tmp_path)), "-o", tmp_path / "out")
    assert code == 0
    said = " ".join(out.split())
    assert "warning: " in said
    assert "606 records repeat another one, with 75 % of the list's strength" in said
    assert "band 1-0: more than the band allows; " in said
