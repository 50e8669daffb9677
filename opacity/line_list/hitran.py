"""160-character records of HITRAN format (layout: Rothman et al. 2005, JQSRT 96, 139, table 1)."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.line_list.fields import parse_column
from opacity.line_list.records import ParsedColumns
from opacity.line_list.text import read_text, split_records

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


def parse_hitran(path: Path) -> ParsedColumns:
    """The columns of a file of 160-character records, plain, .gz or .bz2; blanks after the record do no harm."""
    records, numbers = split_records(read_text(path))
    whole = np.array([_has_length(record) for record in records], dtype=bool)
    return parse_fixed(path, records, numbers, whole, f"{RECORD_LENGTH} characters", LAYOUT, RECORD_LENGTH)


def _has_length(record: bytes) -> bool:
    return len(record) >= RECORD_LENGTH and not record[RECORD_LENGTH:].strip(b" \t")


def parse_fixed(
    path: Path,
    records: list[bytes],
    line_numbers: list[int],
    whole: NDArray[np.bool_],
    expected: str,
    layout: dict[str, tuple[int, int]],
    width: int,
    code_byte: int = CODE_BYTE,
) -> ParsedColumns:
    """Columns of fixed width from records; a record that is not `whole` gets blanks instead of its numbers."""
    blank = b" " * width
    text = b"".join(record[:width] if ok else blank for record, ok in zip(records, whole, strict=True))
    block = np.frombuffer(text, dtype=np.uint8).reshape(len(records), width)
    numbers, unreadable = {}, {}
    for name, (start, stop) in layout.items():
        numbers[name], unreadable[name] = parse_column(block, start, stop)
    for name in ("exponent_self", "shift_self"):
        numbers.setdefault(name, np.full(len(records), np.nan))
    code = np.ascontiguousarray(block[:, code_byte : code_byte + 1]).view("S1")[:, 0]
    return ParsedColumns(
        path=path,
        line=np.array(line_numbers, dtype=np.int64),
        raw=records,
        numbers=numbers,
        unreadable=unreadable,
        code=code,
        whole=whole,
        length_expected=expected,
        broadeners=("air", "self"),
    )
