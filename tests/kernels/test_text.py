"""Numbers out of bytes against Python's own float, line bounds, radix order and classes against numpy."""

from __future__ import annotations

import math

import numpy as np
import pytest

from opacity.kernels.classes import classify
from opacity.kernels.sort import order_of
from opacity.kernels.text import BLANK, READ, UNREADABLE, count_newlines, find_lines, read_number


def number(text: str) -> tuple[float, int]:
    data = np.frombuffer(text.encode("ascii"), dtype=np.uint8)
    return read_number(data, 0, data.size)


@pytest.mark.parametrize("form", ["%.3E", "%.10E", "%.14E", "%.6f", "%.12g", "%g"])
def test_numbers_of_up_to_15_digits_are_those_of_float(form: str) -> None:
    rng = np.random.default_rng(4)
    for mantissa, power in zip(rng.uniform(-10, 10, 3000), rng.integers(-60, 60, 3000), strict=True):
        text = form % (mantissa if "f" in form else mantissa * 10.0 ** float(power))
        value, status = number(text)
        assert status == READ
        assert value == float(text), text


def test_more_digits_and_the_ends_of_the_range() -> None:
    rng = np.random.default_rng(5)
    for value in np.concatenate([rng.uniform(0, 1, 2000), 10.0 ** rng.uniform(-300, 300, 2000)]):
        found, status = number(repr(float(value)))
        assert status == READ
        assert abs(found - value) <= math.ulp(value)
    for text in ("1.7976931348623157e308", "5e-324", "1e-320", "0", "0e5", "-0.0", "000012.5"):
        assert number(text)[0] == float(text)
    assert number("1e-400")[0] == 0.0
    assert number("9E999")[0] == math.inf


@pytest.mark.nojit
@pytest.mark.parametrize(
    ("text", "status"),
    [
        ("12.5", READ), (" 12.5 ", READ), ("+1.", READ), ("-.5", READ), ("1.234-101", READ), ("1E+03", READ),
        ("", BLANK), ("   ", BLANK), ("####", BLANK),
        (".", UNREADABLE), ("-", UNREADABLE), ("1E", UNREADABLE), ("1.2-10", UNREADABLE), ("nan", UNREADABLE),
        ("inf", UNREADABLE), ("1_0", UNREADABLE), ("0x1", UNREADABLE), ("1 2", UNREADABLE), ("1D3", UNREADABLE),
        ("#1", UNREADABLE), ("1\t", UNREADABLE), ("--1", UNREADABLE),
    ],
)  # fmt: skip
def test_what_is_a_number(text: str, status: int) -> None:
    value, found = number(text)
    assert found == status
    assert math.isnan(value) == (status != READ)


@pytest.mark.nojit
def test_lines_are_found_whatever_their_ends() -> None:
    text = np.frombuffer(b"one\r\n\n  \t\ntwo\nth\x01ree\nlast \xe9", dtype=np.uint8)
    room = count_newlines(text) + 1
    starts, stops, line = (np.empty(room, dtype=np.int64) for _ in range(3))
    plain = np.empty(room, dtype=np.bool_)
    count = find_lines(text, 11, starts, stops, line, plain)
    found = [text[a:b].tobytes() for a, b in zip(starts[:count], stops[:count], strict=True)]
    assert found == [b"one", b"two", b"th\x01ree", b"last \xe9"]
    assert line[:count].tolist() == [11, 14, 15, 16]
    assert plain[:count].tolist() == [True, True, False, False]


@pytest.mark.parametrize("n", [0, 1, 2, 1000, 50_000])
def test_radix_order_is_the_stable_order(n: int) -> None:
    values = np.round(np.random.default_rng(n).uniform(0.0, 30.0, n), 2)
    assert np.array_equal(order_of(values), np.argsort(values, kind="stable"))


def test_equal_rows_are_one_class() -> None:
    rows = np.random.default_rng(3).integers(0, 5, (5000, 3)).astype(np.uint64)
    first, index = np.empty(5000, dtype=np.int64), np.empty(5000, dtype=np.uint32)
    count = classify(rows, np.full(16384, -1, dtype=np.int64), first, index)
    assert count == len(np.unique(rows, axis=0))
    assert np.array_equal(rows[first[:count]][index], rows)
    assert np.all(np.diff(first[:count]) > 0)
