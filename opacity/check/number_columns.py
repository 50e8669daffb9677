"""Columns of numbers in a text file: a spectrum that some other program wrote down."""

from __future__ import annotations

import io
import math
import os
import warnings
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.errors import InputError, TableError, excerpt, problem
from opacity.grids import FloatArray
from opacity.line_list.text import TextChunk, read_chunks
from opacity.units import SPECTRAL_UNITS

_BYTE_ORDER_MARK = b"\xef\xbb\xbf"
_SEPARATORS = (",", ";")
_EXPECTED = "rows of wavenumber or wavelength and cross-section"
_Rows = tuple[FloatArray, FloatArray, NDArray[np.int64]]
"""Axis, cross-section and line numbers of some rows, (n,) each."""


@dataclass(frozen=True)
class NumberColumns:
    """A spectrum as a table of one node: `temperature` (K) and `pressure` (bar), (1,) each.

    `wavenumber` (cm-1), rising, and `sigma`, (n_nu,) both; `sigma` is in the unit of the file until it is `scaled`.
    """

    path: Path
    wavenumber: FloatArray
    sigma: FloatArray
    temperature: FloatArray
    pressure: FloatArray
    profile: bool = True

    def scaled(self, factor: float) -> NumberColumns:
        """The same with the cross-section multiplied."""
        return replace(self, sigma=factor * self.sigma)

    def at(self, temperature: float, pressure: float) -> FloatArray:
        """The cross-section (cm2/molecule), (n_nu,), at the one node that there is."""
        del temperature, pressure
        return self.sigma


def read_number_columns(path: Path, node: tuple[float, float], columns: tuple[int, int], axis: str) -> NumberColumns:
    """The spectrum in a text file, plain, .gz or .bz2; its cross-section in the unit of the file.

    `node` is its temperature (K) and pressure (bar); `columns`, counted from 1, are those of axis and cross-section;
    `axis` is "cm-1", or "um" or "nm" for vacuum wavelengths.  Columns are parted by blanks, commas, semicolons or tabs;
    what follows a # is a comment, and the first line may name the columns.  The axis rises or falls throughout.
    Raises TableError naming file and line for what can't be right, LineListError for a damaged or unreadable file,
    InputError for another unit of the axis.
    """
    if axis not in SPECTRAL_UNITS:
        allowed = ", ".join(f'"{name}"' for name in SPECTRAL_UNITS)
        raise InputError(problem("axis", "unknown unit of a spectral axis", expected=allowed, found=f'"{axis}"'))
    if os.path.exists(path) and not os.path.isfile(path):
        # A pipe would be waited for.
        raise TableError(problem(path, "not a file", expected="a table, or text of columns"))
    places, sigma, lines = _read(path, columns)
    if places.size < 2:
        raise TableError(problem(path, "fewer than two rows of numbers", expected=_EXPECTED, found=places.size))
    nu = places
    divided = SPECTRAL_UNITS[axis]
    if divided is not None:
        nu = divided / nu
    step = np.diff(nu)
    falls = step[0] < 0.0
    wrong = np.flatnonzero((step >= 0.0) if falls else (step <= 0.0))
    if wrong.size:
        row = int(wrong[0]) + 1
        found = f"{places[row]:.10g} after {places[row - 1]:.10g}"
        expected = "an axis that rises or falls throughout"
        raise TableError(problem(f"{path}:{lines[row]}", "out of order", expected=expected, found=found))
    if falls:
        nu, sigma = nu[::-1], sigma[::-1]
    axes = np.array(node[:1]), np.array(node[1:])
    return NumberColumns(path, np.ascontiguousarray(nu), np.ascontiguousarray(sigma), *axes)


def _read(path: Path, columns: tuple[int, int]) -> _Rows:
    """The two columns of all rows."""
    parts = [(np.empty(0), np.empty(0), np.empty(0, dtype=np.int64))]
    named = begun = False
    for chunk in read_chunks(path):
        row = 0
        # Up to the first row of numbers there may be names of columns.
        while not begun and row < len(chunk):
            words = _words(chunk.record(row))
            if words and not named and all(_number(word) is None for word in words):
                named = True
            elif words:
                parts.append(_one_by_one(path, chunk, row, row + 1, columns))
                begun = True
            row += 1
        if row < len(chunk):
            parts.append(_at_once(chunk, row, columns) or _one_by_one(path, chunk, row, len(chunk), columns))
    axis, values, lines = zip(*parts, strict=True)
    return np.concatenate(axis), np.concatenate(values), np.concatenate(lines)


def _at_once(chunk: TextChunk, row: int, columns: tuple[int, int]) -> _Rows | None:
    """The rows of a chunk from one on by numpy's reader; None where they have to be looked at one by one."""
    text = chunk.buffer[chunk.starts[row] : chunk.stops[-1]].tobytes().decode("latin-1")
    delimiter = next((one for one in _SEPARATORS if one in text), None)
    wanted = [place - 1 for place in columns]
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # of text without a row
            found = np.loadtxt(io.StringIO(text), delimiter=delimiter, usecols=wanted, ndmin=2, dtype=np.float64)
    except (ValueError, IndexError):
        return None
    if found.shape != (len(chunk) - row, 2):
        return None
    axis, values = found.T
    if not np.all((axis > 0.0) & (axis < np.inf) & (values >= 0.0) & (values < np.inf)):
        return None
    return axis, values, chunk.line[row:]


def _one_by_one(path: Path, chunk: TextChunk, start: int, stop: int, columns: tuple[int, int]) -> _Rows:
    """The rows of a chunk from one to before another.  Raises TableError for the first that can't be right."""
    places: list[float] = []
    values: list[float] = []
    lines: list[int] = []
    for row in range(start, stop):
        record = chunk.record(row)
        words = _words(record)
        if not words:
            continue
        where = f"{path}:{chunk.line[row]}"
        if len(words) < max(columns):
            expected = f"{max(columns)} columns, of which {columns[0]} and {columns[1]} are read"
            raise _fault(where, "too few columns", expected, record)
        place, value = (_number(words[one - 1]) for one in columns)
        if place is None or not 0.0 < place < math.inf:
            raise _fault(where, "axis is impossible", "a finite number above 0", record)
        if value is None or not 0.0 <= value < math.inf:
            raise _fault(where, "cross-section is impossible", "a finite number, 0 or more", record)
        places.append(place)
        values.append(value)
        lines.append(int(chunk.line[row]))
    return np.array(places), np.array(values), np.array(lines, dtype=np.int64)


def _fault(where: str, what: str, expected: str, record: bytes) -> TableError:
    return TableError(problem(where, what, expected=expected, found=f'"{excerpt(record.strip())}"'))


def _words(record: bytes) -> list[str]:
    text = record.removeprefix(_BYTE_ORDER_MARK).partition(b"#")[0].decode("latin-1")
    for separator in _SEPARATORS:
        if separator in text:
            return [word.strip() for word in text.split(separator)]
    return text.split()


def _number(word: str) -> float | None:
    """A number as programs write it, with a D for an exponent too; None for any other text."""
    if "_" in word:  # python's own way of writing thousands
        return None
    try:
        return float(word.lower().replace("d", "e"))
    except ValueError:
        return None
