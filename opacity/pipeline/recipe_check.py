"""What a recipe lacks before anything can be computed from it, found without reading a line list."""

from __future__ import annotations

import re
from collections.abc import Iterable
from pathlib import Path

from opacity.errors import LineListError, OpacityError, RecipeError, printable, problem
from opacity.line_list.exomol.dataset import sort_files
from opacity.line_list.exomol.definition import read_definition
from opacity.line_list.hapi_table import broadeners_of
from opacity.molecule.partition_function import from_file
from opacity.pipeline.inputs import check_molecule, refuse_invalid_temperatures
from opacity.recipe.document import parse, read_text
from opacity.recipe.faults import Faults, dotted, faults_of
from opacity.recipe.load import load_recipe
from opacity.recipe.marks import undecided
from opacity.recipe.model import LineListSource, Recipe
from opacity.recipe.unverified import ACCEPT, add_unverified

_IN_RECORDS = frozenset({"air", "self"})
"""Broadeners for which records of 160 characters have columns."""


def require_complete(path: Path) -> Recipe:
    """The recipe, if nothing is missing in it: no decision, no file, no source, no half-width of a broadener.

    Line lists are not read, so that a build may still find a line without a width, or a file that is not what it
    seems.  Raises RecipeError with one line for everything that is missing, in the order of the file.
    """
    text = read_text(path)
    document, lines = parse(path, text)
    marks = {line: (key, words) for line, key, words in undecided(text)}
    found = [(line, _undecided(path, line, dotted(key), words)) for line, (key, words) in marks.items()]
    faults = Faults(str(path), lines)
    if document.get(ACCEPT) is not True:
        add_unverified(faults, text)
    recipe: Recipe | None = None
    problems = list(faults.problems())
    try:
        recipe = load_recipe(path)
        problems += [one for part in recipe.parts for one in _of_choices(part)]
    except RecipeError as error:
        problems += error.problems
    # What is wrong with a value that is still to be decided is no second fault.
    found += [(line, one) for line, one in _with_lines(path, problems) if line not in marks]
    if found or recipe is None:
        raise RecipeError([one for _, one in sorted(found, key=lambda pair: pair[0])])
    return recipe


def _undecided(path: Path, line: int, key: str, words: str) -> str:
    where = f"{printable(str(path))}:{line}: {key}" if key else f"{printable(str(path))}:{line}"
    remedy = "decide, then remove the mark DECIDE"
    return problem(where, "not decided yet", expected=printable(words) or None, remedy=remedy)


def _with_lines(path: Path, problems: Iterable[str]) -> list[tuple[int, str]]:
    """Problems with the lines that they name."""
    place = re.compile(re.escape(printable(str(path))) + r":(\d+): ")
    matches = ((place.match(one), one) for one in problems)
    return [(int(match[1]) if match else 0, one) for match, one in matches]


def _of_choices(recipe: Recipe) -> list[str]:
    """What is missing in a recipe that can be read: as far as it follows without its lines."""
    problems: list[str] = []
    faults = faults_of(recipe)
    _add_broadeners(recipe, faults)
    problems += faults.problems()
    for check in (check_molecule, _check_partition_file):
        try:
            check(recipe)
        except RecipeError as error:
            problems += error.problems
        except OpacityError as error:
            problems.append(str(error))
    return problems


def _check_partition_file(recipe: Recipe) -> None:
    """A file of T and Q must hold the grid's temperatures; for TIPS it depends on the isotopologues that have lines."""
    if recipe.partition_function.path is not None:
        refuse_invalid_temperatures(recipe, [from_file(recipe.partition_function.path)])


def _add_broadeners(recipe: Recipe, faults: Faults) -> None:
    """Add broadeners for which a list has no widths, and neither files nor defaults of the recipe give any."""
    served = {name.lower() for name in recipe.broadening.default}
    for number, source in enumerate(recipe.line_lists):
        try:
            given = served | _given(recipe, source)
        except LineListError as error:
            faults.add(("line_list", number, "files"), "cannot be used", found=str(error).split("\n")[0])
            continue
        for name in recipe.broadening.mixture:
            if name.lower() not in given:
                faults.add(
                    ("broadening", "mixture", name),
                    f"nothing gives half-widths by {name} for line_list[{number}]",
                    expected=_where_from(source.format, name),
                    remedy=f"give [broadening.default.{name}] with gamma, exponent and source"
                    + ("" if source.format == "catalogue" else f', or files = {{ {name} = "X__{name}.broad" }}'),
                )


def _where_from(form: str, name: str) -> str:
    return {
        "hitran": "air or self, the broadeners of records of 160 characters",
        "hapi": f"a column gamma_{name.lower()} in the table",
        "exomol": f"a file __{name}.broad among files, or defaults in the .def",
        "catalogue": "a default, since catalogues have no widths",
    }[form]


def _given(recipe: Recipe, source: LineListSource) -> frozenset[str]:
    """The broadeners, in lower case, for which a list or the recipe's files have half-widths."""
    files = recipe.broadening.files
    if source.format == "catalogue":
        return frozenset()
    own = frozenset(name.lower() for name in files)
    if source.format == "hitran":
        return own | _IN_RECORDS
    if source.format == "hapi":
        return own | frozenset.intersection(*(broadeners_of(path) for path in source.paths))
    found = sort_files(source.paths, str(recipe.path), recipe.molecule.formula, source.isotopologue or "", files)
    given = own | frozenset(name.lower() for name in found.broad)
    if found.definition is not None and len(recipe.line_lists) == 1:
        definition = read_definition(found.definition)
        if definition.gamma is not None and definition.exponent is not None:
            given |= frozenset(name.lower() for name in recipe.broadening.mixture)
    return given
