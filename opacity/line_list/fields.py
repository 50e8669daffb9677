"""Numbers from columns of fixed width, many records at once, with what is wrong told apart record by record."""

from __future__ import annotations

import re

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray

_NUMBER = re.compile(rb"[+-]?(\d+\.?\d*|\.\d+)([eE]?[+-]?\d+)?")
# Fortran drops the E where the exponent has three digits: 1.234-101.
_FORTRAN = re.compile(rb"(.*[\d.])([+-]\d{3})")


def to_number(field: bytes) -> float:
    """One field as a float; NaN for a blank one.  Raises ValueError for anything that is not a decimal number."""
    text = field.strip(b" ")
    if not text:
        return float("nan")
    if not _NUMBER.fullmatch(text):
        raise ValueError(text)
    fortran = _FORTRAN.fullmatch(text)
    if fortran and b"e" not in text.lower():
        text = fortran[1] + b"E" + fortran[2]
    return float(text)


def parse_column(block: NDArray[np.uint8], start: int, stop: int) -> tuple[FloatArray, NDArray[np.bool_]]:
    """A numeric column of records (n, width) from byte `start` to `stop`.

    Returns the values (n,), NaN where not given or unreadable, and a mask (n,) of the unreadable fields.
    """
    return parse_fields(np.ascontiguousarray(block[:, start:stop]).view(f"S{stop - start}")[:, 0])


def parse_fields(fields: NDArray[np.bytes_]) -> tuple[FloatArray, NDArray[np.bool_]]:
    """Fields of bytes (n,) as numbers (n,), NaN where not given or unreadable, with a mask (n,) of the unreadable.

    A value is not given where the field is blank or holds nothing but the mark "#" (hitran-api writes it).
    """
    unreadable = np.zeros(fields.size, dtype=bool)
    stripped = np.strings.strip(fields, b" ")
    filled = np.strings.count(stripped, b"#") < np.strings.str_len(stripped)
    values = np.full(fields.size, np.nan)
    try:
        candidates = stripped[filled].astype(np.float64)
    except ValueError:
        candidates = None
    # numpy also reads "nan", "inf" and "1_0": only finite results of plain digits go unchecked.
    if candidates is not None and np.all(np.isfinite(candidates)) and not _has_letters(stripped[filled]):
        values[filled] = candidates
        return values, unreadable
    for i in np.flatnonzero(filled):
        try:
            values[i] = to_number(bytes(stripped[i]))
        except ValueError:
            unreadable[i] = True
    return values, unreadable


def _has_letters(fields: NDArray[np.bytes_]) -> bool:
    raw = np.ascontiguousarray(fields).view(np.uint8)
    allowed = np.zeros(256, dtype=bool)
    allowed[np.frombuffer(b"\0 +-.0123456789eE", dtype=np.uint8)] = True
    return not bool(np.all(allowed[raw]))
