"""The uncertainty that a recipe's line lists state of themselves, by band and node of its tables."""

from __future__ import annotations

from collections.abc import Iterator
from concurrent.futures import Executor, ThreadPoolExecutor
from contextlib import ExitStack
from pathlib import Path
from typing import Any, Protocol

import numpy as np

from opacity.check.uncertainty import UncertaintySums, bands_of
from opacity.cross_sections.mixture import mixed
from opacity.line_list.exomol.dataset import OpenDataSet, sort_files
from opacity.line_list.exomol.uncertainty import state_errors
from opacity.line_list.hapi_table import hapi_codes_column
from opacity.line_list.model import LineList
from opacity.line_list.uncertainty import (
    MOST_RECORDS,
    StatedUncertainty,
    TooManyRecordsError,
    catalogue_errors,
    record_codes,
)
from opacity.pipeline.listed import ListedLines, open_listed
from opacity.pipeline.sources import DEFAULT_MEMORY
from opacity.recipe.model import Recipe

CODES = (
    "codes of the records (Rothman et al. 2005, JQSRT 96, 139, table 5, from memory), the upper end of each class;"
    " 20 % or more, estimates and defaults are not stated"
)
ERRORS = "errors of the catalogue's positions"
STATES = "uncertainties of the states' energies, in quadrature"
NO_CODES = "no column of codes in the list"
NO_STATES = "no definition names a column of uncertainties of states"
TOO_MANY = f"not looked at: more than {MOST_RECORDS:,} records"


class _Says(Protocol):
    def of(self, lines: LineList) -> StatedUncertainty: ...


class Statements:
    """What the files of one recipe's lists state, each read when a line of it is first met."""

    def __init__(self, recipe: Recipe, listed: ListedLines) -> None:
        self.sources: dict[str, None] = {}
        self._recipe, self._places = recipe, listed.places
        self._known: dict[object, _Says | None] = {}
        self._room = MOST_RECORDS

    def silence(self) -> list[str] | None:
        """Why no file can state anything, as headers and definitions tell; None where one may."""
        asked = {number if self._of_states(number) else path: (number, path) for number, path in self._places.values()}
        reasons = [self._why_not(number, path) for number, path in asked.values()]
        found = [one for one in reasons if one is not None]
        return list(dict.fromkeys(found)) if len(found) == len(reasons) else None

    def _of_states(self, number: int) -> bool:
        """Whether a list's uncertainty is that of its states, the same for all its files."""
        return self._recipe.line_lists[number].format == "exomol"

    def _why_not(self, number: int, path: Path) -> str | None:
        format = self._recipe.line_lists[number].format
        if self._of_states(number):
            definition = self._data_set(number).definition
            return None if definition is not None and definition.has_uncertainty else NO_STATES
        return NO_CODES if format == "hapi" and hapi_codes_column(path) is None else None

    def of(self, lines: LineList) -> StatedUncertainty:
        """What is stated of some lines, by what their files say."""
        stated = StatedUncertainty.nothing(len(lines))
        for number, path, which in self._by_file(lines):
            said = self._said(number, path)
            if said is not None:
                stated.put(which, said.of(lines if which.size == len(lines) else lines.select(which)))
        return stated

    def _by_file(self, lines: LineList) -> Iterator[tuple[int, Path, np.ndarray[Any, np.dtype[np.intp]]]]:
        """List, file and lines; the files of a list in ExoMol format, which may be many, are taken together."""
        groups: dict[object, tuple[int, int, Path]] = {}
        group = np.empty(len(lines.files), dtype=np.int64)
        for place, name in enumerate(lines.files):
            number, path = self._places[name]
            key = number if self._of_states(number) else path
            group[place] = groups.setdefault(key, (len(groups), number, path))[0]
        of_line = group[lines.file]
        order = np.argsort(of_line, kind="stable")
        ends = np.searchsorted(of_line[order], np.arange(len(groups) + 1))
        for place, number, path in groups.values():
            if ends[place] < ends[place + 1]:
                yield number, path, order[ends[place] : ends[place + 1]]

    def forget(self) -> dict[str, None]:
        """Let go of what was read; what it was."""
        self._known.clear()
        return self.sources

    def _said(self, number: int, path: Path) -> _Says | None:
        key = number if self._of_states(number) else path
        if key not in self._known:
            try:
                self._known[key], source = self._read(number, path)
            except TooManyRecordsError:
                self._known[key], source = None, TOO_MANY
            self.sources[source] = None
        return self._known[key]

    def _read(self, number: int, path: Path) -> tuple[_Says | None, str]:
        reason, format = self._why_not(number, path), self._recipe.line_lists[number].format
        if reason is not None:
            return None, reason
        if self._of_states(number):
            return state_errors(self._data_set(number).states), STATES
        if format == "catalogue":
            errors = catalogue_errors(path, self._room)
            self._room -= errors.error.size
            return errors, ERRORS
        codes = record_codes(path, format, self._room)
        self._room -= 0 if codes is None else codes.packed.size
        return codes, CODES

    def _data_set(self, number: int) -> OpenDataSet:
        """The data set of a list in ExoMol format; what is read of it is not kept."""
        recipe, source = self._recipe, self._recipe.line_lists[number]
        given = recipe.molecule.formula, source.isotopologue or "", recipe.broadening.files
        return OpenDataSet(sort_files(source.paths, str(recipe.path), *given), recipe.molecule.mass)


def stated_uncertainty(
    recipe: Recipe,
    tables: Path,
    hashes: frozenset[str],
    memory: int = DEFAULT_MEMORY,
    quiet: bool = False,
    workers: int = 1,
) -> dict[str, Any]:
    """The relative uncertainty of a table's bands at its nodes by its lists' own statements, as plain values for JSON.

    The lists, whose files have these sha256, are opened again, with line stores beside the `tables`, and each file of
    records is read once more for its codes; an ingest that is missing takes up to `memory` bytes.  `workers` threads
    do temperatures side by side, with the same result.  Raises OpacityError of the kind that fits where a list can no
    longer be read.
    """
    sums = UncertaintySums(bands_of(recipe), recipe.grid.node_list())
    parts = [(one.recipe, one.fraction) for one in recipe.species] or [(recipe, 1.0)]
    with ExitStack() as stack:
        executor = stack.enter_context(ThreadPoolExecutor(workers)) if workers > 1 else None
        listed = [stack.enter_context(open_listed(one, tables, memory, quiet, hashes)) for one, _ in parts]
        said = [Statements(one.recipe, one) for one in listed]
        silence = [one.silence() for one in said]
        if all(one is not None for one in silence):  # no line needs to be read for that
            reasons = dict.fromkeys(words for one in silence for words in one or ())
            return {**sums.nothing(), "source": "; ".join(reasons)}
        sources: dict[str, None] = {}
        for one, (_, fraction), statements in zip(listed, parts, said, strict=True):
            _add(sums, one, statements, fraction, executor)
            sources |= statements.forget()
    return {**sums.figures(), "source": "; ".join(sources) or "no line in any band"}


def _add(
    sums: UncertaintySums, listed: ListedLines, said: Statements, fraction: float, executor: Executor | None
) -> None:
    lower, upper = min(low for low, _ in sums.bands), max(high for _, high in sums.bands)
    for lines in listed.stretches(lower, upper):
        sums.add(mixed([(listed.prepare(lines), fraction)]), said.of(lines), executor)
