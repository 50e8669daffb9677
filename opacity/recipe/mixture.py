"""A recipe of several `[[species]]`: recipes of their own, in one gas, on one grid."""

from __future__ import annotations

import os
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from opacity.recipe.faults import shown
from opacity.recipe.grid import read_grid
from opacity.recipe.k_coefficient import read_k_coefficient
from opacity.recipe.model import Broadening, Molecule, PartitionFunctionChoice, Recipe, Species
from opacity.recipe.sections import read_profile
from opacity.recipe.table import Bounds, Table

SECTIONS = ("species", "profile", "grid", "cross_section", "k_coefficient")
_FRACTION = Bounds(1e-30, 1.0)
_ROUNDING = 1e-9


def read_mixture(path: Path, text: str, root: Table, load: Callable[[Path], Recipe | None]) -> Recipe:
    """The recipe in `root`; `load` reads those of the species, whose own grids, profiles and tables are left aside, and
    has None for a recipe of several species.

    Faults are gathered in `root`.  Raises RecipeError for a species' recipe that cannot be read.
    """
    points = "cross_section" in root or "k_coefficient" not in root
    grid, profile = read_grid(root, points), read_profile(root)
    species = tuple(
        Species(replace(one.recipe, grid=grid, profile=profile, band_strengths=()), one.fraction)
        for one in _species(root, path.parent, load)
    )
    names = " and ".join(one.recipe.molecule.name for one in species)
    shares = " + ".join(f"{one.fraction:g} {one.recipe.molecule.formula}" for one in species)
    return Recipe(
        path=path,
        text=text,
        molecule=Molecule(f"a mixture of {names}", shares),
        line_lists=(),
        abundance="terrestrial",
        partition_function=PartitionFunctionChoice("of each species"),
        broadening=Broadening({}),
        profile=profile,
        grid=grid,
        cross_section="cross_section" in root,
        k_coefficient=read_k_coefficient(root, grid),
        species=species,
    )


def _species(root: Table, folder: Path, load: Callable[[Path], Recipe | None]) -> list[Species]:
    """The species and their mole fractions; what is not one has none."""
    expected, key = "two or more [[species]] tables, each with recipe and fraction", root.path("species")
    values = root.values["species"]
    if not isinstance(values, list) or len(values) < 2 or not all(isinstance(one, dict) for one in values):
        root.faults.add(key, "not an array of tables", expected=expected, found=shown(values))
        return []
    found: list[Species] = []
    for number, one in enumerate(values):
        table = Table(root.faults, root.path("species", number), one, ("recipe", "fraction"))
        name = table.required_text("recipe", "the file name of a species' recipe, from this one's folder")
        fraction = table.number("fraction", _FRACTION)
        if not name or len(root.faults):
            continue
        if not os.path.exists(folder / name):
            remedy = "names are looked for from this recipe's folder"
            table.faults.add(
                table.path("recipe"),
                "no such file",
                expected="a recipe",
                found=shown(name),
                remedy=remedy,
            )
            continue
        recipe = load(folder / name)
        if recipe is None:
            table.faults.add(table.path("recipe"), "is of several species itself", expected="a recipe of one molecule")
            continue
        formulas = [other.recipe.molecule.formula for other in found]
        if recipe.molecule.formula in formulas:
            table.faults.add(table.path("recipe"), "a molecule twice", found=recipe.molecule.formula)
        found.append(Species(recipe, fraction))
    total = sum(one.fraction for one in found)
    if total > 1.0 + _ROUNDING:
        remedy = "fractions are mole fractions; what is left does not absorb"
        root.faults.add(key, "too much", expected="a sum of fractions of at most 1", found=f"{total:g}", remedy=remedy)
    return found
