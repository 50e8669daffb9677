"""Columns of numbers in a text file: a spectrum that some other program wrote down."""

from __future__ import annotations

import math
import os
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from opacity.errors import InputError, TableError, excerpt, problem
from opacity.grids import FloatArray
from opacity.line_list.text import read_chunks
from opacity.units import SPECTRAL_UNITS

_BYTE_ORDER_MARK = b"\xef\xbb\xbf"


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
    places, values, lines = _read(path, columns)
    if len(places) < 2:
        raise TableError(problem(path, "fewer than two rows of numbers", expected=_EXPECTED, found=len(places)))
    nu, sigma = np.array(places), np.array(values)
    divided = SPECTRAL_UNITS[axis]
    if divided is not None:
        nu = divided / nu
    step = np.diff(nu)
    falls = step[0] < 0.0
    wrong = np.flatnonzero((step >= 0.0) if falls else (step <= 0.0))
    if wrong.size:
        row = int(wrong[0]) + 1
        found = f"{places[row]:.10g} after {places[row - 1]:.10g}"
        raise TableError(
            problem(
                f"{path}:{lines[row]}", "out of order", expected="an axis that rises or falls throughout", found=found
            )
        )
    if falls:
        nu, sigma = nu[::-1], sigma[::-1]
    axes = np.array(node[:1]), np.array(node[1:])
    return NumberColumns(path, np.ascontiguousarray(nu), np.ascontiguousarray(sigma), *axes)


_EXPECTED = "rows of wavenumber or wavelength and cross-section"


def _read(path: Path, columns: tuple[int, int]) -> tuple[list[float], list[float], list[int]]:
    """The two columns and the line numbers of their rows."""
    places: list[float] = []
    values: list[float] = []
    lines: list[int] = []
    first = True
    for chunk in read_chunks(path):
        for row in range(len(chunk)):
            record = chunk.record(row).removeprefix(_BYTE_ORDER_MARK).partition(b"#")[0]
            words = _words(record)
            if not words:
                continue
            where = f"{path}:{chunk.line[row]}"
            numbers = [_number(words[place - 1]) if place <= len(words) else None for place in columns]
            if None in numbers and first and not any(_number(word) is not None for word in words):
                first = False  # names of columns
                continue
            first = False
            if len(words) < max(columns):
                expected = f"{max(columns)} columns, of which {columns[0]} and {columns[1]} are read"
                raise TableError(problem(where, "too few columns", expected=expected, found=f'"{excerpt(record)}"'))
            place, value = (math.nan if one is None else one for one in numbers)
            if not 0.0 < place < math.inf:
                raise _fault(where, "axis is impossible", "a finite number above 0", record)
            if not 0.0 <= value < math.inf:
                raise _fault(where, "cross-section is impossible", "a finite number, 0 or more", record)
            places.append(place)
            values.append(value)
            lines.append(int(chunk.line[row]))
    return places, values, lines


def _fault(where: str, what: str, expected: str, record: bytes) -> TableError:
    return TableError(problem(where, what, expected=expected, found=f'"{excerpt(record.strip())}"'))


def _words(record: bytes) -> list[str]:
    text = record.decode("latin-1")
    for separator in (",", ";"):
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
