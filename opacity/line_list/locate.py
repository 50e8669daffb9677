"""Records of a file by their line numbers: the file is gone through again for the records wanted alone."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TypeVar

import numpy as np

from opacity.errors import LineListError, problem
from opacity.line_list.text import RawText, TextChunk, read_raw

NUMBERS = 2**32
"""Line numbers are kept modulo this (`packed`)."""

Found = TypeVar("Found")


def find_records(
    path: Path, wanted: Sequence[int], look: Callable[[int, TextChunk], Found | None]
) -> list[tuple[int, Found]]:
    """The true line number and what `look` makes of each record wanted, in the order of `wanted`.

    `wanted` are line numbers modulo 2^32.  `look(k, record)` gets a chunk of one record that may be the k-th one wanted
    and gives None if it is not: then the search goes on.  The file is read no further than it has to be.
    Raises LineListError where a record is not found, or the file cannot be read.
    """
    found: dict[int, tuple[int, Found]] = {}
    for raw in read_raw(path):
        left = [k for k in range(len(wanted)) if k not in found]
        if not left:
            break
        here = [k for k in left if (wanted[k] - raw.first) % NUMBERS <= raw.newlines]
        if here:
            found |= _look(raw, {k: wanted[k] for k in here}, look)
    missing = [wanted[k] for k in range(len(wanted)) if k not in found]
    if missing:
        what = f"the record of line {missing[0]} is no longer there"
        raise LineListError(problem(path, what, remedy="use the list that the table was built from"))
    return [found[k] for k in range(len(wanted))]


def _look(
    raw: RawText, wanted: dict[int, int], look: Callable[[int, TextChunk], Found | None]
) -> dict[int, tuple[int, Found]]:
    chunk = raw.lines()
    found = {}
    for k, number in wanted.items():
        line = raw.first + (number - raw.first) % NUMBERS
        row = int(np.searchsorted(chunk.line, line))
        if row < len(chunk) and chunk.line[row] == line:
            one = slice(row, row + 1)
            record = TextChunk(chunk.buffer, chunk.starts[one], chunk.stops[one], chunk.line[one], chunk.plain[one])
            made = look(k, record)
            if made is not None:
                found[k] = line, made
    return found
