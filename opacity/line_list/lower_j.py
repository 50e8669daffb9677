"""J'' and J' out of the quantum numbers of 160-character records, and widths by them for lists that have none.

Where J'' stands depends on the molecule (groups of Rothman et al. 2005, JQSRT 96, 139, table 4; which molecule
belongs to which group, and the columns, from memory, checked on real CO and H2O records).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.constants import STANDARD_ATMOSPHERE
from opacity.errors import LineListError, problem
from opacity.grids import FloatArray
from opacity.kernels.text import READ, read_fixed_column
from opacity.line_list.exomol.broadening import KINDS, BroadeningTable, match_rows, served_notes, widths_of
from opacity.line_list.text import TextChunk

# HITRAN molecule numbers.
ASYMMETRIC = frozenset({1, 3, 9, 10, 12, 20, 21, 25, 29, 31, 32, 33, 35, 37, 38})
LINEAR = frozenset({2, 4, 5, 14, 15, 16, 17, 19, 22, 23, 26, 36, 43, 44, 45, 46, 48, 53})
SPHERICAL = frozenset({6, 42, 52})
METHANE = 6
_CODE = 2
SYMMETRIC = frozenset({24, 27, 28, 40, 41})

_BRANCH = 117
"""Byte of the branch letter in records of linear molecules."""
_CHANGE = {ord("O"): -2.0, ord("P"): -1.0, ord("Q"): 0.0, ord("R"): 1.0, ord("S"): 2.0}
_UPPER_BEFORE_LOWER = 15
"""Bytes from J' to J'' in records of molecules that are not linear: the width of the local quanta of one state."""


def j_columns(molecule: int) -> tuple[int, int] | None:
    """First byte of J'' and the byte after its last in the records of a molecule; None where it is not known."""
    if molecule in LINEAR:
        return 118, 121
    if molecule in SPHERICAL:
        return 114, 117
    return (112, 115) if molecule in ASYMMETRIC | SYMMETRIC else None


def read_j(path: Path, text: TextChunk, whole: NDArray[np.bool_], molecule: int) -> tuple[FloatArray, FloatArray]:
    """J'' and J' of records (n,), NaN where they cannot be read; J' is J'' where it cannot be read.

    J' is told by the branch for linear molecules and stands in the record of the others.

    Raises LineListError for a molecule whose records' quantum numbers are not known here.
    """
    span = j_columns(molecule)
    if span is None:
        raise LineListError(
            problem(
                path,
                f"J'' is not read from records of molecule {molecule}, so that widths by J'' cannot serve them",
                remedy="use a list with columns for the broadener, or a default width",
            )
        )
    lower = _read_column(text, whole, span)
    if molecule not in LINEAR:
        upper = _read_column(text, whole, (span[0] - _UPPER_BEFORE_LOWER, span[1] - _UPPER_BEFORE_LOWER))
        if molecule == METHANE:
            # CH3D (codes 3 and 4) is a symmetric top among spherical ones.
            code = text.buffer[np.where(whole, text.starts + _CODE, 0)]
            deuterated = whole & ((code == ord("3")) | (code == ord("4")))
            lower = np.where(deuterated, _read_column(text, whole, (112, 115)), lower)
            upper = np.where(deuterated, _read_column(text, whole, (97, 100)), upper)
        return lower, np.where(np.isnan(upper), lower, upper)
    change = np.zeros(len(text))
    letter = text.buffer[np.where(whole, text.starts + _BRANCH, 0)]
    for byte, step in _CHANGE.items():
        change[letter == byte] = step
    return lower, np.maximum(lower + change, 0.0)


def _read_column(text: TextChunk, whole: NDArray[np.bool_], span: tuple[int, int]) -> FloatArray:
    values, status = np.empty(len(text)), np.empty(len(text), dtype=np.uint8)
    read_fixed_column(text.buffer, np.where(whole, text.starts, -1), *span, values, status)
    values[(status != READ) | (values < 0.0)] = np.nan
    return values


def fill_widths(
    path: Path,
    numbers: dict[str, FloatArray],
    tables: Mapping[str, BroadeningTable],
    text: TextChunk,
    whole: NDArray[np.bool_],
    good: NDArray[np.bool_],
) -> tuple[tuple[str, ...], Counter[str]]:
    """Put widths (cm-1/atm) and exponents by J'' where the records give none; the broadeners concerned, and notes.

    `numbers` are the columns of the records and are added to; `good` marks the records that count.
    """
    rows = np.flatnonzero(good)
    if not rows.size:
        return (), Counter()
    notes: Counter[str] = Counter()
    lower, upper = read_j(path, text, whole, int(numbers["molecule"][rows[0]]))
    known = good & np.isfinite(lower)
    for name, table in tables.items():
        key = name.lower()
        gamma = numbers.get(f"gamma_{key}", np.full(good.size, np.nan)).copy()
        exponent = numbers.get(f"exponent_{key}", np.full(good.size, np.nan)).copy()
        numbers.setdefault(f"shift_{key}", np.full(good.size, np.nan))
        need = np.flatnonzero(known & ~(gamma > 0.0))
        # The file's widths are per bar; records' are per atm.
        match = match_rows(table, lower[need], upper[need])
        found, power = widths_of(table, match)
        gamma[need], exponent[need] = found * STANDARD_ATMOSPHERE, power
        notes.update(served_notes(name, table.path, np.bincount(match.kind, minlength=KINDS)))
        numbers[f"gamma_{key}"], numbers[f"exponent_{key}"] = gamma, exponent
    return tuple(name.lower() for name in tables), notes
