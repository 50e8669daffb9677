"""The lists of a recipe, opened: held in memory or in a line store, and held against what is said of them."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from opacity.cross_sections.source import (
    ListInMemory,
    Windows,
)
from opacity.errors import LineListError, OpacityError, RecipeError, problem
from opacity.line_list.exomol.definition import mass_difference
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList
from opacity.line_list.read import read_lines
from opacity.molecule.isotopologue import named_isotopologue
from opacity.molecule.names import same_isotopologue
from opacity.molecule.partition_function import PartitionFunction, from_file, from_states
from opacity.pipeline.list_warnings import warnings_of_lines, warnings_of_store
from opacity.pipeline.sources import ensure_store, is_small, read_options
from opacity.recipe.faults import faults_of
from opacity.recipe.model import LineListSource, Recipe
from opacity.recipe.positions import KeyPath

KEYS: dict[str, KeyPath] = {
    "formula": ("molecule", "formula"),
    "broadeners": ("broadening", "mixture"),
    "abundance": ("isotopologues", "abundance"),
    "partition_function": ("partition_function", "source"),
}
"""The recipe's key that makes the choice of an argument."""
STATES_AGREE = 0.1
"""Per cent by which a partition-function file may differ from the sum over the states without a word."""


@contextlib.contextmanager
def located(recipe: Recipe, keys: dict[str, KeyPath]) -> Iterator[None]:
    """Turn an error about an argument into one of the recipe, at the line of the key that made the choice."""
    try:
        yield
    except OpacityError as error:
        if error.argument not in keys:
            raise
        faults = faults_of(recipe)
        faults.add_error(keys[error.argument], error)
        raise RecipeError(faults.problems()) from error


@dataclass(frozen=True)
class OpenList:
    """One list: its lines by window, its account, the wavenumbers between which each isotopologue has lines, facts.

    `warnings` are what the lines themselves give reason for.
    """

    windows: Windows
    ledger: Ledger
    spans: dict[str, tuple[float, float]]
    facts: dict[str, Any]
    warnings: tuple[str, ...] = ()


def open_list(recipe: Recipe, number: int, tables: Path, memory: int, quiet: bool, hashes: frozenset[str]) -> OpenList:
    """One list of a recipe: a small one read into memory, another from its line store, made if it is missing."""
    source = recipe.line_lists[number]
    store = None if is_small(source) else ensure_store(recipe, source, tables, memory, quiet, hashes)[0]
    if store is not None:
        return OpenList(
            store, store.index.ledger, store.spans(), store.index.facts, warnings_of_store(store, recipe, source)
        )
    lines = _read(recipe, number, source)
    spans = {}
    for place, one in enumerate(lines.isotopologues):
        nu = lines.wavenumber[lines.isotopologue == place]
        spans[one.formula] = (float(nu.min()), float(nu.max()))
    ledger = Ledger()
    ledger.add(lines.ledger)
    return OpenList(ListInMemory(lines), ledger, spans, {}, warnings_of_lines(lines, recipe, source))


def summed_states(one: OpenList) -> PartitionFunction:
    """The partition function summed over a list's own states."""
    states = one.facts["states"]
    return from_states(states["temperature"], states["partition"], states["highest_energy"])


def _read(recipe: Recipe, number: int, source: LineListSource) -> LineList:
    options = read_options(recipe, source)
    with located(recipe, {**KEYS, "isotopologue": ("line_list", number, "isotopologue")}):
        return read_lines(
            source.paths, source.format, range=source.range, bad_records=source.bad_records, options=options
        )


def refuse_overlap(sources: Sequence[LineListSource], spans: Sequence[dict[str, tuple[float, float]]]) -> None:
    """The same isotopologue in overlapping ranges of two lists would count its lines twice."""
    seen: dict[str, list[tuple[float, float, str]]] = {}
    for source, span in zip(sources, spans, strict=True):
        for formula, (low, high) in span.items():
            for other_low, other_high, other in seen.get(formula, []):
                if low <= other_high and other_low <= high:
                    raise LineListError(
                        problem(
                            ", ".join(source.files),
                            f"holds lines of {formula} between {max(low, other_low):g} and"
                            f" {min(high, other_high):g} cm-1, and so does {other}",
                            remedy="give each list a range of its own",
                        )
                    )
            seen.setdefault(formula, []).append((low, high, ", ".join(source.files)))


def definition_warnings(recipe: Recipe, lists: Sequence[OpenList]) -> tuple[str, ...]:
    """Where a data set is not what its definition says, or the grid goes beyond it."""
    found = []
    hottest = max(t for t, _ in recipe.grid.node_list())
    for source, one in zip(recipe.line_lists, lists, strict=True):
        definition = one.facts.get("definition")
        if not definition:
            continue
        name, most = definition["dataset"], definition["max_temperature"]
        if most is not None and hottest > most:
            found.append(f"{name} is made for temperatures up to {most:g} K, and the grid goes to {hottest:g} K")
        own = [definition[key] for key in ("formula", "slug") if key in definition]
        if one.spans and not any(same_isotopologue(said, used) for said in own for used in one.spans):
            found.append(f"{name} is of {own[0]} by its definition, and is taken for {', '.join(one.spans)}")
        found += _mass_warning(recipe, source, definition)
        stated = definition["transitions"]
        if stated is not None and stated != one.ledger.read:
            found.append(f"{name} has {stated} transitions by its definition, and {one.ledger.read} were read")
        found += [f"{name}: {note}" for note in definition["notes"]]
        found += [f"{name}: {count}: {note}" for note, count in one.facts["states"]["notes"].items()]
    return tuple(found)


def _mass_warning(recipe: Recipe, source: LineListSource, definition: dict[str, Any]) -> list[str]:
    """Where a definition's mass is not that of hapi's tables, or of the recipe for what these lack."""
    known = named_isotopologue(recipe.molecule.formula, source.isotopologue or "", recipe.molecule.mass)
    if known is None or "mass" not in definition:
        return []
    # What hapi knows is taken from there, and else the definition goes before the recipe.
    where, used = ("hapi's tables", "hapi's") if known.known else ("the recipe", "the definition's")
    words = mass_difference(definition["mass"], known.mass, where)
    return [f"{definition['dataset']}: {words}; {used} is used"] if words else []


def states_against_file(recipe: Recipe, lists: Sequence[OpenList]) -> tuple[dict[str, Any], tuple[str, ...]]:
    """How a partition-function file compares with the sum over the list's own states at the grid's temperatures.

    The largest relative difference for the provenance, and a warning where it is more than 0.1 %.
    """
    path = recipe.partition_function.path
    summed = [one for one in lists if "states" in one.facts]
    if path is None or len(summed) != 1:
        return {}, ()
    states = summed_states(summed[0])
    file = from_file(path)
    both = [t for t in {t for t, _ in recipe.grid.node_list()} if states.holds(t) and file.holds(t)]
    if not both:
        return {}, ()
    worst = max(both, key=lambda t: abs(file(t) / states(t) - 1.0))
    difference = file(worst) / states(worst) - 1.0
    found = {"over_sum_of_states": {"largest_difference": difference, "temperature": worst}}
    if 100.0 * abs(difference) < STATES_AGREE:
        return found, ()
    words = f"{path.name} differs by {100.0 * difference:+.2g} % from the sum over the list's states at {worst:g} K"
    return found, (words,)
