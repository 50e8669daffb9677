"""A list of any size as packed batches in the order of its file, made by several threads and taken in order."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterable, Iterator
from concurrent.futures import Executor, Future
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TypeVar

import numpy as np

from opacity.errors import LineListError, problem
from opacity.line_list.foreign import ForeignRecords
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import StrengthBasis
from opacity.line_list.packed import PackedLines, pack
from opacity.line_list.read import of_isotopologue, parser_of, refuse_unless_among
from opacity.line_list.records import ReadOptions, judge
from opacity.line_list.text import RawText, read_raw
from opacity.molecule.isotopologue import Isotopologue

Item = TypeVar("Item")
Result = TypeVar("Result")

IN_FLIGHT = 4


@dataclass(frozen=True)
class Batch:
    """Some lines of a file in any order: packed, with the isotopologues of their classes, and the account of them.

    `read` is how many bytes of the file had been read by the end of the batch.
    """

    packed: PackedLines
    isotopologues: tuple[Isotopologue, ...]
    basis: tuple[StrengthBasis, ...]
    ledger: Ledger
    read: int = 0


def record_batches(
    path: Path,
    format: str,
    options: ReadOptions,
    leave_out: bool,
    range: tuple[float, float] | None,
    executor: Executor | None,
) -> Iterator[Batch]:
    """The lines of a file of records ("hitran" or "hapi").

    Raises LineListError for the first record that can't be right, or a file that holds none; InputError at the end of
    a file without any line of the isotopologue chosen.
    """
    parse = parser_of(path, format)
    others = ForeignRecords(path, options.formula)
    # Filled by several threads, but asked only when all are done.
    found: set[Isotopologue] = set()

    def work(raw: RawText) -> Batch | None:
        chunk = raw.lines()
        if not len(chunk):
            return None
        lines = judge(parse(chunk), options, leave_out, others)
        found.update(lines.isotopologues)
        if options.isotopologue is not None:
            lines = of_isotopologue(lines, options.isotopologue)
        if range is not None:
            within = (lines.wavenumber >= range[0]) & (lines.wavenumber <= range[1])
            lines = lines.select(within, "outside the range asked for")
        return Batch(pack(lines), lines.isotopologues, lines.basis, lines.ledger, chunk.read)

    yield from not_empty(in_order(work, read_raw(path), executor), path, "record")
    others.refuse_if_all()
    if options.isotopologue is not None:
        refuse_unless_among(sorted(found, key=lambda one: (one.molecule, one.local)), options.isotopologue)


def not_empty(batches: Iterable[Batch | None], path: Path, what: str) -> Iterator[Batch]:
    """The batches that are there.  Raises LineListError at the end if there was none."""
    empty = True
    for batch in batches:
        if batch is not None:
            empty = False
            yield batch
    if empty:
        raise LineListError(problem(path, f"holds no {what}", expected="lines", remedy="fetch the file again"))


def in_order(work: Callable[[Item], Result], items: Iterable[Item], executor: Executor | None) -> Iterator[Result]:
    """The results of `work` in the order of the items, a few of them being made at the same time."""
    if executor is None:
        yield from map(work, items)
        return
    waiting: deque[Future[Result]] = deque()
    try:
        for item in items:
            waiting.append(executor.submit(work, item))
            if len(waiting) >= IN_FLIGHT:
                yield waiting.popleft().result()
        while waiting:
            yield waiting.popleft().result()
    finally:
        for future in waiting:
            future.cancel()


def renumbered(packed: PackedLines, isotopologue: list[int], file: int) -> PackedLines:
    """The lines with their classes' isotopologues numbered anew and all in one file."""
    classes = packed.classes
    place = np.array(isotopologue or [0], dtype=np.int16)
    changed = replace(
        classes,
        isotopologue=place[classes.isotopologue],
        file=np.full(len(classes), file, dtype=np.int16),
    )
    return replace(packed, classes=changed)
