"""Partition functions from a file of T and Q."""

from __future__ import annotations

import bz2
import gzip
import re

import numpy as np
import pytest

from opacity.constants import SECOND_RADIATION
from opacity.errors import MoleculeError
from opacity.molecule.partition_function import from_file, from_states

GOOD = ["100.0 10.0", "200.0 28.0", "300.0 52.0", "400.0 80.0", "500.0 112.0"]


@pytest.fixture
def write(tmp_path):
    def make(rows):
        path = tmp_path / "made.pf"
        path.write_bytes("\n".join(rows).encode("latin-1"))
        return path

    return make


def direct_sum(temperature):
    """Q of a rigid rotor (B = 1.93 cm-1) with a harmonic oscillator (2143 cm-1), summed over its levels."""
    j, v = np.arange(700)[:, None], np.arange(60)[None, :]
    energy = 1.93 * j * (j + 1) + 2143.0 * v
    return float(np.sum((2 * j + 1) * np.exp(-SECOND_RADIATION * energy / temperature)))


def test_a_power_of_the_temperature_is_met_between_its_points(write):
    temperature = np.geomspace(10.0, 5000.0, 20)
    q = from_file(write([f"{t!r} {0.3 * t**1.5!r}" for t in temperature.tolist()]))
    for t in (10.0, 11.3, 296.0, 1234.5, 4999.0, float(temperature[7])):
        assert q(t) == pytest.approx(0.3 * t**1.5, rel=1e-13)


@pytest.mark.parametrize(("step", "accuracy"), [(1.0, 1e-9), (10.0, 2e-6)])
def test_a_sum_over_levels_is_met_between_its_points(write, step, accuracy):
    temperature = np.arange(20.0, 3000.1, step)
    q = from_file(write([f"{t:.1f} {direct_sum(t):.12e}" for t in temperature]))
    middle = np.arange(50.0, 2990.0, 97.0) + 0.5 * step
    np.testing.assert_allclose([q(t) for t in middle], [direct_sum(t) for t in middle], rtol=accuracy)


def test_the_points_themselves_are_given_back_and_blank_lines_passed_over(write):
    q = from_file(write(["", *GOOD[:2], "   ", *GOOD[2:], "", ""]))
    for row in GOOD:
        t, value = map(float, row.split())
        assert q(t) == pytest.approx(value, rel=1e-14)
    assert (q.lowest, q.highest, q.source) == (100.0, 500.0, "file made.pf")


COMPRESS = {"bz2": bz2.compress, "gz": gzip.compress}


@pytest.mark.parametrize("ending", COMPRESS)
def test_a_compressed_file_is_read_the_same(write, ending):
    path = write(GOOD)
    data = path.read_bytes()
    packed = path.with_name(f"made.pf.{ending}")
    # In two streams.
    packed.write_bytes(COMPRESS[ending](data[:30]) + COMPRESS[ending](data[30:]))
    q, plain = from_file(packed), from_file(path)
    assert [q(t) for t in (100.0, 296.0, 444.4)] == [plain(t) for t in (100.0, 296.0, 444.4)]
    assert q.source == f"file made.pf.{ending}"


@pytest.mark.parametrize("value", ["52.0", "52.1", "52.000000000000007"])
def test_rows_too_near_to_each_other_are_refused(write, value):
    near = [f"{float(np.nextafter(300.0, 400.0))!r} {value}"]
    with pytest.raises(MoleculeError, match=r"^[^\n]*made\.pf: no partition function: it jumps between 300 and 300 K"):
        from_file(write([*GOOD[:3], *near, *GOOD[3:]]))


@pytest.mark.parametrize("ending", COMPRESS)
def test_a_compressed_file_that_is_cut_or_none(write, ending):
    path = write(GOOD).with_name(f"made.pf.{ending}")
    packed = COMPRESS[ending](b"\n".join(row.encode() for row in GOOD))
    behind = packed + COMPRESS[ending](b"\n600.0 140.0")[:-5]
    garbage = packed[:12] + b"\xff\xff\xff" + packed[15:]
    for damaged in (packed[:-5], packed[:15], garbage, b"100.0 10.0\n", behind, packed + b"\n600.0 140.0"):
        path.write_bytes(damaged)
        with pytest.raises(MoleculeError, match=rf"made\.pf\.{ending}: partition function cannot be read \("):
            from_file(path)


def test_further_columns_are_not_read(write):
    q = from_file(write([row + " 3.0 text" for row in GOOD]))
    assert q(300.0) == pytest.approx(52.0, rel=1e-14)


@pytest.mark.parametrize("temperature", [99.999, 500.001, 0.0, float("nan")])
def test_it_never_goes_beyond_its_ends(write, temperature):
    q = from_file(write(GOOD))
    with pytest.raises(
        MoleculeError,
        match=r"^partition function file made\.pf: temperature outside its valid range; expected 100 to 500 K, found ",
    ):
        q(temperature)


@pytest.mark.parametrize(
    "row",
    [
        "x 30.0",
        "250.0 x",
        "250.0",
        "250.0,30.0",
        "nan 30.0",
        "250.0 nan",
        "inf 30.0",
        "250.0 inf",
        "250.0 1E999",
        "250.0 0.0",
        "250.0 -30.0",
        "200.0 30.0",
        "150.0 30.0",
        "-250.0 30.0",
        "2_5_0 30.0",
        "250.0 3_0",
        "# T Q",
        "\x00 1",
    ],
)
@pytest.mark.parametrize("place", [2, 4])
def test_a_bad_row_is_named(write, row, place):
    rows = [*GOOD[:place], row, *GOOD[place:]]
    if place == 4:
        rows[4] = rows[4].replace("250.0", "450.0").replace("2_5_0", "4_5_0")
    path = write(rows)
    with pytest.raises(MoleculeError, match="^" + re.escape(f"{path}:{place + 1}: not a row of a")) as caught:
        from_file(path)
    assert "expected T above" in str(caught.value)
    assert str(caught.value).isprintable()


@pytest.mark.parametrize("count", [0, 1, 3])
def test_too_few_rows(write, count):
    path = write(GOOD[:count])
    message = f"{path}: too few rows; expected 4 or more of T and Q, found {count}"
    with pytest.raises(MoleculeError, match="^" + re.escape(message) + "$"):
        from_file(path)


def test_a_file_that_cannot_be_read(tmp_path, write):
    for path in (tmp_path / "none.pf", tmp_path, write(["100.0 1\xb20.0"])):
        with pytest.raises(
            MoleculeError, match="^" + re.escape(f"{path}: partition function cannot be read")
        ) as caught:
            from_file(path)
        assert len(str(caught.value).splitlines()) == 1


@pytest.mark.parametrize(
    ("rows", "found"),
    [([*GOOD[2:], "600.0 140.0"], "300 to 600 K"), (["50.0 4.0", "80.0 8.0", *GOOD[:2]], "50 to 200 K")],
)
def test_a_file_without_296_kelvin_is_to_blame(write, rows, found):
    path = write(rows)
    message = (
        f"{path}: the partition function does not hold 296 K, to which the strengths refer;"
        f" expected rows from 296 K or below to 296 K or above, found {found}"
    )
    with pytest.raises(MoleculeError, match="^" + re.escape(message) + "$"):
        from_file(path)


def test_a_step_in_a_file_is_found_where_it_is(write):
    temperature = np.arange(20.0, 1000.1, 10.0)
    smooth = np.array([direct_sum(t) for t in temperature])
    assert from_file(write([f"{t} {q}" for t, q in zip(temperature, smooth, strict=True)])).steps == ()
    # Down to 60 K a cubic through rows 10 K apart can say nothing.
    for place, found in ((700.0, True), (40.0, False)):
        broken = np.where(temperature > place, 1.01, 1.0) * smooth
        steps = from_file(write([f"{t} {q}" for t, q in zip(temperature, broken, strict=True)])).steps
        assert bool(steps) is found
        assert all(abs(t - place) <= 20.0 for t in steps)


def test_a_sum_over_states_that_is_0_when_cold_serves_where_it_is_not():
    t = np.geomspace(10.0, 5000.0, 40)
    q = np.where(t < 100.0, 0.0, 0.3 * t**1.5)
    summed = from_states(t.tolist(), q.tolist(), 20000.0)
    assert summed.lowest == t[t >= 100.0][0]
    assert summed(296.0) == pytest.approx(0.3 * 296.0**1.5, rel=1e-12)
    with pytest.raises(MoleculeError, match=r"^partition_function: the sum over the states is 0; fetch the states"):
        from_states(t.tolist(), np.zeros(t.size).tolist(), 20000.0)
