"""From the sorted parts of all input files to the store's segments and its index."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import LineListError, ResourceError, problem
from opacity.grids import FloatArray
from opacity.line_list.duplicates import IN_ONE_LIST
from opacity.line_list.ledger import Ledger
from opacity.line_list.packed import Identical, PackedLines, count_identical, join, used_classes
from opacity.line_store.layout import FORMAT_NAME, FORMAT_VERSION, INDEX, PARTS, SEGMENT_LINES, Segment, sealed
from opacity.line_store.merge import merged
from opacity.line_store.segment import write_segment
from opacity.tables.atomic import write_atomically

ASKED_FOR = ("outside the range asked for", "another isotopologue than the one chosen")
"""Reasons for which a record is left out though nothing is wrong with it."""

_ENDING = ".lines.h5"

Spans = dict[int, tuple[float, float]]
"""First and last wavenumber by number of the isotopologue."""


def weight(packed: PackedLines) -> int:
    """Lines that the packed lines count for: a table of classes as long as the list weighs as much again."""
    return len(packed) + len(packed.classes) * (2 + len(packed.classes.broadeners))


def assemble(
    folder: Path,
    manifests: list[dict[str, Any]],
    key: str,
    weight_at_once: int,
    facts: dict[str, Any],
    still_ours: Callable[[], None],
) -> None:
    """Merge all parts into the store's segments and write its index, which makes it a store.

    `still_ours` raises where another process has taken the folder over.
    Raises LineListError where every record was left out as bad, or where files of the list hold the same records.
    """
    known, basis, numbers = _isotopologues(manifests)
    parts = [Segment.from_dict(one) for manifest in manifests for one in manifest["segments"]]
    ledger = Ledger()
    for manifest in manifests:
        ledger.add(Ledger.from_dict(manifest["ledger"]))
    names = [str(manifest["identity"]["files"][0]["file"]) for manifest in manifests]
    if ledger.left_out and not set(ledger.left_out).intersection(ASKED_FOR):
        ledger.refuse_nothing_kept(names[0])
    still_ours()
    _remove_store(folder)
    spans: Spans = {}
    segments, repeated = _merge(folder, parts, numbers, weight_at_once, spans)
    if repeated.files is not None:
        still_ours()
        _remove_store(folder)
        raise LineListError(_said_twice(names, repeated))
    if repeated.within:
        ledger.notes[IN_ONE_LIST] += repeated.within
    if sum(segment.lines for segment in segments) != ledger.kept:
        raise LineListError(
            problem(folder, "lines were lost on the way to the store", expected=ledger.kept,
                    found=sum(segment.lines for segment in segments))
        )  # fmt: skip
    index = {
        "format": FORMAT_NAME,
        "format_version": FORMAT_VERSION,
        "key": key,
        "facts": facts,
        "inputs": [manifest["identity"] for manifest in manifests],
        "ledger": ledger.as_dict(),
        "isotopologues": known,
        "basis": basis,
        "spans": [spans.get(number) for number in range(len(known))],
        "broadeners": sorted({name for manifest in manifests for name in manifest["broadeners"]}),
        "segments": [segment.as_dict() for segment in segments],
    }
    write_atomically(folder / INDEX, sealed(index), check=lambda _: still_ours())


def _said_twice(names: list[str], repeated: Identical) -> str:
    one, other = (names[number] for number in repeated.files or ())
    return problem(
        other,
        f"the same records stand in {one} and {other} and would count twice",
        found=f"{repeated.across} such records",
        remedy="name each file once, and no file that holds another's lines",
    )


def _isotopologues(
    manifests: list[dict[str, Any]],
) -> tuple[list[dict[str, Any]], list[dict[str, Any]], list[list[int]]]:
    """The store's isotopologues and what their strengths stand for, and by file the number of each of its own."""
    pairs: list[tuple[dict[str, Any], dict[str, Any]]] = []
    numbers: list[list[int]] = []
    for manifest in manifests:
        own = list(zip(manifest["isotopologues"], manifest["basis"], strict=True))
        pairs += [pair for pair in own if pair not in pairs]
        numbers.append([pairs.index(pair) for pair in own])
    return [one for one, _ in pairs], [of for _, of in pairs], numbers


def _remove_store(folder: Path) -> None:
    """Remove an earlier store's index and then its segments, so that no index ever stands beside another's lines."""
    try:
        (folder / INDEX).unlink(missing_ok=True)
        for path in sorted(folder.glob(f"*{_ENDING}")):
            path.unlink(missing_ok=True)
    except OSError as error:
        raise ResourceError(problem(folder, f"the old line store cannot be removed ({error.strerror})")) from error


def _merge(
    folder: Path, parts: list[Segment], numbers: list[list[int]], weight_at_once: int, spans: Spans
) -> tuple[list[Segment], Identical]:
    """The store's segments, and how many lines are identical to another; `spans` is filled."""
    segments: list[Segment] = []
    repeated = Identical(0, 0, None)
    waiting: list[PackedLines] = []
    for stretch in merged(folder / PARTS, parts, max(weight_at_once // 2, 1)) if parts else ():
        numbered = _number_isotopologues(stretch, numbers)
        widen(spans, numbered.wavenumber, numbered.classes.isotopologue[numbered.width_class])
        found = count_identical(numbered)
        repeated = Identical(
            repeated.within + found.within, repeated.across + found.across, repeated.files or found.files
        )
        waiting.append(numbered)
        heavy = sum(weight(one) for one in waiting) >= weight_at_once
        if heavy or sum(len(one) for one in waiting) >= SEGMENT_LINES:
            full = list(pieces(join(waiting), SEGMENT_LINES))
            waiting.clear()
            if len(full) > 1 and len(full[-1]) < SEGMENT_LINES:
                waiting.append(used_classes(full.pop()))
            segments += [_segment(folder, len(segments) + k, piece) for k, piece in enumerate(full)]
    for piece in pieces(join(waiting), SEGMENT_LINES) if waiting else ():
        segments.append(_segment(folder, len(segments), piece))
    return segments, repeated


def widen(spans: Spans, wavenumber: FloatArray, isotopologue: NDArray[np.int16]) -> None:
    """Widen the spans by some lines (n,), sorted by wavenumber, of the isotopologues of these numbers (n,)."""
    for number in np.flatnonzero(np.bincount(isotopologue)).tolist():
        own = isotopologue == number
        first, last = float(wavenumber[own.argmax()]), float(wavenumber[own.size - 1 - own[::-1].argmax()])
        low, high = spans.get(number, (first, last))
        spans[number] = (min(low, first), max(high, last))


def _segment(folder: Path, number: int, packed: PackedLines) -> Segment:
    return write_segment(folder, f"{number:06d}{_ENDING}", packed)


def pieces(packed: PackedLines, size: int) -> Iterator[PackedLines]:
    """Sorted lines in pieces of `size` lines, more where lines of one wavenumber would be torn apart."""
    start, values = 0, packed.wavenumber
    while start < len(packed):
        stop = len(packed)
        if start + size < stop:
            stop = int(np.searchsorted(values, values[start + size - 1], side="right"))
        yield packed.select(slice(start, stop))
        start = stop


def _number_isotopologues(packed: PackedLines, numbers: list[list[int]]) -> PackedLines:
    """From each file's own numbering of isotopologues to that of the store."""
    classes = packed.classes
    table = np.zeros((len(numbers), max(map(len, numbers))), dtype=np.int16)
    for file, own in enumerate(numbers):
        table[file, : len(own)] = own
    return replace(packed, classes=replace(classes, isotopologue=table[classes.file, classes.isotopologue]))
