"""`opacity new` for every molecule that hapi knows: valid TOML, with its decisions marked and its published bands."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest

from opacity.molecule.hapi_tables import hapi
from opacity.molecule.published_bands import FROM_MEMORY, published_bands
from opacity.pipeline.new_recipe import new_recipe
from opacity.recipe.marks import undecided
from opacity.recipe.unverified import unverified_values

MOLECULES = sorted({row[4] for row in hapi().ISO.values()})


@pytest.mark.parametrize("formula", MOLECULES)
def test_a_recipe_for_every_molecule_that_hapi_knows(formula: str) -> None:
    text = new_recipe(formula, Path())
    document = tomllib.loads(text)
    assert document["molecule"] == {"name": formula, "formula": formula}
    keys = [".".join(str(part) for part in key) for _, key, _ in undecided(text)]
    assert keys == [
        "line_list.0.files",
        "line_list.0.reference",
        "broadening.mixture",
        "grid.wavenumber",
        "grid.temperature",
        "grid.pressure",
    ]
    wide = [
        one for one in published_bands(formula)
        if one.range and one.range[1] - one.range[0] > 1.0 and one.status != FROM_MEMORY
    ]  # fmt: skip
    found = document.get("band_strength", [])
    assert [(one["name"], one["strength"], one["unit"], one["source"]) for one in found] == [
        (one.name, one.strength, one.unit, one.source) for one in wide
    ]
    # Nothing from memory but a reference that says so itself.
    assert len(unverified_values(text)) == sum("from memory" in one.source for one in wide)
    number = next(key[0] for key, row in hapi().ISO.items() if row[4] == formula)
    assert f"hitran = {{ molecule = {number}, " in text
