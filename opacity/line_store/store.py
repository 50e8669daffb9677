"""An open line store: what it holds, and its lines by window."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from opacity.errors import LineListError, problem
from opacity.grids import FloatArray
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.packed import join, unpack
from opacity.line_store.assemble import Spans, widen
from opacity.line_store.ingest import InputFile, same_content
from opacity.line_store.layout import FORMAT_NAME, FORMAT_VERSION, INDEX, Segment, unsealed
from opacity.line_store.merge import OpenSegments
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import Isotopologue


@dataclass(frozen=True)
class StoreIndex:
    """What `index.json` says: how the lines were read, from what, and where they lie.

    `spans` are first and last wavenumber (cm-1) by isotopologue, None for one without lines; an index of version 1
    does not tell them.
    """

    key: str
    facts: dict[str, Any]
    inputs: tuple[dict[str, Any], ...]
    ledger: Ledger
    isotopologues: tuple[Isotopologue, ...]
    basis: tuple[StrengthBasis, ...]
    broadeners: tuple[str, ...]
    segments: tuple[Segment, ...]
    spans: tuple[tuple[float, float] | None, ...] | None = None

    @property
    def lines(self) -> int:
        """Number of lines kept."""
        return sum(segment.lines for segment in self.segments)

    @property
    def bytes(self) -> int:
        """Size of the segments on disk."""
        return sum(segment.bytes for segment in self.segments)


def read_index(folder: Path) -> StoreIndex | None:
    """The index of a store, None where there is none.  Raises LineListError for one that this version can't read."""
    path = folder / INDEX
    if "\0" in str(folder):  # no file system has such a name
        return None
    try:
        data = path.read_bytes()
    except OSError:
        return None
    remedy = "remove the folder: the store is made again from the line lists"
    try:
        values = unsealed(data)
        version = int(values["format_version"])
        if values["format"] != FORMAT_NAME or not 1 <= version <= FORMAT_VERSION:
            raise LineListError(
                problem(path, "a line store of another version", expected=f"version 1 to {FORMAT_VERSION}",
                        found=values["format_version"], remedy=remedy)
            )  # fmt: skip
        account = values["ledger"]
        return StoreIndex(
            key=str(values["key"]),
            facts=dict(values["facts"]),
            inputs=tuple(values["inputs"]),
            ledger=Ledger.from_dict(account),
            isotopologues=tuple(Isotopologue(**one) for one in values["isotopologues"]),
            basis=tuple(StrengthBasis(**one) for one in values["basis"]),
            broadeners=tuple(str(name) for name in values["broadeners"]),
            segments=tuple(Segment.from_dict(one) for one in values["segments"]),
            spans=_spans(values["spans"], len(values["isotopologues"])) if version > 1 else None,
        )
    except (KeyError, IndexError, TypeError, ValueError, AttributeError, RecursionError) as error:
        raise LineListError(problem(path, f"not the index of a line store ({error!r})", remedy=remedy)) from error


def _spans(values: list[list[float] | None], count: int) -> tuple[tuple[float, float] | None, ...]:
    """The spans that an index names.  Raises ValueError unless there is one for each isotopologue."""
    if len(values) != count:
        raise ValueError(f"{len(values)} spans of {count} isotopologues")
    return tuple(None if one is None else (float(one[0]), float(one[1])) for one in values)


def is_current(index: StoreIndex, inputs: list[InputFile], key: str) -> bool:
    """Whether a store was made of these inputs as they are now, read in the way that `key` says."""
    if index.key != key or len(index.inputs) != len(inputs):
        return False
    return all(same_content(one, known) for one, known in zip(inputs, index.inputs, strict=True))


class LineStore:
    """A line store on disk.  Use it in a `with` statement or close it; each segment is verified when first read."""

    def __init__(self, folder: Path) -> None:
        index = read_index(folder)
        if index is None:
            raise LineListError(problem(folder, "no line store here", expected=f"a folder with {INDEX}"))
        self.folder, self.index = folder, index
        self._segments = OpenSegments(folder)

    def __enter__(self) -> LineStore:
        return self

    def __exit__(self, *error: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the files."""
        self._segments.close()

    def window(self, lower: float, upper: float) -> LineList:
        """The lines with lower <= wavenumber <= upper (cm-1), sorted; the margin is the caller's to add."""
        end = float(np.nextafter(upper, np.inf))
        pieces = [
            self._segments.get(segment).read(lower, end)
            for segment in self.index.segments
            if segment.first < end and segment.last >= lower
        ]
        pieces = [piece for piece in pieces if len(piece)]
        empty = self._empty()
        if not pieces:
            return empty
        packed = pieces[0] if len(pieces) == 1 else join(pieces)
        return unpack(packed, empty, self.index.basis, self.index.broadeners)

    def count(self, lower: float, upper: float) -> int:
        """Number of lines with lower <= wavenumber <= upper."""
        end = float(np.nextafter(upper, np.inf))
        total = 0
        for segment in self.index.segments:
            if segment.first >= lower and segment.last < end:
                total += segment.lines
            elif segment.first < end and segment.last >= lower:
                total += self._segments.get(segment).count(lower, end)
        return total

    def spans(self) -> dict[str, tuple[float, float]]:
        """First and last wavenumber (cm-1) of each isotopologue that has lines, by its formula.

        A store of version 1, whose index does not tell, is gone through for it.
        """
        known = self.index.spans
        if known is None:
            spans: Spans = {}
            for lines in self.stretches(-np.inf, np.inf):
                widen(spans, lines.wavenumber, lines.isotopologue)
            known = tuple(spans.get(number) for number in range(len(self.index.isotopologues)))
        found: dict[str, tuple[float, float]] = {}
        for one, span in zip(self.index.isotopologues, known, strict=True):
            if span is not None:
                low, high = found.get(one.formula, span)
                found[one.formula] = (min(low, span[0]), max(high, span[1]))
        return found

    def edges(self) -> list[float]:
        """First wavenumbers of the segments."""
        return [segment.first for segment in self.index.segments]

    def sample(self) -> FloatArray:
        """Every 4096th wavenumber, and the last of each segment."""
        return np.concatenate([np.empty(0), *(np.asarray(segment.sample) for segment in self.index.segments)])

    def stretches(self, lower: float, upper: float) -> Iterator[LineList]:
        """The same lines, segment by segment in order of wavenumber, so that few are held at a time."""
        for segment in self.index.segments:
            first, last = max(lower, segment.first), min(upper, segment.last)
            if first <= last:
                yield self.window(first, last)

    def _empty(self) -> LineList:
        nothing = np.empty(0)
        return LineList(
            wavenumber=nothing,
            strength=nothing,
            lower_energy=nothing,
            einstein_a=nothing,
            upper_weight=nothing,
            lower_weight=nothing,
            isotopologue=np.empty(0, dtype=np.int16),
            isotopologues=self.index.isotopologues,
            basis=self.index.basis,
            broadeners={name: BroadenerColumns(nothing, nothing, nothing) for name in self.index.broadeners},
            record=np.empty(0, dtype=np.int64),
            file=np.empty(0, dtype=np.int16),
            files=tuple(entry["files"][0]["file"] for entry in self.index.inputs),
            ledger=self.index.ledger,
        )
