"""Widths by quantum number: which row serves which line, and every row that can't be right."""

from __future__ import annotations

import bz2
import re

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.line_list.exomol.broadening import BEYOND, EXACT, NEIGHBOUR, NONE, match_rows, read_broadening, widths


def one(table, lower, upper):
    """Half-width, exponent and kind of the row that serves one line."""
    gamma, exponent = widths(table, [lower], [upper])
    return float(gamma[0]), float(exponent[0]), int(match_rows(table, [lower], [upper]).kind[0])


def test_precedence_of_codes(write, broad):
    table = read_broadening(write("a.broad", broad))
    assert one(table, 1, 2) == (0.0811, 0.111, EXACT)  # a1, though a0 and m0 have rows
    assert one(table, 2, 1) == (0.0822, 0.122, EXACT)
    assert one(table, 1, 1) == (0.0850, 0.095, EXACT)  # a0 has its row, a1 has none of this branch
    assert one(table, 0, 1) == (0.0860, 0.096, EXACT)  # a0, though m0 has |m| = 1
    assert one(table, 2, 3) == (0.0800, 0.090, EXACT)  # a0's own row before a1's neighbour
    assert one(table, 3, 3) == (0.0800, 0.090, NEIGHBOUR)
    assert one(table, 3, 4) == (0.0800, 0.090, NEIGHBOUR)  # nothing exact: a0's neighbour before a1's last row
    assert one(table, 50, 50) == (0.0700, 0.080, BEYOND)
    assert dict(table.skipped) == {"v1": 1}
    assert table.notes == {"quantum numbers without a row, between two that have one: the lower row serves": 1}


def test_rows_of_j(write):
    table = read_broadening(write("a.broad", ["a0 0.07 0.5 2", "a0 0.06 0.4 5"]))
    assert [one(table, j, j + 1) for j in range(7)] == [
        (0.07, 0.5, NEIGHBOUR),
        (0.07, 0.5, NEIGHBOUR),
        (0.07, 0.5, EXACT),
        (0.07, 0.5, NEIGHBOUR),
        (0.07, 0.5, NEIGHBOUR),
        (0.06, 0.4, EXACT),
        (0.06, 0.4, BEYOND),
    ]


def test_rows_of_m(write):
    table = read_broadening(write("a.broad", [f"m0 0.0{m} 0.{m} {m}" for m in range(1, 6)]))
    assert one(table, 1, 2) == (0.02, 0.2, EXACT)  # R: |m| = J'' + 1
    assert one(table, 2, 2) == (0.02, 0.2, EXACT)  # Q: |m| = J''
    assert one(table, 2, 1) == (0.02, 0.2, EXACT)  # P: |m| = J''
    assert one(table, 0, 1) == (0.01, 0.1, EXACT)
    assert one(table, 9, 8) == (0.05, 0.5, BEYOND)
    assert one(table, 0, 0) == (0.01, 0.1, NEIGHBOUR)
    assert np.isnan(one(table, 3, 1)[:2]).all()
    assert one(table, 3, 5)[2] == NONE


def test_branches_of_a1_do_not_mix(write):
    rows = ["a1 0.01 0.1 3 2", "a1 0.02 0.2 7 6", "a1 0.03 0.3 3 4", "a1 0.04 0.4 5 6", "a1 0.05 0.5 4 4"]
    table = read_broadening(write("a.broad", rows))
    assert one(table, 3, 2) == (0.01, 0.1, EXACT)
    assert one(table, 5, 4) == (0.01, 0.1, NEIGHBOUR)
    assert one(table, 1, 0) == (0.01, 0.1, NEIGHBOUR)
    assert one(table, 90, 89) == (0.02, 0.2, BEYOND)
    assert one(table, 4, 5) == (0.03, 0.3, NEIGHBOUR)
    assert one(table, 5, 6) == (0.04, 0.4, EXACT)
    assert one(table, 0, 1) == (0.03, 0.3, NEIGHBOUR)
    assert one(table, 3, 3) == (0.05, 0.5, NEIGHBOUR)
    assert one(table, 5, 5) == (0.05, 0.5, BEYOND)
    assert one(table, 5, 7)[2] == NONE
    assert one(table, 5, 3)[2] == NONE


def test_half_integers(write):
    rows = ["a0 0.07 0.5 0.5", "a0 0.06 0.4 1.5", "m0 0.05 0.3 3.5", "a1 0.04 0.2 1.5 2.5"]
    table = read_broadening(write("a.broad", rows))
    assert one(table, 0.5, 1.5) == (0.07, 0.5, EXACT)
    assert one(table, 1.5, 2.5) == (0.04, 0.2, EXACT)
    assert one(table, 2.5, 3.5) == (0.05, 0.3, EXACT)
    assert one(table, 1.5, 0.5) == (0.06, 0.4, EXACT)
    assert not table.notes


@pytest.mark.parametrize("j", [-1.0, 0.25, np.nan, np.inf, 1e308, 10_001.0])
def test_what_is_no_quantum_number_has_no_width(write, broad, j):
    table = read_broadening(write("a.broad", broad))
    gamma, exponent = widths(table, [j, 1.0], [1.0, 1.0])
    assert np.isnan([gamma[0], exponent[0]]).all()
    assert (gamma[1], exponent[1]) == (0.085, 0.095)
    # Of the two quantum numbers a0 needs only J''.
    assert one(table, 2.0, j) == (0.08, 0.09, EXACT)


def test_all_rows_against_a_slow_search(write):
    rng = np.random.default_rng(11)
    rows = {}
    for _ in range(300):
        code = ("a0", "a1", "m0")[rng.integers(3)]
        low, step = int(rng.integers(0, 80)), int(rng.integers(-1, 2))
        quanta = (low, low + step) if code == "a1" and low + step >= 0 else (low,)
        if (code == "a1") == (len(quanta) == 2):
            rows[(code, *quanta)] = (round(rng.uniform(0.01, 0.1), 4), round(rng.uniform(0.0, 1.0), 3))
    text = [f"{key[0]} {gamma} {n} {' '.join(map(str, key[1:]))}" for key, (gamma, n) in rows.items()]
    table = read_broadening(write("a.broad", text))
    # So many lines that each pair of quantum numbers stands there several times.
    lower = rng.integers(0, 100, 2000)
    upper = np.maximum(lower + rng.integers(-1, 2, 2000), 0)
    gamma, exponent = widths(table, lower, upper)
    for i, (low, up) in enumerate(zip(lower.tolist(), upper.tolist(), strict=True)):
        assert (gamma[i], exponent[i]) == slow(rows, low, up)
        assert widths(table, low, up) == ([gamma[i]], [exponent[i]])


def slow(rows, low, up):
    m = low + 1 if up == low + 1 else low
    for wanted in (("a1", low, up), ("a0", low), ("m0", m)):
        if wanted in rows:
            return rows[wanted]
    branch = {key[1]: value for key, value in rows.items() if key[0] == "a1" and key[2] - key[1] == up - low}
    for table, value in (
        *(({k[1]: v for k, v in rows.items() if k[0] == c}, x) for c, x in (("a0", low), ("m0", m))),
        (branch, low),
    ):
        below = [key for key in table if key <= value]
        if table:
            return table[max(below) if below else min(table)]
    raise AssertionError


def test_shapes(write, broad):
    table = read_broadening(write("a.broad", broad))
    gamma, exponent = widths(table, np.zeros(0), np.zeros(0))
    assert gamma.shape == exponent.shape == (0,)


@pytest.mark.parametrize("name", ["a.broad", "a.broad.bz2"])
def test_line_ends_and_compression(write, broad, name):
    data = "\r\n".join(["", *broad]).encode()
    table = read_broadening(write(name, bz2.compress(data) if name.endswith("bz2") else data))
    assert len(table) == 7
    assert sorted(table.line.tolist()) == [2, 3, 4, 5, 6, 7, 8]


def test_what_is_passed_over_is_counted(write):
    rows = ["a0 0.07 0.5 0 x", "a0 0.0 0.5 1", "k1 what ever", "K1 0.1", "c2", "A0 0.05 0.4 2"]
    table = read_broadening(write("a.broad", rows))
    assert dict(table.skipped) == {"k1": 2, "c2": 1}
    assert dict(table.notes) == {
        "columns behind the quantum numbers: not used": 1,
        "half-width 0: taken as not given": 1,
        "quantum numbers without a row, between two that have one: the lower row serves": 1,
    }
    assert one(table, 1, 1) == (0.07, 0.5, NEIGHBOUR)


WRONG = [
    ("a0 0.07 0.5", "row with too few columns; expected code a0, half-width, exponent, J, found"),
    ("m0 0.07 0.5", "row with too few columns; expected code m0, half-width, exponent, |m|, found"),
    ("a1 0.07 0.5 9", "row with too few columns; expected code a1, half-width, exponent, J, J of the upper state"),
    ("a0", "row with too few columns"),
    ("7 0.07 0.5 9", "not a row of widths"),
    ("air 0.07 0.5 9", "not a row of widths"),
    ("a0 x 0.5 9", "row with a column that is not a number"),
    ("a0 nan 0.5 9", "row with a column that is not a number"),
    ("a0 0.07 1_0 9", "row with a column that is not a number"),
    ("a0 0.07 0.5 J", "row with a column that is not a number"),
    ("a0 -0.07 0.5 9", "half-width is impossible; expected 0 to 100 cm-1/bar"),
    ("a0 1e999 0.5 9", "half-width is impossible"),
    ("a0 0.07 11 9", "exponent is impossible; expected -10 to 10"),
    ("a0 0.07 0.5 -9", "quantum number is impossible"),
    ("a0 0.07 0.5 9.25", "quantum number is impossible"),
    ("a0 0.07 0.5 9e307", "quantum number is impossible"),
    ("a0 0.07 0.5 1e999", "quantum number is impossible"),
    ("a1 0.07 0.5 9 9.5", "quantum number is impossible"),
    ("a0 0.07 0.5 9 a0 0.07 0.5 8", "two rows in one line"),
    ("a0 0.07 0.5 1", "quantum numbers given twice, in line 2 too"),
    ("a1 0.07 0.5 1 2.0", "quantum numbers given twice, in line 5 too"),
    ("m0 0.07 0.5 1.0", "quantum numbers given twice, in line 7 too"),
    ("a0 0.07 0.5 9 \xe9", "row with bytes that are no text"),
    ("a0 0.07 0.5 9\ra0 0.07 0.5 8", "row with bytes that are no text"),
]


@pytest.mark.parametrize(("row", "reason"), WRONG)
def test_a_row_that_cannot_be_right(write, broad, row, reason):
    path = write("a.broad", [*broad, row, "a0 0.07 0.5 30"])
    with pytest.raises(LineListError, match="^" + re.escape(f"{path}:9: {reason}")) as caught:
        read_broadening(path)
    assert str(caught.value).isprintable()


def test_a_file_without_a_usable_row(write, tmp_path):
    with pytest.raises(
        LineListError, match=r"no usable row of widths; expected rows of code a1, a0, m0, found 2 of .*v1"
    ):
        read_broadening(write("a.broad", ["v1 0.1 0.5 1 0", "v1 0.1 0.5 2 0"]))
    with pytest.raises(LineListError, match=r"no usable row of widths; .*, found none"):
        read_broadening(write("a.broad", ["a0 0.0 0.5 1"]))
    with pytest.raises(LineListError, match=r"no usable row of widths; .*, found none"):
        read_broadening(write("a.broad", b""))
    with pytest.raises(LineListError, match=r"b.broad: cannot be read"):
        read_broadening(tmp_path / "b.broad")
