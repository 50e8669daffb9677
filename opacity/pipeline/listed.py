"""The lines of a recipe's lists with the places of their records, which prepared lines do not keep."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from opacity.cross_sections.prepare import PreparedLines, abundance_factors, prepare
from opacity.cross_sections.source import LINES_AT_ONCE, ListInMemory
from opacity.line_list.exomol.dataset import sort_files
from opacity.line_list.model import LineList
from opacity.line_list.read import merge
from opacity.line_store.store import LineStore
from opacity.pipeline.inputs import choices_of
from opacity.pipeline.open_lists import KEYS, OpenList, located, open_list
from opacity.recipe.model import LineListSource, Recipe


@dataclass(frozen=True)
class ListedLines:
    """The lines of a recipe's lists, by window, each with a name of its file that `places` knows.

    `places` gives the number of the list and the path; `choices` are the recipe's, as arguments of `prepare`.
    """

    recipe: Recipe
    lists: tuple[OpenList, ...]
    choices: dict[str, Any]
    names: tuple[tuple[str, ...], ...]
    places: dict[str, tuple[int, Path]]

    def count(self, lower: float, upper: float) -> int:
        """How many lines lie between two wavenumbers (cm-1), before any is left out for its isotopologue."""
        return sum(one.windows.count(lower, upper) for one in self.lists)

    def window(self, lower: float, upper: float) -> LineList:
        """Those lines, less those of isotopologues that the mixture has none of."""
        found = [
            replace(one.windows.window(lower, upper), files=names)
            for one, names in zip(self.lists, self.names, strict=True)
        ]
        # The selection drops isotopologues that have no line here.
        lines = merge(found).select(slice(None))
        with located(self.recipe, KEYS):
            factors = abundance_factors(lines.isotopologues, lines.basis, self.choices["abundance"], lines.dropped)
        return lines.select(np.array(factors or [0.0])[lines.isotopologue] > 0.0)

    def prepare(self, lines: LineList) -> PreparedLines:
        """The lines made ready, all of them and in their order."""
        with located(self.recipe, KEYS):
            return prepare(lines, **self.choices)

    def stretches(self, lower: float, upper: float) -> Iterator[LineList]:
        """The lines between two wavenumbers (cm-1), each once, so many at a time as can be held."""
        edges = sorted({lower, *(e for one in self.lists for e in one.windows.edges() if lower < e <= upper)})
        tops = [*(float(np.nextafter(edge, -np.inf)) for edge in edges[1:]), upper]
        for low, high in zip(edges, tops, strict=True):
            yield from self._pieces(low, high)

    def _pieces(self, lower: float, upper: float) -> Iterator[LineList]:
        middle = 0.5 * (lower + upper)
        if self.count(lower, upper) > LINES_AT_ONCE and lower < middle < upper:
            yield from self._pieces(lower, middle)
            yield from self._pieces(float(np.nextafter(middle, np.inf)), upper)
            return
        lines = self.window(lower, upper)
        if len(lines):
            yield lines


@contextlib.contextmanager
def open_listed(
    recipe: Recipe, tables: Path, memory: int, quiet: bool, hashes: frozenset[str]
) -> Iterator[ListedLines]:
    """The lines of a recipe that is no mixture's; arguments as those of `open_list`."""
    with contextlib.ExitStack() as stack:
        lists = []
        for number in range(len(recipe.line_lists)):
            one = open_list(recipe, number, tables, memory, quiet, hashes)
            if isinstance(one.windows, LineStore):
                stack.callback(one.windows.close)
            lists.append(one)
        names: list[tuple[str, ...]] = []
        places: dict[str, tuple[int, Path]] = {}
        for number, (source, one) in enumerate(zip(recipe.line_lists, lists, strict=True)):
            paths = _paths(recipe, source, one)
            # Files of several folders may have one name: numbers keep them apart.
            names.append(tuple(f"{number}:{k}" for k in range(len(paths))))
            places |= {name: (number, path) for name, path in zip(names[-1], paths, strict=True)}
        yield ListedLines(recipe, tuple(lists), choices_of(recipe, lists), tuple(names), places)


def _paths(recipe: Recipe, source: LineListSource, one: OpenList) -> list[Path]:
    """The paths that the numbers of files in a list's lines stand for."""
    if isinstance(one.windows, ListInMemory):
        by_name = {str(path): path for path in source.paths}
        return [by_name[name] for name in one.windows.lines.files]
    if source.format != "exomol":
        return list(source.paths)
    given = recipe.molecule.formula, source.isotopologue or "", recipe.broadening.files
    return list(sort_files(source.paths, str(recipe.path), *given).transitions)
