"""What a data set's definition says against the recipe: the isotopologue under either of its names, and the mass."""

from __future__ import annotations

from pathlib import Path

import pytest

from opacity.line_list.ledger import Ledger
from opacity.molecule.isotopologue import isotopologue
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.open_lists import OpenList, definition_warnings
from opacity.recipe.load import load_recipe

STATES = ["1 0.0 1 0", "2 3.845 3 1", "3 2143.27 1 0", "4 2147.08 3 1"]
TRANSITIONS = ["4 1 11.9", "3 2 34.0"]
DEFAULT = '[broadening.default.H2]\ngamma = 0.07\nexponent = 0.5\nsource = "made up"'
DEFINITION = """\
EXOMOL.def # ID
{formula} # IsoFormula
12C-16O # Iso-slug
INVENTED # Isotopologue dataset name
20240131 # Version number with format YYYYMMDD
{mass} 4.6e-26 # Isotopologue mass (Da) and (kg)
"""


@pytest.fixture
def recipe_of(tmp_path: Path, write_recipe):
    """A recipe for a small data set of CO in ExoMol form, whose definition says what is asked."""

    def make(name: str, formula: str = "(12C)(16O)", mass: str = "27.994915") -> Path:
        stem = tmp_path / "12C-16O__INVENTED"
        stem.with_suffix(".states").write_text("\n".join(STATES) + "\n")
        stem.with_suffix(".trans").write_text("\n".join(TRANSITIONS) + "\n")
        stem.with_suffix(".def").write_text(DEFINITION.format(formula=formula, mass=mass))
        samples = str(Path(__file__).parents[2] / "data-samples")
        return write_recipe(
            "co",
            (f'"{samples}/carbon-monoxide.par"', '"12C-16O__*"'),
            ('"hitran"', f'"exomol"\nisotopologue = "{name}"'),
            ("{ air = 1.0 }", f"{{ H2 = 1.0 }}\n{DEFAULT}"),
        )

    return make


@pytest.mark.parametrize("name", ["(12C)(16O)", "12C-16O", "1"])
@pytest.mark.parametrize("formula", ["(12C)(16O)", "12C-16O"])
def test_formula_slug_and_number_are_one_isotopologue(recipe_of, tmp_path, name, formula):
    inputs = load_inputs(load_recipe(recipe_of(name, formula)), tmp_path / "out", quiet=True)
    assert inputs.isotopologues == (isotopologue(5, 1),)
    assert inputs.warnings == ()


def test_another_isotopologue_than_the_definitions_is_told(recipe_of, tmp_path):
    inputs = load_inputs(load_recipe(recipe_of("13C-16O")), tmp_path / "out", quiet=True)
    assert inputs.isotopologues == (isotopologue(5, 2),)
    assert inputs.warnings == (
        "INVENTED is of (12C)(16O) by its definition, and is taken for (13C)(16O)",
        "INVENTED: mass 27.994915 g/mol in the definition, 28.99827 g/mol in hapi's tables (-3.5 %); hapi's is used",
    )


@pytest.mark.parametrize("mass, told", [("28.02", False), ("28.03", True), ("27.97", False), ("27.96", True)])
def test_a_mass_that_is_off_by_over_a_thousandth_is_told_with_both_numbers(recipe_of, tmp_path, mass, told):
    inputs = load_inputs(load_recipe(recipe_of("12C-16O", mass=mass)), tmp_path / "out", quiet=True)
    assert inputs.isotopologues[0].mass == isotopologue(5, 1).mass
    assert len(inputs.warnings) == told
    for warning in inputs.warnings:
        assert f"INVENTED: mass {mass} g/mol in the definition, 27.994915 g/mol in hapi's tables" in warning


def test_the_recipes_mass_is_held_against_it_where_hapi_knows_none(recipe_of, tmp_path):
    path = recipe_of("12C-16O")
    text = path.read_text().replace('formula = "CO"', 'formula = "Vl"\nmass = 40.0')
    path.write_text(text)
    definition = {"dataset": "D", "formula": "(12C)(16O)", "slug": "12C-16O", "mass": 41.0, "max_temperature": None}
    definition |= {"transitions": None, "notes": []}
    one = OpenList(None, Ledger(), {"12C-16O": (1.0, 2.0)}, {"definition": definition, "states": {"notes": {}}})
    assert definition_warnings(load_recipe(path), [one]) == (
        "D: mass 41 g/mol in the definition, 40 g/mol in the recipe (+2.5 %); the definition's is used",
    )
