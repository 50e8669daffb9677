"""160-character records of HITRAN format (layout: Rothman et al. 2005, JQSRT 96, 139, table 1)."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import partial
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.text import UNREADABLE, read_fixed_column, wide_enough
from opacity.line_list.records import ParsedColumns
from opacity.line_list.text import TextChunk

RECORD_LENGTH = 160

# Name: first byte and the byte after the last, from 0.
LAYOUT = {
    "molecule": (0, 2),
    "wavenumber": (3, 15),
    "strength": (15, 25),
    "einstein_a": (25, 35),
    "gamma_air": (35, 40),
    "gamma_self": (40, 45),
    "lower_energy": (45, 55),
    "exponent_air": (55, 59),
    "shift_air": (59, 67),
    "upper_weight": (146, 153),
    "lower_weight": (153, 160),
}
CODE_BYTE = 2
CODES_COLUMN = 127
"""The first of six codes of uncertainty: position, intensity, half-widths by air and self, exponent, shift."""


def hitran_parser(path: Path) -> Callable[[TextChunk], ParsedColumns]:
    """What makes columns of some 160-character records of a file; blanks after the record do no harm."""
    return partial(_parse, path)


def _parse(path: Path, chunk: TextChunk) -> ParsedColumns:
    whole = np.empty(len(chunk), dtype=np.bool_)
    wide_enough(chunk.buffer, chunk.starts, chunk.stops, RECORD_LENGTH, whole)
    columns = parse_fixed(path, chunk, whole, f"{RECORD_LENGTH} characters", LAYOUT)
    for name in ("exponent_self", "shift_self"):
        columns.numbers[name] = np.full(len(chunk), np.nan)
    return columns


def parse_fixed(
    path: Path,
    chunk: TextChunk,
    whole: NDArray[np.bool_],
    expected: str,
    layout: Mapping[str, tuple[int, int]],
    code_byte: int = CODE_BYTE,
) -> ParsedColumns:
    """Columns of fixed width; a record that is not `whole` counts as blank."""
    starts = chunk.starts if whole.all() else np.where(whole, chunk.starts, -1)
    numbers, unreadable = {}, {}
    for name, (first, last) in layout.items():
        values, status = np.empty(len(chunk)), np.empty(len(chunk), dtype=np.uint8)
        read_fixed_column(chunk.buffer, starts, first, last, values, status)
        numbers[name] = values
        if np.any(status == UNREADABLE):
            unreadable[name] = status == UNREADABLE
    code = chunk.buffer[np.where(whole, chunk.starts + code_byte, 0)] if len(chunk) else chunk.buffer[:0]
    return ParsedColumns(
        path=path,
        text=chunk,
        numbers=numbers,
        unreadable=unreadable,
        code=code,
        whole=whole,
        length_expected=expected,
        broadeners=("air", "self"),
    )
