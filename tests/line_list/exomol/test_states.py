"""States: every column, ids in any order, partition sums, and every row that can't be right."""

from __future__ import annotations

import bz2
import gzip
import re

import numpy as np
import pytest

from opacity.constants import SECOND_RADIATION
from opacity.errors import InputError, LineListError
from opacity.line_list.exomol.definition import read_definition
from opacity.line_list.exomol.states import partition_sum, read_states


@pytest.fixture
def described(write, definition):
    return read_definition(write("a.def", definition()))


def test_the_columns(write, states, described):
    found = read_states(write("a.states", states), described)
    assert found.energy.tolist() == [0.0, 21.5, 64.4, 1995.25, 2016.1]
    assert found.total_weight.tolist() == [1.0, 9.0, 5.0, 1.0, 9.0]
    assert found.j.tolist() == [0.0, 1.0, 2.0, 0.0, 1.0]
    assert found.uncertainty == pytest.approx([1e-6, 1e-5, 1e-4, 0.5, 0.5], rel=1e-6)
    assert found.rows_of([1, 5, 3, 6, 0, -1, 2**62]).tolist() == [0, 4, 2, -1, -1, -1, -1]
    assert (len(found), found.notes) == (5, {})


def test_without_a_definition_no_uncertainty_is_assumed(write, states):
    found = read_states(write("a.states", states))
    assert found.uncertainty is None
    assert found.energy[4] == 2016.1


@pytest.mark.parametrize("name", ["a.states", "a.states.bz2", "a.states.gz"])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize("last", [True, False])
@pytest.mark.parametrize("chunk", [60, 1 << 20])
def test_line_ends_compression_and_chunks(write, states, name, end, last, chunk):
    text = end.join(states) + (end if last else "")
    pack = {"bz2": bz2.compress, "gz": gzip.compress}.get(name.split(".")[-1], bytes)
    found = read_states(write(name, pack(text.encode())), chunk=chunk)
    assert found.energy.tolist() == [0.0, 21.5, 64.4, 1995.25, 2016.1]
    assert found.rows_of([5, 1]).tolist() == [4, 0]


@pytest.mark.parametrize(
    "ids",
    [
        [7, 8, 9, 10, 11],
        [5, 4, 3, 2, 1],
        [1, 2, 4, 5, 60000],
        [3, 1, 10**17, 5, 10**12],
        [0, 1, 2, 3, 4],
        [2, 1, 3, 4, 6],
    ],
)
def test_ids_in_any_order_with_gaps(write, states, ids):
    rows = [f"{one} {row.split(maxsplit=1)[1]}" for one, row in zip(ids, states, strict=True)]
    found = read_states(write("a.states", rows))
    asked = [*ids, 99, 10**18, -5, min(ids) - 1, max(ids) + 1]
    expected = [ids.index(one) if one in ids else -1 for one in asked]
    assert found.rows_of(asked).tolist() == expected
    assert found.rows_of([]).tolist() == []


def test_half_integers_and_tabs(write):
    found = read_states(write("a.states", ["1\t0.0\t2\t0.5", " 2 10.5 4 1.5 e 1/2", "3 1e1 4 +1.50"]))
    assert found.j.tolist() == [0.5, 1.5, 1.5]
    assert found.energy.tolist() == [0.0, 10.5, 10.0]


def test_what_is_assumed_is_counted(write, states, definition):
    described = read_definition(write("a.def", definition(states_in="9")))
    states[0] = states[0].replace(" 0.000000 ", "-0.500000 ")
    states[1] = states[1].replace(" 21.500000 ", "-0.0000005 ")
    assert dict(read_states(write("a.states", states), described).notes) == {
        "energy below 0: used as it stands": 1,
        "states missing: the definition counts 9": 4,
    }
    described = read_definition(write("a.def", definition(states_in="3")))
    assert read_states(write("a.states", states), described).notes["states too many: the definition counts 3"] == 2


WRONG = [
    ("2 21.5 9", "row with too few columns; expected 5 or more: id, energy, total weight, J, uncertainty"),
    ("2 21.5 9 1", "row with too few columns"),
    ("2", "row with too few columns"),
    ("x 21.5 9 1 0.1", "id is not a whole number"),
    ("-2 21.5 9 1 0.1", "id is not a whole number"),
    ("2.0 21.5 9 1 0.1", "id is not a whole number"),
    ("1234567890123456789 21.5 9 1 0.1", "id is not a whole number"),
    ("2 x 9 1 0.1", "energy is not a number"),
    ("2 NaN 9 1 0.1", "energy is not a number"),
    ("2 inf 9 1 0.1", "energy is not a number"),
    ("2 *** 9 1 0.1", "energy is not a number"),
    ("2 1e999 9 1 0.1", "energy is impossible"),
    ("2 -1.01 9 1 0.1", "energy is impossible; expected -1 to 1e+06 cm-1"),
    ("2 1e7 9 1 0.1", "energy is impossible"),
    ("2 21.5 x 1 0.1", "total weight is not a number"),
    ("2 21.5 -9 1 0.1", "total weight is impossible"),
    ("2 21.5 9e300 1 0.1", "total weight is impossible"),
    ("2 21.5 9 A 0.1", "J is not a number"),
    ("2 21.5 9 1/2 0.1", "J is not a number"),
    ("2 21.5 9 1.25 0.1", "J is impossible; expected a whole or half number from 0 to 10000"),
    ("2 21.5 9 -1 0.1", "J is impossible"),
    ("2 21.5 9 1e308 0.1", "J is impossible"),
    ("2 21.5 9 1e999 0.1", "J is impossible"),
    ("2 21.5 9 1 Inf", "uncertainty is not a number"),
    ("2 21.5 9 1 -0.1", "uncertainty is impossible"),
    ("2 21.5 9 1 0.1 \xe9", "row with bytes that are no text"),
    ("2 21.5 9 1 0.1 \0", "row with bytes that are no text"),
    ("2 21.5 9 1 0.1\r3 64.4 5 2 0.1", "row with bytes that are no text"),
]


@pytest.mark.parametrize(("row", "reason"), WRONG)
@pytest.mark.parametrize("chunk", [60, 1 << 20])
def test_a_row_that_cannot_be_right(write, states, described, row, reason, chunk):
    path = write("a.states", [states[0], "", *states[2:], row, "y"])
    with pytest.raises(LineListError, match="^" + re.escape(f"{path}:6: {reason}")) as caught:
        read_states(path, described, chunk=chunk)
    assert str(caught.value).isprintable()


@pytest.mark.parametrize("chunk", [60, 1 << 20])
@pytest.mark.parametrize(
    ("ids", "line", "twice", "before"),
    [
        ([1, 2, 3, 2, 5], 5, 2, 2),
        ([1, 1, 3, 2, 2], 3, 1, 1),
        ([4, 10**15, 2, 4, 10**15], 5, 4, 1),
    ],
)
def test_an_id_that_stands_twice(write, states, ids, line, twice, before, chunk):
    rows = [f"{one} {row.split(maxsplit=1)[1]}" for one, row in zip(ids, states, strict=True)]
    # A blank line, so that row and line numbers differ behind it.
    rows.insert(2 if line > 3 else 1, "")
    path = write("a.states", rows)
    with pytest.raises(LineListError, match=re.escape(f"{path}:{line}: id given twice; ")) as caught:
        read_states(path, chunk=chunk)
    assert f"found id {twice} in line {before} too" in str(caught.value)


def test_files_that_hold_nothing(write, tmp_path):
    for content in (b"", b"\n \n"):
        with pytest.raises(LineListError, match=r"a.states: holds no state"):
            read_states(write("a.states", content))
    with pytest.raises(LineListError, match=r"b.states: cannot be read"):
        read_states(tmp_path / "b.states")
    whole = bz2.compress(b"1 0.0 1 0\n" * 1000)
    with pytest.raises(LineListError, match=r"a.states.bz2: damaged or cut .bz2 file"):
        read_states(write("a.states.bz2", whole[:-10]))


def test_the_partition_sum_is_the_direct_sum(write, states):
    found = read_states(write("a.states", states))
    temperatures = np.array([10.0, 296.0, 2000.0])
    expected = [
        sum(g * np.exp(-SECOND_RADIATION * e / t) for g, e in zip(found.total_weight, found.energy, strict=True))
        for t in temperatures
    ]
    assert partition_sum(found, temperatures) == pytest.approx(expected, rel=1e-14)
    assert partition_sum(found, 1e6) == pytest.approx([25.0], rel=3e-3)


def test_the_partition_sum_of_a_rigid_rotor(write):
    # Q of a linear rotor with B = 2 cm-1 at 300 K: kT/B + 1/3 + B/(15 kT) (Mulholland's expansion).
    rows = [f"{j + 1} {2.0 * j * (j + 1):.6f} {2 * j + 1} {j}" for j in range(200)]
    x = 300.0 / SECOND_RADIATION / 2.0
    found = read_states(write("a.states", rows))
    assert partition_sum(found, [300.0]) == pytest.approx([x + 1.0 / 3.0 + 1.0 / (15.0 * x)], rel=1e-6)


@pytest.mark.parametrize("temperature", [0.0, -5.0, 0.5, np.nan, np.inf])
def test_a_temperature_that_cannot_be(write, states, temperature):
    found = read_states(write("a.states", states))
    with pytest.raises(InputError, match=r"temperature: impossible for a sum over states; expected 1 K or more"):
        partition_sum(found, [300.0, temperature])


def test_many_states_in_chunks(write):
    rng = np.random.default_rng(5)
    count = 20_000
    ids = rng.permutation(3 * count)[:count] + 1
    energy = np.round(rng.uniform(0.0, 40000.0, count), 6)
    j = rng.integers(0, 200, count) / 2.0
    rows = [f"{i:12d} {e:12.6f} {int(2 * k + 1):6d} {k:7.1f} 0 A1" for i, e, k in zip(ids, energy, j, strict=True)]
    found = read_states(write("a.states.bz2", bz2.compress(("\n".join(rows) + "\n").encode())), chunk=10_000)
    assert np.array_equal(found.energy, energy)
    assert np.array_equal(found.j, j)
    assert np.array_equal(found.total_weight, 2.0 * j + 1.0)
    assert np.array_equal(found.rows_of(ids), np.arange(count))
