"""A recipe file to a `Recipe`: every fault is found and named with its line before any is raised."""

from __future__ import annotations

from pathlib import Path

from opacity.errors import RecipeError
from opacity.recipe import mixture
from opacity.recipe.document import parse, read_text
from opacity.recipe.faults import Faults
from opacity.recipe.grid import read_grid
from opacity.recipe.k_coefficient import read_k_coefficient
from opacity.recipe.line_lists import read_line_lists
from opacity.recipe.model import Recipe
from opacity.recipe.sections import (
    read_abundance,
    read_band_strengths,
    read_broadening,
    read_molecule,
    read_partition_function,
    read_profile,
)
from opacity.recipe.table import Table
from opacity.recipe.unverified import ACCEPT

SECTIONS = (
    "molecule",
    "line_list",
    "isotopologues",
    "partition_function",
    "broadening",
    "profile",
    "grid",
    "cross_section",
    "k_coefficient",
    "band_strength",
)


def load_recipe(path: str | Path) -> Recipe:
    """Read and check a recipe (TOML, UTF-8); files it names are looked for from its folder.

    Nothing is read from line lists.  Raises RecipeError with one line for each fault, in the
    order of the file: ``file:line: key: what; expected ..., found ...; remedy``.
    """
    path = Path(path)
    text = read_text(path)
    document, lines = parse(path, text)
    root = Table(
        Faults(str(path), lines), (), document, mixture.SECTIONS if "species" in document else (*SECTIONS, ACCEPT)
    )
    if "species" in document:
        return _if_faultless(mixture.read_mixture(path, text, root, _load_species), root)
    return _if_faultless(_of_one_molecule(path, text, root), root)


def _load_species(path: Path) -> Recipe | None:
    """The recipe of one molecule, None for one of several species, which may even name itself."""
    return None if "species" in parse(path, read_text(path))[0] else load_recipe(path)


def _of_one_molecule(path: Path, text: str, root: Table) -> Recipe:
    folder = path.parent
    molecule = read_molecule(root)
    line_lists = read_line_lists(root, folder)
    abundance = read_abundance(root)
    partition_function = read_partition_function(root, folder, line_lists)
    broadening, profile = read_broadening(root, folder), read_profile(root)
    grid = read_grid(root, points="cross_section" in root or "k_coefficient" not in root)
    return Recipe(
        path=path,
        text=text,
        molecule=molecule,
        line_lists=line_lists,
        abundance=abundance,
        partition_function=partition_function,
        broadening=broadening,
        profile=profile,
        grid=grid,
        band_strengths=read_band_strengths(root),
        cross_section="cross_section" in root,
        k_coefficient=read_k_coefficient(root, grid),
        accept_unverified=root.flag(ACCEPT, default=False),
    )


def _if_faultless(recipe: Recipe, root: Table) -> Recipe:
    """The recipe; RecipeError where there is any fault in it."""
    _check_tables_wanted(root)
    problems = root.faults.problems()
    if problems:
        raise RecipeError(problems)
    return recipe


def _check_tables_wanted(root: Table) -> None:
    """[cross_section] says that this table is wanted and has no keys.  One table at least is."""
    if "k_coefficient" in root and "cross_section" not in root:
        return
    expected = "an empty section [cross_section], or a section [k_coefficient]: the tables wanted"
    values = root.table("cross_section", expected)
    if values:
        Table(root.faults, root.path("cross_section"), values, ())
