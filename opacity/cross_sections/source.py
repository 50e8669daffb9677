"""Prepared lines by window, wherever they lie: held in memory, or read from line stores when they are needed."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from opacity.cross_sections.prepare import PreparedLines
from opacity.grids import FloatArray
from opacity.line_list.model import LineList
from opacity.line_list.read import merge
from opacity.line_store.store import LineStore


class LineSource(Protocol):
    """Lines in reach of a grid, sorted by unshifted wavenumber."""

    def __len__(self) -> int:
        """Number of lines."""

    def window(self, lower: float, upper: float) -> PreparedLines:
        """The lines from one wavenumber to another (cm-1), ends included; margins are the caller's to add."""

    def stretches(self) -> Iterator[PreparedLines]:
        """All lines, each once, some at a time in order of wavenumber."""

    def sample(self) -> FloatArray:
        """Wavenumbers of some of the lines (n,), spread as all are, rising."""


@dataclass(frozen=True)
class HeldLines:
    """Lines in memory."""

    lines: PreparedLines

    def __len__(self) -> int:
        return len(self.lines)

    def window(self, lower: float, upper: float) -> PreparedLines:
        """The lines from one wavenumber to another."""
        low = int(np.searchsorted(self.lines.wavenumber, lower, side="left"))
        high = int(np.searchsorted(self.lines.wavenumber, upper, side="right"))
        return self.lines if high - low == len(self.lines) else self.lines.part(slice(low, high))

    def stretches(self) -> Iterator[PreparedLines]:
        """All lines at once."""
        if len(self.lines):
            yield self.lines

    def sample(self) -> FloatArray:
        """All wavenumbers."""
        return self.lines.wavenumber


@dataclass(frozen=True)
class StoredLines:
    """Lines of one or several line stores between `lower` and `upper` (cm-1), prepared when they are read."""

    stores: Sequence[LineStore]
    lower: float
    upper: float
    prepare: Callable[[LineList], PreparedLines]

    def __len__(self) -> int:
        return sum(store.count(self.lower, self.upper) for store in self.stores)

    def window(self, lower: float, upper: float) -> PreparedLines:
        """The lines from one wavenumber to another, read from disk."""
        lower, upper = max(lower, self.lower), min(upper, self.upper)
        return self.prepare(merge([store.window(lower, upper) for store in self.stores]))

    def stretches(self) -> Iterator[PreparedLines]:
        """All lines, a segment's worth at a time."""
        edges = [edge for store in self.stores for edge in store.edges() if self.lower < edge <= self.upper]
        edges = sorted({self.lower, *edges})
        # The end of a stretch belongs to it; the next one starts just above.
        tops = [*(float(np.nextafter(edge, -np.inf)) for edge in edges[1:]), self.upper]
        for low, high in zip(edges, tops, strict=True):
            lines = self.window(low, high)
            if len(lines):
                yield lines

    def sample(self) -> FloatArray:
        """Every 4096th wavenumber of the stores, and their ends."""
        found = np.concatenate(
            [np.asarray(segment.sample) for store in self.stores for segment in store.index.segments]
        )
        return np.sort(found[(found >= self.lower) & (found <= self.upper)])
