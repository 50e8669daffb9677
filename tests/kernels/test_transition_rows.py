"""Rows of transitions: the quick reader, the general one and a slow one of Python's own agree on any bytes."""

from __future__ import annotations

import math
import re

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from opacity.kernels.text import BLANK, READ, UNREADABLE, count_newlines, find_lines
from opacity.kernels.transition_rows import read_any_row, read_plain_row, read_transition_rows
from opacity.kernels.transitions import find_rows

_NUMBER = re.compile(rb"[+-]?(\d+\.?\d*|\.\d+)([Ee][+-]?\d+|[+-]\d{3})?")
TABLE = b"       19634          728 2.4609E-08\n       65902        59805 6.0925E-06     1234.567890\n"


def bytes_of(text: bytes) -> np.ndarray:
    return np.frombuffer(text, dtype=np.uint8)


def read(text: bytes, first: int = 1) -> list[tuple[int, int, float, float, int, int]]:
    """Ids, values, line numbers and statuses by the kernel."""
    buffer = bytes_of(text)
    room = count_newlines(buffer) + 1
    ids = (np.empty(room, dtype=np.int64), np.empty(room, dtype=np.int64))
    values = (np.empty(room), np.empty(room))
    number, status = np.empty(room, dtype=np.uint32), np.empty(room, dtype=np.uint8)
    count = read_transition_rows(buffer, first, ids, values, number, status)
    return list(zip(*(one[:count].tolist() for one in (*ids, *values, number, status)), strict=True))


def number_of(word: bytes) -> float:
    """As `float` has it, and Fortran's exponents of three digits without a letter."""
    return float(re.sub(rb"(?<=[\d.])([+-]\d{3})$", rb"E\1", word))


def slowly(text: bytes, first: int = 1) -> list[tuple[list[int], list[float], int, int]]:
    """The same by Python's own means."""
    rows = []
    for line, row in enumerate(text.split(b"\n"), first):
        words = [word for word in re.split(rb"[ \t]+", row.removesuffix(b"\r")) if word]
        if not words:
            continue
        good = len(words) in (3, 4) and all(re.fullmatch(rb"\d{1,18}", word) for word in words[:2])
        good = good and all(_NUMBER.fullmatch(word) for word in words[2:])
        values = [number_of(word) for word in words[2:]] if good else []
        rows.append(([int(word) for word in words[:2]] if good else [], values, line, READ if good else UNREADABLE))
    return rows


def agree(text: bytes, first: int = 1) -> int:
    """How many rows were read; the test fails where the kernel and the slow way differ."""
    found, expected = read(text, first), slowly(text, first)
    assert [row[4:] for row in found] == [row[2:] for row in expected]
    for (upper, lower, a, second, _, status), (ids, values, _, _) in zip(found, expected, strict=True):
        if status != READ:
            continue
        assert [upper, lower] == ids
        assert math.isnan(second) == (len(values) == 1)
        for value, true in zip((a, second), values, strict=False):
            # Numbers of more than 15 digits come within one unit in the last place.
            assert value == true or abs(value - true) <= math.ulp(true)
    return sum(row[5] == READ for row in found)


def same_by_both_readers(text: bytes) -> int:
    """How many lines the quick reader takes; it must give what the general one gives, to the bit."""
    buffer, start, quick = bytes_of(text), 0, 0
    while start < len(text):
        *values, after, status = read_any_row(buffer, start)
        if b"\n" in text[start:]:
            *plain, behind = read_plain_row(buffer, start)
            if behind:
                quick += 1
                assert (behind, status) == (after, READ)
                assert np.array(values, dtype=np.float64).tobytes() == np.array(plain, dtype=np.float64).tobytes()
                assert values[:2] == plain[:2]
        start = after
    return quick


@pytest.mark.nojit
@pytest.mark.parametrize(
    ("row", "status", "quick"),
    [
        (b" 12 7 1.5E-3", READ, True), (b"12 7 1.5E-3\r", READ, True), (b"1 2 3 4", READ, True),
        (b"1 2 3. 4.25   ", READ, True), (b"1 2 3.5   \r", READ, True), (b"1 2 .5e+007", READ, True),
        (b"000000000000000012 2 1.0000000000000000", READ, True), (b"1 2 0.0E+00", READ, True),
        (b"1 2 1.5E-400", READ, True), (b"1 2 9E+999", READ, True),
        (b"1\t2 3", READ, False), (b"1 2 3\t", READ, False), (b"\t1 2 3", READ, False), (b"1 2 +3 -4", READ, False),
        (b"1 2 1E3", READ, False), (b"1 2 1.5-101", READ, False), (b"1 2 1.00000000000000001", READ, False),
        (b"1 2 1E+0000", READ, False),
        (b"", BLANK, False), (b" \t ", BLANK, False), (b"\r", BLANK, False),
        (b"1", UNREADABLE, False), (b"1 2", UNREADABLE, False), (b"1 2 3 4 5", UNREADABLE, False),
        (b"1 2 3 4 " + b"5 " * 300, UNREADABLE, False), (b"1 x 3", UNREADABLE, False), (b"1.0 2 3", UNREADABLE, False),
        (b"1234567890123456789 1 2", UNREADABLE, False), (b"-1 2 3", UNREADABLE, False),
        (b"1 2 .", UNREADABLE, False), (b"1 2 1D3", UNREADABLE, False), (b"1 2 1E", UNREADABLE, False),
        (b"1 2 1E+", UNREADABLE, False), (b"1 2 ###", UNREADABLE, False), (b"1 2 nan", UNREADABLE, False),
        (b"1 2 3\r\r", UNREADABLE, False), (b"1 2 3\r4", UNREADABLE, False), (b"1 2 3 \x00", UNREADABLE, False),
        (b"1 2 3\xa0", UNREADABLE, False), (b"1 2 1.5E-03x", UNREADABLE, False), (b"1 2 1.5.3", UNREADABLE, False),
    ],
)  # fmt: skip
def test_what_is_a_row(row: bytes, status: int, quick: bool) -> None:
    text = row + b"\n"
    *_, after, found = read_any_row(bytes_of(text), 0)
    assert (after, found) == (len(text), status)
    assert same_by_both_readers(text) == quick
    for whole in (row, text, TABLE + text + TABLE, TABLE + row, row.removesuffix(b"\r") + b"\r\n" + TABLE):
        assert agree(whole, 7) == whole.count(TABLE) * 2 + (status == READ)


@pytest.mark.nojit
def test_ids_values_and_line_numbers() -> None:
    rows = read(b"\n" + TABLE + b" \r\n1 x\n", 2**32 - 2)
    assert rows[0][:3] == (19634, 728, 2.4609e-8)
    assert math.isnan(rows[0][3])
    assert rows[1] == (65902, 59805, 6.0925e-6, 1234.56789, 0, READ)
    assert rows[2][4:] == (2, UNREADABLE)
    assert read(b"") == []


@pytest.mark.nojit
def test_rows_of_ids_listed_or_as_they_come() -> None:
    ids = np.array([4, 5, 6, 7, 8, -1, 2**62, -(2**62)], dtype=np.int64)
    rows = np.empty(ids.size, dtype=np.int64)
    find_rows(ids, 5, 3, np.empty(0, dtype=np.int32), rows)
    assert rows.tolist() == [-1, 0, 1, 2, -1, -1, -1, -1]
    find_rows(ids, 5, 3, np.array([1, -1, 0], dtype=np.int32), rows)
    assert rows.tolist() == [-1, 1, -1, 0, -1, -1, -1, -1]


def test_random_rows_of_many_forms_are_read_alike() -> None:
    rng = np.random.default_rng(8)
    forms = ["{:.4E}", "{:.10E}", "{:.16E}", "{:.3e}", "{:.6f}", "{:.1f}", "{:g}", "{:.0f}", "{!r}"]
    ends, gaps = ["\n", "\r\n", " \n", "\n\n"], [" ", "  ", "\t", "       "]
    text = ""
    for _ in range(20_000):
        words = [str(rng.integers(10 ** rng.integers(1, 19))) for _ in range(2)]
        words += [rng.choice(forms).format(float(10.0 ** rng.uniform(-30, 14))) for _ in range(rng.integers(1, 3))]
        text += rng.choice(["", " ", "    "]) + rng.choice(gaps).join(words) + rng.choice(ends)
    assert agree(text.encode()) == 20_000
    assert same_by_both_readers(text.encode()) > 5_000


def test_rows_in_columns_are_read_quickly() -> None:
    assert same_by_both_readers(TABLE * 100) == 200
    assert same_by_both_readers(TABLE.replace(b"\n", b"\r\n") * 100) == 200


BYTES = st.sampled_from([bytes([one]) for one in b"\n\r \t0159.Ee+-Dd#x\x00\xff"])


@settings(max_examples=500, deadline=None)
@given(st.lists(st.tuples(st.integers(0, 3 * len(TABLE)), st.integers(0, 3), BYTES), max_size=12))
def test_mutated_rows_are_read_alike(edits: list[tuple[int, int, bytes]]) -> None:
    text = TABLE * 3
    for place, removed, added in edits:
        text = text[:place] + added + text[place + removed :]
    agree(text)
    same_by_both_readers(text)
    buffer = bytes_of(text)
    room = count_newlines(buffer) + 1
    starts, stops, line = (np.empty(room, dtype=np.int64) for _ in range(3))
    count = find_lines(buffer, 1, starts, stops, line, np.empty(room, dtype=np.bool_))
    # Faults are shown by the lines that this finds.
    assert line[:count].tolist() == [row[4] for row in read(text)]


@settings(max_examples=300, deadline=None)
@given(st.lists(BYTES, max_size=60).map(b"".join))
def test_any_bytes_are_read_alike(text: bytes) -> None:
    agree(text)
    same_by_both_readers(text)
