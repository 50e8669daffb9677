"""What a list says of its own uncertainty: codes in records, errors of catalogues.

The meaning of the six codes behind each 160-character record is that of Rothman et al. 2005, JQSRT 96, 139, table 5,
written down from memory.  A code names a class; the upper end of the class is taken.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.line_list.catalogue import catalogue_part
from opacity.line_list.hapi_table import hapi_codes_column
from opacity.line_list.hitran import CODES_COLUMN
from opacity.line_list.model import LineList
from opacity.line_list.read import parser_of
from opacity.line_list.text import TextChunk, read_chunks

RELATIVE = (np.nan, np.nan, np.nan, np.nan, 0.2, 0.1, 0.05, 0.02, 0.01)
"""Intensities and half-widths by code.  0 unreported, 1 default or constant, 2 average or estimate and 3, 20 % or more,
have no upper end: not stated."""
POSITION = (np.nan, 1.0, 0.1, 1e-2, 1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-8)
"""Positions by code, cm-1.  0, unreported or 1 cm-1 and more, has no upper end: not stated."""
CODED = ("position", "strength", "air", "self")
"""What the first four of the six codes speak of; those of exponent and shift are not read."""
MOST_RECORDS = 100_000_000
"""Records whose codes are held, 2 bytes each; those of a longer list are not looked at."""
_NO_CODE = 15


@dataclass(frozen=True)
class StatedUncertainty:
    """What a list states of each line, each (n_lines,), NaN where it states nothing.

    `position` cm-1; `strength` relative; `width` relative, by broadener in lower case.
    """

    position: FloatArray
    strength: FloatArray
    width: Mapping[str, FloatArray]

    @classmethod
    def nothing(cls, lines: int) -> StatedUncertainty:
        """Nothing is stated of so many lines."""
        empty = {name: np.full(lines, np.nan) for name in CODED}
        return cls(empty["position"], empty["strength"], {name: empty[name] for name in CODED[2:]})

    def put(self, which: NDArray[np.intp], stated: StatedUncertainty) -> None:
        """Enter what is stated of some of the lines."""
        self.position[which], self.strength[which] = stated.position, stated.strength
        for name, values in stated.width.items():
            self.width[name][which] = values


def _by_code(classes: tuple[float, ...]) -> FloatArray:
    return np.array([*classes, *[np.nan] * (_NO_CODE + 1 - len(classes))])


_RELATIVE, _POSITION = _by_code(RELATIVE), _by_code(POSITION)


class TooManyRecordsError(Exception):
    """A file has more records than codes are held of; it is caught where they are asked for."""


@dataclass(frozen=True)
class RecordCodes:
    """The codes of a file's records by line number (n_lines_of_text,): four bits for each of `CODED`."""

    packed: NDArray[np.uint16]

    def of(self, lines: LineList) -> StatedUncertainty:
        """What is stated of lines of this file."""
        # A line number beyond the text cannot be, unless the file changed: then nothing is stated.
        known = np.append(self.packed, np.uint16(0xFFFF))
        packed = known[np.minimum(lines.record, self.packed.size)]
        codes = {name: (packed >> (4 * place)) & _NO_CODE for place, name in enumerate(CODED)}
        width = {name: _RELATIVE[codes[name]] for name in CODED[2:]}
        return StatedUncertainty(_POSITION[codes["position"]], _RELATIVE[codes["strength"]], width)


@dataclass(frozen=True)
class CatalogueErrors:
    """The errors of a catalogue's positions by line number (n_lines_of_text,), cm-1."""

    error: NDArray[np.float32]

    def of(self, lines: LineList) -> StatedUncertainty:
        """What is stated of lines of this file."""
        known = np.append(self.error, np.float32(np.nan))
        stated = StatedUncertainty.nothing(len(lines))
        stated.position[:] = known[np.minimum(lines.record, self.error.size)]
        return stated


def record_codes(path: Path, format: str, most: int = MOST_RECORDS) -> RecordCodes | None:
    """The codes of all records of a file ("hitran" or "hapi"); None where a hapi table has no column of them.

    Only digits are codes; a width that the record does not give has none.  Raises TooManyRecordsError for a text of
    over `most` lines, LineListError for a file that cannot be read.
    """
    column = CODES_COLUMN if format == "hitran" else hapi_codes_column(path)
    if column is None:
        return None
    parse = parser_of(path, format)
    parts: list[NDArray[np.uint16]] = []
    lines = 0
    for chunk in read_chunks(path):
        if not len(chunk):
            continue
        first, lines = lines, int(chunk.line[-1]) + 1
        if lines - 1 > most:
            raise TooManyRecordsError
        columns = parse(chunk)
        packed = np.zeros(len(chunk), dtype=np.uint16)
        for place, name in enumerate(CODED):
            code = _digits(chunk, columns.whole, column + place)
            if name in CODED[2:]:
                width = columns.numbers.get(f"gamma_{name}", np.zeros(len(chunk)))
                code[~(width > 0.0)] = _NO_CODE
            packed |= code << (4 * place)
        part = np.full(lines - first, 0xFFFF, dtype=np.uint16)
        part[chunk.line - first] = packed
        parts.append(part)
    return RecordCodes(np.concatenate([np.empty(0, dtype=np.uint16), *parts]))


def _digits(chunk: TextChunk, whole: NDArray[np.bool_], column: int) -> NDArray[np.uint16]:
    """The digit in a column of each record, 15 for anything else."""
    byte = chunk.buffer[np.where(whole, chunk.starts + column, 0)].astype(np.int16) - ord("0")
    return np.where(whole & (byte >= 0) & (byte <= 9), byte, _NO_CODE).astype(np.uint16)


def catalogue_errors(path: Path, most: int = MOST_RECORDS) -> CatalogueErrors:
    """The errors of all positions of a catalogue file.  An error of 0 states nothing.

    Raises TooManyRecordsError for a text of over `most` lines, LineListError for a file that cannot be read.
    """
    parts: list[NDArray[np.float32]] = []
    lines = 0
    for chunk in read_chunks(path):
        if not len(chunk):
            continue
        first, lines = lines, int(chunk.line[-1]) + 1
        if lines - 1 > most:
            raise TooManyRecordsError
        found = catalogue_part(path, chunk, leave_out=True)
        part = np.full(lines - first, np.nan, dtype=np.float32)
        part[found.record - first] = np.where(found.uncertainty > 0.0, found.uncertainty, np.nan)
        parts.append(part)
    return CatalogueErrors(np.concatenate([np.empty(0, dtype=np.float32), *parts]))
