"""Prepared lines by window, wherever they lie: held in memory, or read from line stores when they are needed."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from opacity.cross_sections.exact import exact_at
from opacity.cross_sections.prepare import NodeLines, PreparedLines
from opacity.grids import FloatArray
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList
from opacity.line_list.read import merge
from opacity.line_store.layout import SAMPLE_EVERY
from opacity.molecule.broadening import Assumption

LINES_AT_ONCE = 1_000_000
"""Lines that are prepared at the same time: about 400 MB with everything that is made of them."""
POINTS_AT_ONCE = 32
"""Points whose exact sum is one job of a thread."""


class LineSource(Protocol):
    """Lines in reach of a grid, sorted by unshifted wavenumber."""

    @property
    def ledger(self) -> Ledger:
        """The account of the lists."""

    @property
    def assumptions(self) -> tuple[Assumption, ...]:
        """What was assumed for how many lines."""

    def __len__(self) -> int:
        """Number of lines."""

    def window(self, lower: float, upper: float) -> PreparedLines:
        """The lines from one wavenumber to another (cm-1), ends included; margins are the caller's to add."""

    def count(self, lower: float, upper: float) -> int:
        """How many lines that window holds."""

    def stretches(self) -> Iterator[PreparedLines]:
        """All lines, each once, some at a time in order of wavenumber."""

    def sample(self) -> FloatArray:
        """Wavenumbers of some of the lines (n,), spread as all are, rising."""


Request = tuple[float, float, FloatArray]
"""Temperature (K), pressure (bar) and wavenumbers (n,)."""


def exact_points(
    source: LineSource,
    requests: Sequence[Request],
    cutoff_at: Callable[[float], float],
    plinth: bool,
    chi: FloatArray | None = None,
    executor: Executor | None = None,
) -> list[FloatArray]:
    """The exact sum at the points of each request, (n,) each, cm2/molecule; `cutoff_at` gives the cut-off (cm-1) at a
    pressure (bar), `chi` is a table of chi factors.  The lines are read window by window, once for all requests; with
    an executor of threads points are computed side by side.
    """
    found = [np.zeros(points.size) for _, _, points in requests]
    if not requests:
        return found
    margin = max(cutoff_at(pressure) for _, pressure, _ in requests)
    everywhere = np.unique(np.concatenate([points for _, _, points in requests]))
    for group in point_groups(everywhere, source):
        lower, upper = float(group[0]) - margin - 1e-6, float(group[-1]) + margin + 1e-6
        for lines in pieces(source, lower, upper):
            for temperature in dict.fromkeys(temperature for temperature, _, _ in requests):
                columns = lines.at_temperature(temperature)
                for number, (at, pressure, points) in enumerate(requests):
                    here = np.flatnonzero((points >= group[0]) & (points <= group[-1]))
                    if at == temperature and here.size:
                        choice = cutoff_at(pressure), plinth, chi
                        found[number][here] += _exact_here(columns.at(pressure), points[here], choice, executor)
    return found


def _exact_here(
    node: NodeLines, points: FloatArray, choice: tuple[float, bool, FloatArray | None], executor: Executor | None
) -> FloatArray:
    """The exact sum at some points, (n,), a few of them at a time; `choice` is cut-off, plinth and chi factors."""
    groups = np.array_split(points, math.ceil(points.size / POINTS_AT_ONCE))

    def one(group: FloatArray) -> FloatArray:
        return exact_at(node, group, *choice)

    return np.concatenate(list(map(one, groups) if executor is None else executor.map(one, groups)))


def pieces(source: LineSource, lower: float, upper: float) -> Iterator[PreparedLines]:
    """The lines from one wavenumber to another, ends included, in parts that can be held at once."""
    middle = 0.5 * (lower + upper)
    if source.count(lower, upper) <= LINES_AT_ONCE or not lower < middle < upper:
        lines = source.window(lower, upper)
        if len(lines):
            yield lines
        return
    yield from pieces(source, lower, middle)
    yield from pieces(source, float(np.nextafter(middle, np.inf)), upper)


def point_groups(points: FloatArray, source: LineSource) -> list[FloatArray]:
    """Rising points in groups whose windows hold few enough lines to be read at once."""
    if len(source) <= LINES_AT_ONCE:
        return [points]
    sample = source.sample()
    place = np.searchsorted(sample, points) * (len(source) / sample.size)
    number = np.floor(place / LINES_AT_ONCE)
    return [group for group in np.split(points, np.flatnonzero(np.diff(number)) + 1) if group.size]


@dataclass(frozen=True)
class HeldLines:
    """Lines in memory."""

    lines: PreparedLines

    @property
    def ledger(self) -> Ledger:
        """The account of the lists."""
        return self.lines.ledger

    @property
    def assumptions(self) -> tuple[Assumption, ...]:
        """What was assumed for how many lines."""
        return self.lines.assumptions

    def __len__(self) -> int:
        return len(self.lines)

    def window(self, lower: float, upper: float) -> PreparedLines:
        """The lines from one wavenumber to another."""
        low = int(np.searchsorted(self.lines.wavenumber, lower, side="left"))
        high = int(np.searchsorted(self.lines.wavenumber, upper, side="right"))
        return self.lines if high - low == len(self.lines) else self.lines.part(slice(low, high))

    def count(self, lower: float, upper: float) -> int:
        """How many lines that window holds."""
        nu = self.lines.wavenumber
        return int(np.searchsorted(nu, upper, side="right") - np.searchsorted(nu, lower, side="left"))

    def stretches(self) -> Iterator[PreparedLines]:
        """All lines at once."""
        if len(self.lines):
            yield self.lines

    def sample(self) -> FloatArray:
        """All wavenumbers."""
        return self.lines.wavenumber


class Windows(Protocol):
    """Lines of one list by window: a line store, or a list in memory."""

    def window(self, lower: float, upper: float) -> LineList:
        """The lines from one wavenumber to another (cm-1), ends included."""

    def count(self, lower: float, upper: float) -> int:
        """How many they are."""

    def edges(self) -> list[float]:
        """Wavenumbers at which it is natural to part the lines."""

    def sample(self) -> FloatArray:
        """Wavenumbers of some of the lines, rising."""


@dataclass(frozen=True)
class ListInMemory:
    """A list in memory, by window."""

    lines: LineList

    def window(self, lower: float, upper: float) -> LineList:
        """The lines from one wavenumber to another."""
        nu = self.lines.wavenumber
        return self.lines.select((nu >= lower) & (nu <= upper))

    def count(self, lower: float, upper: float) -> int:
        """How many they are."""
        nu = self.lines.wavenumber
        return int(np.count_nonzero((nu >= lower) & (nu <= upper)))

    def edges(self) -> list[float]:
        """The first wavenumber."""
        return [float(self.lines.wavenumber[0])] if len(self.lines) else []

    def sample(self) -> FloatArray:
        """As a line store gives them: every 4096th wavenumber and the last."""
        nu = self.lines.wavenumber
        return np.append(nu[::SAMPLE_EVERY], nu[-1:])


def as_source(lines: LineSource | PreparedLines) -> LineSource:
    """Prepared lines as a source; a source as it is."""
    return HeldLines(lines) if isinstance(lines, PreparedLines) else lines


@dataclass(frozen=True)
class StoredLines:
    """Lines of one or several lists between `lower` and `upper` (cm-1), prepared when they are read."""

    stores: Sequence[Windows]
    lower: float
    upper: float
    prepare: Callable[[LineList], PreparedLines]
    ledger: Ledger
    assumptions: tuple[Assumption, ...]

    def __len__(self) -> int:
        return sum(store.count(self.lower, self.upper) for store in self.stores)

    def window(self, lower: float, upper: float) -> PreparedLines:
        """The lines from one wavenumber to another, read from disk."""
        lower, upper = max(lower, self.lower), min(upper, self.upper)
        # The selection drops isotopologues that have no line here.
        return self.prepare(merge([store.window(lower, upper) for store in self.stores]).select(slice(None)))

    def count(self, lower: float, upper: float) -> int:
        """How many lines that window holds, before any is left out for its isotopologue."""
        lower, upper = max(lower, self.lower), min(upper, self.upper)
        return sum(store.count(lower, upper) for store in self.stores)

    def stretches(self) -> Iterator[PreparedLines]:
        """All lines, a segment's worth at a time."""
        edges = [edge for store in self.stores for edge in store.edges() if self.lower < edge <= self.upper]
        edges = sorted({self.lower, *edges})
        # The end of a stretch belongs to it; the next one starts just above.
        tops = [*(float(np.nextafter(edge, -np.inf)) for edge in edges[1:]), self.upper]
        for low, high in zip(edges, tops, strict=True):
            yield from pieces(self, low, high)

    def sample(self) -> FloatArray:
        """Every 4096th wavenumber of the stores, and their ends."""
        found = np.concatenate([store.sample() for store in self.stores])
        found = np.sort(found[(found >= self.lower) & (found <= self.upper)])
        return found if found.size > 1 else self.window(self.lower, self.upper).wavenumber
