"""A local table of hapi: `<name>.data`, plain, .gz or .bz2, with `<name>.header` beside it.

The layout is hapi's own (hitran-api 1.3).

Records of fixed width, then extra columns behind a separator; the header, in JSON, names and places them all.
Extra columns gamma_x, n_x and delta_x are half-width (cm-1/atm), exponent and shift (cm-1/atm) for broadener x.
"""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import LineListError, one_line, problem
from opacity.grids import FloatArray
from opacity.kernels.text import BLANK, UNREADABLE, read_fields, split_fields
from opacity.line_list.hitran import parse_fixed
from opacity.line_list.records import ParsedColumns
from opacity.line_list.text import TextChunk, read_text
from opacity.recipe.formats import plain_name

_NAMES = {
    "molec_id": "molecule",
    "nu": "wavenumber",
    "sw": "strength",
    "a": "einstein_a",
    "elower": "lower_energy",
    "gp": "upper_weight",
    "gpp": "lower_weight",
}
_NEEDED = ("molec_id", "local_iso_id", "nu", "sw", "elower")
_KINDS = {"gamma": "gamma", "n": "exponent", "delta": "shift"}
_COLUMN = re.compile(r"(gamma|n|delta)_([a-z][a-z0-9]*)")
_WIDTH = re.compile(r"%(\d+)")
_LONGEST = 10_000
"""No fixed part of a record is longer than this, in characters (160 is the rule)."""


@dataclass(frozen=True)
class _Header:
    layout: dict[str, tuple[int, int]]
    code_byte: int
    width: int
    extra: tuple[str, ...]
    separator: bytes
    codes_column: int | None


def is_hapi(path: Path) -> bool:
    """Whether a file's name is that of a hapi table: it ends in .data, plain, .gz or .bz2."""
    return _plain(path).suffix.lower() == ".data"


def header_of(path: Path) -> Path:
    """The header beside a hapi table, whose name has neither .data nor the ending of a compression."""
    return path.parent / f"{_plain(path).stem}.header"


def _plain(path: Path) -> Path:
    return path.with_name(plain_name(path.name)) if path.name else path


def hapi_parser(path: Path) -> Callable[[TextChunk], ParsedColumns]:
    """What makes columns of some records of a hapi table.  Raises LineListError for a missing or unusable header."""
    return partial(_parse, path, _read_header(path))


def broadeners_of(path: Path) -> frozenset[str]:
    """The broadeners, in lower case, for which a hapi table has half-widths.  Raises LineListError as `hapi_parser`."""
    header = _read_header(path)
    matches = (_COLUMN.fullmatch(name) for name in (*header.layout, *(extra.lower() for extra in header.extra)))
    return frozenset(match[2] for match in matches if match and match[1] == "gamma")


def hapi_codes_column(path: Path) -> int | None:
    """Where a hapi table's six codes of uncertainty (its column `ierr`) start in the record, None where it has none.

    Raises LineListError as `hapi_parser`.
    """
    return _read_header(path).codes_column


def _parse(path: Path, header: _Header, chunk: TextChunk) -> ParsedColumns:
    # Behind the fixed part stands a separator, so that the first field is empty where there are extra columns.
    count = len(header.extra) + 1
    long_enough = chunk.stops - chunk.starts >= header.width
    starts = np.empty((len(chunk), count), dtype=np.int64)
    stops = np.zeros((len(chunk), count), dtype=np.int64)
    behind = np.where(long_enough, chunk.starts + header.width, -1)
    separator = np.frombuffer(header.separator, dtype=np.uint8)
    split_fields(chunk.buffer, behind, np.where(long_enough, chunk.stops, -1), separator, starts, stops)
    _, first_field = _read(chunk, starts[:, 0], stops[:, 0])
    whole = long_enough & (starts[:, 0] >= 0) & (first_field == BLANK)
    expected = f"{header.width} characters and {count - 1} extra columns"
    columns = parse_fixed(path, chunk, whole, expected, header.layout, header.code_byte)
    for position, name in enumerate(header.extra, start=1):
        known = _internal_name(name)
        if known is not None:
            field_starts = np.where(whole, starts[:, position], -1)
            values, status = _read(chunk, field_starts, stops[:, position])
            columns.numbers[known] = values
            columns.unreadable[known] = status == UNREADABLE
    _complete_broadeners(columns)
    return columns


def _read(
    chunk: TextChunk, starts: NDArray[np.int64], stops: NDArray[np.int64]
) -> tuple[FloatArray, NDArray[np.uint8]]:
    values, status = np.empty(len(chunk)), np.empty(len(chunk), dtype=np.uint8)
    read_fields(chunk.buffer, np.ascontiguousarray(starts), np.ascontiguousarray(stops), values, status)
    return values, status


def _internal_name(name: str) -> str | None:
    match = _COLUMN.fullmatch(name.lower())
    return f"{_KINDS[match[1]]}_{match[2]}" if match else _NAMES.get(name.lower())


def _complete_broadeners(columns: ParsedColumns) -> None:
    broadeners = sorted({name.split("_", 1)[1] for name in columns.numbers if name.startswith("gamma_")})
    nothing: FloatArray = np.full(len(columns.text), np.nan)
    for name in broadeners:
        for kind in ("exponent", "shift"):
            columns.numbers.setdefault(f"{kind}_{name}", nothing)
    columns.broadeners = tuple(broadeners)


def _read_header(path: Path) -> _Header:
    header_path = header_of(path)
    if not header_path.is_file():
        raise LineListError(
            problem(path, "a hapi table needs its header beside it", expected=str(header_path), found="no such file")
        )
    try:
        header = json.loads(read_text(header_path))
        return _interpret(header)
    except (ValueError, KeyError, TypeError, AttributeError, OverflowError, RecursionError) as error:
        raise LineListError(
            problem(header_path, f"not a header of a hapi table ({type(error).__name__}: {one_line(error)})")
        ) from error


def _interpret(header: dict[str, Any]) -> _Header:
    positions, formats = header["position"], header["format"]
    missing = [name for name in _NEEDED if name not in positions]
    if missing:
        raise KeyError(f"no column {', '.join(missing)}")
    spans = {name: (int(start), int(start) + _width(formats[name])) for name, start in positions.items()}
    _check_spans(spans)
    separator = str(header.get("extra_separator", ",")).encode("ascii")
    if not separator:
        raise ValueError("empty extra_separator")
    extra = tuple(str(name) for name in header.get("extra", []))
    named = [known for name in (*spans, *extra) if (known := _internal_name(name)) is not None]
    twice = sorted({name for name in named if named.count(name) > 1})
    if twice:
        raise ValueError(f"column named twice: {', '.join(twice)}")
    layout = {known: span for name, span in spans.items() if (known := _internal_name(name)) is not None}
    width = max(stop for _, stop in spans.values())
    start, stop = spans.get("ierr", (0, 0))
    codes = start if stop - start == 6 else None
    return _Header(layout, spans["local_iso_id"][0], width, extra, separator, codes)


def _check_spans(spans: dict[str, tuple[int, int]]) -> None:
    """Columns (first byte, byte after the last) must lie inside a record and apart from each other."""
    previous = 0
    for name, (start, stop) in sorted(spans.items(), key=lambda item: item[1]):
        if start < previous:
            raise ValueError(f"column {name!r} starts inside another column or before the record")
        previous = stop
    if previous > _LONGEST:
        raise ValueError(f"columns end at character {previous}, more than {_LONGEST}")
    start, stop = spans["local_iso_id"]
    if stop - start != 1:
        raise ValueError(f"column 'local_iso_id' is {stop - start} characters wide, not 1")


def _width(text: str) -> int:
    match = _WIDTH.match(text)
    if match is None or not 1 <= int(match[1]) <= 1000:
        raise ValueError(f"impossible column format {text!r}")
    return int(match[1])
