"""Commands about recipes that have no table yet: `new`, and `check` of a recipe."""

from __future__ import annotations

import sys
from argparse import Namespace
from pathlib import Path
from typing import TYPE_CHECKING

from opacity.cli import text

if TYPE_CHECKING:
    from opacity.recipe.model import Recipe

TABLE_ENDINGS = (".cross-section.h5", ".k-coefficient.h5")


def new(arguments: Namespace) -> int:
    """`opacity new FORMULA`: a commented recipe to fill in, with --from FILES for a data set in ExoMol format."""
    from opacity.errors import InputError, problem
    from opacity.molecule.isotopologue import isotopologues_of
    from opacity.pipeline.new_recipe import new_recipe
    from opacity.tables.atomic import write_atomically

    formula, to_stdout = arguments.formula, arguments.output == "-"
    path = Path(arguments.output or f"{formula}.toml")
    source = None if arguments.source is None else Path(arguments.source)
    recipe = new_recipe(formula, Path() if to_stdout else path.parent, source)
    if to_stdout:
        print(recipe, end="")
    elif path.exists():
        raise InputError(problem(path, "is there already", remedy="choose another name with -o"))
    else:
        write_atomically(path, recipe.encode("utf-8"))
    if source is None and not isotopologues_of(formula):
        note = f"{formula}: not in hapi's tables; give its mass and a partition-function file, or mend it"
        print(text.wrapped(note), file=sys.stderr if to_stdout else sys.stdout)
    if not to_stdout:
        print(f"{path}: fill in what is marked DECIDE; `opacity check {path}` says what is missing")
    return 0


def is_recipe_without_table(target: Path, folder: Path) -> bool:
    """Whether a file is a recipe none of whose tables is in the folder."""
    return target.suffix == ".toml" and not any((folder / f"{target.stem}{one}").exists() for one in TABLE_ENDINGS)


def check_recipe(arguments: Namespace) -> int:
    """`opacity check RECIPE` before there is a table: what is missing, exit code 2, or what to do next."""
    from opacity.pipeline.recipe_check import require_complete

    recipe = require_complete(Path(arguments.target))
    where = "" if arguments.output == "tables" else f" -o {arguments.output}"
    steps = [f"opacity {command} {arguments.target}{where}" for command in ("plan", "build")]
    if arguments.json:
        print(text.as_json({"recipe": str(recipe.path), "complete": True, "table": None, "next": steps}))
    else:
        print(text.facts([*_facts(recipe), ("next", f"`{steps[0]}`, which reads the lines; then `{steps[1]}`")]))
    return 0


def _facts(recipe: Recipe) -> list[tuple[str, str]]:
    from opacity.k_coefficient.bands import band_edges

    nodes = text.counted(len(recipe.grid.node_list()), "node")
    points = [text.counted(recipe.grid.wavenumber.size, "point")] if recipe.cross_section else []
    points += [text.counted(band_edges(recipe).size - 1, "band")] if recipe.k_coefficient is not None else []
    mixtures = dict.fromkeys(
        ", ".join(f"{name} {fraction:g}" for name, fraction in part.broadening.mixture.items()) for part in recipe.parts
    )
    return [
        ("recipe", f"{recipe.path}: nothing is missing; there is no table yet, so nothing else is checked"),
        *[("species", f"{one.fraction:g} {one.recipe.molecule.formula}") for one in recipe.species],
        ("lines", ", ".join(name for part in recipe.parts for source in part.line_lists for name in source.files)),
        *[("broadening", one) for one in mixtures],
        ("grid", f"{nodes} of {' and of '.join(points)}"),
    ]
