"""Many sorted segments into one sequence of sorted segments, holding few lines at a time."""

from __future__ import annotations

import itertools
from collections import OrderedDict
from collections.abc import Iterator, Sequence
from contextlib import closing
from pathlib import Path

import numpy as np

from opacity.grids import FloatArray
from opacity.line_list.packed import PackedLines, join, used_classes
from opacity.line_store.layout import SAMPLE_EVERY, Segment
from opacity.line_store.segment import SegmentReader, verify_segment

MOST_OPEN = 400


def merged(folder: Path, parts: Sequence[Segment], lines_at_once: int) -> Iterator[PackedLines]:
    """All lines of the parts in order of wavenumber, in stretches of at most about `lines_at_once` lines.

    Lines of equal wavenumber keep the order of the parts and are never torn apart between stretches.
    """
    edges = boundaries(parts, lines_at_once)
    with closing(OpenSegments(folder)) as segments:
        for lower, upper in itertools.pairwise(edges):
            reaching = [part for part in parts if part.first < upper and part.last >= lower]
            pieces = [segments.get(part).read(float(lower), float(upper)) for part in reaching]
            pieces = [used_classes(piece) for piece in pieces if len(piece)]
            if pieces:
                yield join(pieces)


def boundaries(parts: Sequence[Segment], lines_at_once: int) -> FloatArray:
    """Wavenumbers that part the lines into stretches of at most about `lines_at_once`, first and last beyond all."""
    samples = np.sort(np.concatenate([np.asarray(part.sample) for part in parts]))
    every = max(lines_at_once // SAMPLE_EVERY - len(parts), 1)
    inner = np.unique(samples[every::every])
    return np.concatenate([[-np.inf], inner, [np.inf]])


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
