"""Half-widths by quantum number: the .broad files of ExoMol format, which serve lists of any format.

Rows are `code gamma n J'' ...`, gamma the HWHM in cm-1/bar at 296 K (the words of the .def file), n the exponent of
(296 K / T).  Codes used: a0 (J''), a1 (J'' and J'), m0 (|m|).  Further codes, with vibrational or other
quantum numbers, are known to exist (Tennyson et al. 2016, 2020, 2024; from memory): their rows are counted, not used.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray

from opacity.errors import LineListError, excerpt, problem
from opacity.grids import FloatArray
from opacity.line_list.exomol.definition import MAX_EXPONENT, MAX_WIDTH
from opacity.line_list.exomol.definition_values import to_number
from opacity.line_list.exomol.states import HIGHEST_J
from opacity.line_list.text import read_chunks

Index = NDArray[np.int64]

CODES = ("a1", "a0", "m0")
"""Codes of rows that are used; the earlier one goes first where several have a row for a line."""

KINDS = 4
NONE, EXACT, NEIGHBOUR, BEYOND = range(KINDS)
"""Why a line has the row it has: no row; its own; the next lower one (or the first); the last one."""

_QUANTUM_NUMBERS = {"a1": 2, "a0": 1, "m0": 1}
_CODE = re.compile(r"[A-Za-z]{1,2}[0-9]{1,2}")
_EXPECTED = "code, half-width, exponent, quantum numbers"
_BRANCH = 1 << 32
"""Keys are (2 (J' - J'')) * 2^32 + 2 J'' for a1, 2 J'' for a0, 2 |m| for m0."""


@dataclass(frozen=True)
class BroadeningTable:
    """The usable rows of a .broad file, sorted by code and quantum numbers; every array is (n_rows,).

    `code` index into CODES; `key` the quantum numbers as one number; `gamma` HWHM, cm-1/bar at 296 K; `exponent` of
    temperature; `line` in the file.  `skipped` counts rows of other codes by code; `notes` what was assumed.
    """

    path: str
    code: NDArray[np.int8]
    key: Index
    gamma: FloatArray
    exponent: FloatArray
    line: Index
    skipped: Counter[str] = field(default_factory=Counter)
    notes: Counter[str] = field(default_factory=Counter)

    def __len__(self) -> int:
        return int(self.gamma.size)


@dataclass(frozen=True)
class RowMatch:
    """For each line (k,): `row` of the table, -1 for none, and `kind`, one of NONE, EXACT, NEIGHBOUR, BEYOND."""

    row: Index
    kind: NDArray[np.uint8]


def widths(table: BroadeningTable, j_lower: ArrayLike, j_upper: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Half-width (cm-1/bar at 296 K) and exponent of lines with J'' and J', (k,) each; NaN where no row serves."""
    return widths_of(table, match_rows(table, j_lower, j_upper))


def widths_of(table: BroadeningTable, match: RowMatch) -> tuple[FloatArray, FloatArray]:
    """As `widths`, of rows that have been matched."""
    row, there = match.row, match.row >= 0
    return np.where(there, table.gamma[row], np.nan), np.where(there, table.exponent[row], np.nan)


def served_notes(name: str, path: str, counts: NDArray[np.int64]) -> Counter[str]:
    """What a ledger says of lines whose width by a broadener comes from a file; `counts` (KINDS,) of lines by kind."""
    text = f"{name} width by J'' from {excerpt(Path(path).name)}"
    notes = {
        text: counts[EXACT] + counts[NEIGHBOUR] + counts[BEYOND],
        f"{text}, beyond its last J'': last row taken": counts[BEYOND],
        f"{text}, between its rows: a neighbour taken": counts[NEIGHBOUR],
    }
    return Counter({note: int(count) for note, count in notes.items() if count})


def match_rows(table: BroadeningTable, j_lower: ArrayLike, j_upper: ArrayLike) -> RowMatch:
    """The row that serves each line, from J'' (k,) and J' (k,).

    A row made for exactly the line's quantum numbers goes first, in the order a1, a0, m0.  Then, in the order a0, m0,
    a1, a neighbour: the last row where the line lies beyond it, else the next lower row, else the first one.
    For m0, |m| = J'' + 1 where J' = J'' + 1 and J'' where J' = J'' or J'' - 1; other lines have no m.
    """
    lower, upper = np.broadcast_arrays(_doubled(j_lower), _doubled(j_upper))
    step = upper - lower
    if lower.size == 0:
        return _match(table, lower, step)
    # Many lines share few quantum numbers: each pair is looked for once.
    first_j, first_step = int(lower.min()), int(step.min())
    n_j, n_step = int(lower.max()) - first_j + 1, int(step.max()) - first_step + 1
    if n_j * n_step >= lower.size:
        return _match(table, lower, step)
    pairs = np.indices((n_j, n_step)).reshape(2, -1)
    served = _match(table, pairs[0] + first_j, pairs[1] + first_step)
    which = (lower - first_j) * n_step + (step - first_step)
    return RowMatch(served.row[which], served.kind[which])


def _match(table: BroadeningTable, lower: Index, step: Index) -> RowMatch:
    """As `match_rows`, from 2 J'' (-1 for none) and 2 (J' - J'')."""
    row = np.full(lower.shape, -1, dtype=np.int64)
    kind = np.full(lower.shape, NONE, dtype=np.uint8)
    found = [_find(table, number, *_wanted(code, lower, step)) for number, code in enumerate(CODES)]
    # A neighbour in a0, made for J'' alone, is nearer the line than one in a1, which may stand for one branch far away.
    a1, a0, m0 = found
    for exact, order in ((True, (a1, a0, m0)), (False, (a0, m0, a1))):
        for candidate in order:
            take = (row < 0) & (candidate.row >= 0) & ((candidate.kind == EXACT) == exact)
            row[take], kind[take] = candidate.row[take], candidate.kind[take]
    return RowMatch(row, kind)


def _doubled(j: ArrayLike) -> Index:
    """2J as whole numbers, -1 for what is no quantum number."""
    numbers = np.atleast_1d(np.asarray(j, dtype=np.float64))
    good = (numbers >= 0.0) & (numbers <= HIGHEST_J) & np.isfinite(numbers)
    double = 2.0 * np.where(good, numbers, -0.5)
    return np.where(np.floor(double) == double, double, -1.0).astype(np.int64)


def _wanted(code: str, lower: Index, step: Index) -> tuple[Index, Index]:
    """Branch and value asked for; the value is -1 where there is none."""
    good = (lower >= 0) & (lower + step >= 0)
    if code == "a1":
        return np.where(good, step, 0), np.where(good, lower, -1)
    branch = np.zeros_like(lower)
    if code == "a0":
        return branch, lower
    magnitude = np.where(step == 2, lower + 2, lower)
    return branch, np.where(good & ((step == 2) | (step == 0) | (step == -2)), magnitude, -1)


def _find(table: BroadeningTable, code: int, branch: Index, value: Index) -> RowMatch:
    first, stop = np.searchsorted(table.code, [code, code + 1])
    keys = table.key[first:stop]
    if keys.size == 0:
        return RowMatch(np.full(value.shape, -1, dtype=np.int64), np.full(value.shape, NONE, dtype=np.uint8))
    wanted = branch * _BRANCH + value
    # Rows of one branch stand together: from `start` to before `end`.
    start, end = np.searchsorted(keys, branch * _BRANCH), np.searchsorted(keys, branch * _BRANCH + _BRANCH // 2)
    place = np.maximum(np.searchsorted(keys, wanted, side="right") - 1, start)
    served = (start < end) & (value >= 0)
    place = np.where(served, np.minimum(place, keys.size - 1), 0)
    kind = np.where(keys[place] == wanted, EXACT, NEIGHBOUR)
    kind = np.where((kind == NEIGHBOUR) & (place == end - 1) & (keys[place] < wanted), BEYOND, kind)
    return RowMatch(np.where(served, first + place, -1), np.where(served, kind, NONE).astype(np.uint8))


def read_broadening(path: Path) -> BroadeningTable:
    """The rows of a .broad file, plain, .gz or .bz2.

    Columns behind those that a code needs are passed over and counted; so are rows of other codes, and rows with
    half-width 0, which stands for not given.  Raises LineListError naming file and line of a row that can't be right or
    that repeats another, and if no row is left.
    """
    rows: dict[tuple[int, int], tuple[float, float, int]] = {}
    skipped: Counter[str] = Counter()
    notes: Counter[str] = Counter()
    for number, record, plain in _records(path):
        words = record.split()
        where = f"{path}:{number}"
        if not plain:
            raise _fault(where, "row with bytes that are no text", "printable ASCII characters", record)
        if not _CODE.fullmatch(words[0]):
            raise _fault(where, "not a row of widths", _EXPECTED, record)
        code = words[0].lower()
        if code not in CODES:
            skipped[code] += 1
            continue
        key, gamma, exponent = _row(where, code, words, record)
        if len(words) > 3 + _QUANTUM_NUMBERS[code]:
            notes["columns behind the quantum numbers: not used"] += 1
        if gamma == 0.0:
            notes["half-width 0: taken as not given"] += 1
            continue
        known = rows.setdefault((CODES.index(code), key), (gamma, exponent, number))
        if known[2] != number:
            raise _fault(where, f"quantum numbers given twice, in line {known[2]} too", "each once", record)
    if not rows:
        other = ", ".join(f"{count} of code {code}" for code, count in sorted(skipped.items()))
        raise LineListError(
            problem(path, "no usable row of widths", expected=f"rows of code {', '.join(CODES)}", found=other or "none")
        )
    return _table(path, rows, skipped, notes)


def _table(
    path: Path, rows: dict[tuple[int, int], tuple[float, float, int]], skipped: Counter[str], notes: Counter[str]
) -> BroadeningTable:
    order = sorted(rows)
    code = np.array([one[0] for one in order], dtype=np.int8)
    key = np.array([one[1] for one in order], dtype=np.int64)
    # Half of 2^32 lies above all values and below the next branch.
    same = (np.diff(code) == 0) & ((key[1:] + _BRANCH // 2) // _BRANCH == (key[:-1] + _BRANCH // 2) // _BRANCH)
    gaps = int(np.sum(np.where(same, np.maximum(np.diff(key) // 2 - 1, 0), 0)))
    if gaps:
        notes["quantum numbers without a row, between two that have one: the lower row serves"] = gaps
    gamma, exponent, line = (np.array([rows[one][i] for one in order]) for i in range(3))
    return BroadeningTable(str(path), code, key, gamma, exponent, line.astype(np.int64), skipped, notes)


def _row(where: str, code: str, words: list[str], record: str) -> tuple[int, float, float]:
    """Key, half-width and exponent of a row."""
    quanta = _QUANTUM_NUMBERS[code]
    if len(words) < 3 + quanta:
        names = "J, J of the upper state" if quanta == 2 else "|m|" if code == "m0" else "J"
        raise _fault(where, "row with too few columns", f"code {code}, half-width, exponent, {names}", record)
    if any(_CODE.fullmatch(word) for word in words[1:]):
        raise _fault(where, "two rows in one line", "one", record)
    gamma, exponent, *numbers = (to_number(word) for word in words[1 : 3 + quanta])
    if np.isnan([gamma, exponent, *numbers]).any():
        raise _fault(where, "row with a column that is not a number", _EXPECTED, record)
    if not 0.0 <= gamma <= MAX_WIDTH:
        raise _fault(where, "half-width is impossible", f"0 to {MAX_WIDTH:g} cm-1/bar", record)
    if not -MAX_EXPONENT <= exponent <= MAX_EXPONENT:
        raise _fault(where, "exponent is impossible", f"-{MAX_EXPONENT:g} to {MAX_EXPONENT:g}", record)
    doubles = _doubled(numbers).tolist()
    if min(doubles) < 0 or (doubles[0] - doubles[-1]) % 2:
        raise _fault(where, "quantum number is impossible", "whole or half numbers, both of a kind", record)
    return (doubles[-1] - doubles[0]) * _BRANCH + doubles[0], gamma, exponent


def _records(path: Path) -> Iterator[tuple[int, str, bool]]:
    """Line number, text and whether it is plain text, for each line that is not blank."""
    for chunk in read_chunks(path):
        for i in range(len(chunk)):
            yield int(chunk.line[i]), chunk.record(i).decode("latin-1"), bool(chunk.plain[i])


def _fault(where: str, reason: str, expected: str, record: str) -> LineListError:
    return LineListError(problem(where, reason, expected=expected, found=f'"{excerpt(record)}"'))
