"""Many sorted segments into one sequence of sorted stretches, holding few lines at a time."""

from __future__ import annotations

import itertools
from collections import OrderedDict
from collections.abc import Iterator, Sequence
from contextlib import closing
from pathlib import Path

import numpy as np

from opacity.grids import FloatArray
from opacity.line_list.packed import PackedLines, join
from opacity.line_store.layout import SAMPLE_EVERY, Segment
from opacity.line_store.segment import SegmentReader, verify_segment

MOST_OPEN = 64
_SHORTEST = 1e-6


def merged(folder: Path, parts: Sequence[Segment], weight_at_once: int) -> Iterator[PackedLines]:
    """All lines of the parts in order of wavenumber, in stretches that weigh about `weight_at_once` at most.

    A line weighs 1, a class 2 and another 1 for each broadener.  Lines of equal wavenumber keep the order of the parts
    and are never torn apart between stretches.
    """
    with closing(OpenSegments(folder)) as segments:
        for lower, upper in itertools.pairwise(boundaries(parts, weight_at_once)):
            found = _read(segments, parts, float(lower), float(upper), 1.25 * weight_at_once)
            if found is not None:
                if found:
                    yield join(found)
                continue
            finer = _finer(segments, parts, float(lower), float(upper), weight_at_once)
            for low, high in itertools.pairwise(finer):
                found = _read(segments, parts, float(low), float(high), np.inf)
                if found:
                    yield join(found)


def _reaching(parts: Sequence[Segment], lower: float, upper: float) -> list[Segment]:
    return [part for part in parts if part.first < upper and part.last >= lower]


def _read(
    segments: OpenSegments, parts: Sequence[Segment], lower: float, upper: float, most: float
) -> list[PackedLines] | None:
    """What each part holds with lower <= wavenumber < upper; None if it weighs more than `most`."""
    pieces: list[PackedLines] = []
    total = 0
    for part in _reaching(parts, lower, upper):
        reader = segments.get(part)
        total += reader.weight(lower, upper)
        if total > most:
            return None
        piece = reader.read(lower, upper)
        if len(piece):
            pieces.append(piece)
    return pieces


def _finer(
    segments: OpenSegments, parts: Sequence[Segment], lower: float, upper: float, weight_at_once: int
) -> FloatArray:
    """The stretch's ends, and edges between for one whose lines and classes weigh more than was estimated."""
    weight = 0
    found = []
    for part in _reaching(parts, lower, upper):
        reader = segments.get(part)
        weight += reader.weight(lower, upper)
        found.append(reader.wavenumbers(lower, upper))
    values = np.sort(np.concatenate(found))
    step = max(values.size * weight_at_once // weight, 1)
    inner = np.unique(values[step::step])
    return np.concatenate([[lower], inner[inner > lower], [upper]])


def boundaries(parts: Sequence[Segment], lines_at_once: int) -> FloatArray:
    """Wavenumbers that part the lines into stretches of about `lines_at_once`, first and last beyond all.

    Each sample stands for the lines up to the next one of its part, taken to be spread evenly between the two.
    """
    starts, ends, weights = (np.concatenate(column) for column in zip(*map(_blocks, parts), strict=True))
    spread = ends - starts > _SHORTEST
    rate = weights[spread] / (ends - starts)[spread]
    place = np.concatenate([starts[spread], ends[spread], starts[~spread]])
    change = np.concatenate([rate, -rate, np.zeros(int((~spread).sum()))])
    jump = np.concatenate([np.zeros(2 * rate.size), weights[~spread]])
    order = np.argsort(place, kind="stable")
    place = place[order]
    rates = np.cumsum(change[order])
    total = np.cumsum(jump[order]) + np.concatenate([[0.0], np.cumsum(rates[:-1] * np.diff(place))])
    total = np.maximum.accumulate(total)
    pieces = max(int(np.ceil(float(weights.sum()) / lines_at_once)), 1)
    inner = np.interp(float(total[-1]) * np.arange(1, pieces) / pieces, total, place)
    return np.concatenate([[-np.inf], np.unique(inner), [np.inf]])


def _blocks(part: Segment) -> tuple[FloatArray, FloatArray, FloatArray]:
    """First and last wavenumbers of a part's blocks, and how many lines each holds."""
    sample = np.asarray(part.sample)
    weights = np.full(sample.size - 1, float(SAMPLE_EVERY))
    weights[-1] = part.lines - (sample.size - 2) * SAMPLE_EVERY
    return sample[:-1], sample[1:], weights


class OpenSegments:
    """Segments kept open, least recently used closed first; each is verified by its sha256 when first opened."""

    def __init__(self, folder: Path, most: int = MOST_OPEN) -> None:
        self._folder, self._most = folder, most
        self._open: OrderedDict[str, SegmentReader] = OrderedDict()
        self._verified: set[str] = set()

    def get(self, segment: Segment) -> SegmentReader:
        """The open segment."""
        if segment.file in self._open:
            self._open.move_to_end(segment.file)
            return self._open[segment.file]
        if segment.file not in self._verified:
            verify_segment(self._folder, segment)
            self._verified.add(segment.file)
        self._open[segment.file] = SegmentReader(self._folder, segment)
        while len(self._open) > self._most:
            self._open.popitem(last=False)[1].close()
        return self._open[segment.file]

    def close(self) -> None:
        """Close them all."""
        while self._open:
            self._open.popitem()[1].close()
