"""The kinds of tables that a recipe asks for, and the units of work of each."""

from __future__ import annotations

from pathlib import Path

from opacity.pipeline.inputs import Inputs
from opacity.pipeline.k_units import BandUnit, band_units
from opacity.pipeline.units import Unit, parted
from opacity.recipe.model import Recipe

CROSS_SECTION = "cross-section"
K_COEFFICIENT = "k-coefficient"


def wanted(recipe: Recipe) -> tuple[str, ...]:
    """The kinds of tables that a recipe asks for, one at least."""
    kinds = (CROSS_SECTION,) if recipe.cross_section else ()
    return kinds if recipe.k_coefficient is None else (*kinds, K_COEFFICIENT)


def table_name(recipe: Recipe, kind: str = CROSS_SECTION) -> str:
    """File name of a recipe's table."""
    return f"{recipe.name}.{kind}.h5"


def shards_of(recipe: Recipe, folder: Path, kind: str = CROSS_SECTION) -> Path:
    """The folder of the shards of a recipe's table."""
    return folder / (f"{recipe.name}.shards" if kind == CROSS_SECTION else f"{recipe.name}.{kind}.shards")


def units_of(recipe: Recipe, inputs: Inputs, kind: str) -> tuple[Unit, ...] | tuple[BandUnit, ...]:
    """All units of a table."""
    if kind == CROSS_SECTION:
        return parted(recipe, inputs.lines, inputs.sha256)
    return k_units_of(recipe, inputs)


def k_units_of(recipe: Recipe, inputs: Inputs) -> tuple[BandUnit, ...]:
    """All units of a k-coefficient table."""
    heaviest = max((one.mass for one in inputs.isotopologues), default=1000.0)
    return band_units(recipe, inputs.lines, inputs.sha256, heaviest)
