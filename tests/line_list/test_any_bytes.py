"""Whatever bytes a list holds, reading it gives lines that add up or an error of one line that names the file."""

from __future__ import annotations

import json
import os

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from opacity.errors import OpacityError
from opacity.line_list.read import read_lines

EXAMPLES = int(os.environ.get("OPACITY_FUZZ_EXAMPLES", "300"))
FUZZ = settings(
    derandomize=True,
    max_examples=EXAMPLES,
    deadline=5000,
    database=None,
    suppress_health_check=[HealthCheck.too_slow],
)

# What damaged or foreign files hold: line ends, separators, numbers that are none, marks, bytes of other encodings.
PIECES = [
    b"\n", b"\r\n", b"\r", b"\t", b" ", b"\0", b"\x1a", b"\x0b", b"\x85", b"\xff", b"\xc3\xa9", b"#", b",", b"-", b"+",
    b"nan", b"inf", b"9E999", b"1_0", b"0x10", b"1e-320", b"99", b"A", b"*****", b'"', b"{", b"}", b"[", b":", b"null",
    b"NaN", b"Infinity", b"1e999", b"-1", b"10000000000000", b"%", b"\\n", b"\\ud800", b"nu", b"position", b"gamma_h2",
]  # fmt: skip

SPOT = st.floats(0.0, 1.0, exclude_max=True)
EDIT = st.one_of(
    st.tuples(st.just("flip"), SPOT, st.integers(1, 255)),
    st.tuples(st.just("digit"), SPOT, st.sampled_from(b"0123456789.-E+ ")),
    st.tuples(st.just("delete"), SPOT, st.integers(1, 400)),
    st.tuples(st.just("cut"), SPOT, st.just(0)),
    st.tuples(st.just("insert"), SPOT, st.sampled_from(PIECES)),
    st.tuples(st.just("over"), SPOT, st.sampled_from(PIECES)),
    st.tuples(st.just("repeat"), SPOT, st.integers(1, 400)),
)
EDITS = st.lists(EDIT, min_size=1, max_size=6)


def edited(data, edits):
    for kind, spot, value in edits:
        at = int(spot * len(data))
        before, after = data[:at], data[at:]
        if kind == "flip" and after:
            data = before + bytes([after[0] ^ value]) + after[1:]
        elif kind == "digit" and after:
            data = before + bytes([value]) + after[1:]
        elif kind == "delete":
            data = before + after[value:]
        elif kind == "cut":
            data = before
        elif kind == "insert":
            data = before + value + after
        elif kind == "over":
            data = before + value + after[len(value) :]
        elif kind == "repeat":
            data = before + after[:value] + after
    return data


def judge(path, other, bad_records):
    """True if lines came of it."""
    try:
        lines = read_lines(path, bad_records=bad_records)
    except OpacityError as error:
        message = str(error)
        assert len(message.splitlines()) == 1
        assert message.startswith((str(path), str(other)))
        return False
    assert lines.ledger.adds_up()
    assert lines.ledger.kept == len(lines)
    assert len(lines) > 0 or bad_records == "leave-out"
    for column in (lines.wavenumber, lines.strength, lines.lower_energy):
        assert column.shape == (len(lines),)
        assert np.isfinite(column).all()
    for column in (lines.einstein_a, lines.upper_weight, lines.lower_weight):
        assert not np.isinf(column).any()
    assert np.all(lines.wavenumber > 0.0)
    assert np.all(lines.strength >= 0.0)
    assert np.all(np.diff(lines.wavenumber) >= 0.0)
    assert len(lines) == 0 or 0 <= lines.isotopologue.min() <= lines.isotopologue.max() < len(lines.isotopologues)
    for one in lines.broadeners.values():
        assert not np.any(one.gamma <= 0.0)
        assert not np.isinf([one.gamma, one.exponent, one.shift]).any()
    return True


class Tally:
    """Counts of examples that ended in lines and in an error: a search that meets only one of them shows nothing."""

    def __init__(self):
        self.lines = self.errors = 0

    def add(self, result):
        self.lines += result
        self.errors += not result

    def check(self):
        assert self.lines > 0.03 * EXAMPLES
        assert self.errors > 0.03 * EXAMPLES


HOW = st.sampled_from(["stop", "leave-out"])
EXTRA = ("gamma_h2", "n_h2", "delta_h2")


@pytest.fixture
def rows(record):
    return "".join(record(wavenumber=2000.0 + n) + ", 0.0700, 0.5000,#\n" for n in range(6)).encode()


def test_records_of_160_characters(record, tmp_path):
    data = "".join(record(wavenumber=2000.0 + n) + "\n" for n in range(6)).encode()
    path, tally = tmp_path / "a.par", Tally()

    @FUZZ
    @given(edits=EDITS, bad_records=HOW)
    def run(edits, bad_records):
        path.write_bytes(edited(data, edits))
        tally.add(judge(path, path, bad_records))

    run()
    tally.check()


def test_rows_of_a_hapi_table(rows, header, write_table):
    path, tally = write_table([], header(EXTRA)), Tally()

    @FUZZ
    @given(edits=EDITS, bad_records=HOW)
    def run(edits, bad_records):
        path.write_bytes(edited(rows, edits))
        tally.add(judge(path, path, bad_records))

    run()
    tally.check()


def test_the_text_of_a_header(rows, header, write_table):
    path, tally = write_table([], header(EXTRA)), Tally()
    path.write_bytes(rows)
    head = path.with_suffix(".header")
    data = json.dumps(header(EXTRA), indent=1).encode()

    @FUZZ
    @given(edits=st.lists(EDIT, min_size=1, max_size=2), bad_records=HOW)
    def run(edits, bad_records):
        head.write_bytes(edited(data, edits))
        tally.add(judge(path, head, bad_records))

    run()
    tally.check()


VALUES = st.one_of(
    st.none(), st.booleans(), st.integers(-5, 200), st.integers(), st.floats(), st.text(max_size=5),
    st.sampled_from(["%5.2f", "%7d", "%1d", "%s", "%999999999s", ",", "nu", "gamma_he", "delta_air"]),
    st.lists(st.sampled_from(["gamma_h2", "n_h2", "delta_h2", "nu", 3, None]), max_size=4),
)  # fmt: skip
MEMBERS = st.sampled_from(["molec_id", "local_iso_id", "nu", "sw", "elower", "gamma_air", "quanta", "gpp", "n_he"])


def test_the_content_of_a_header(rows, header, write_table):
    path, tally = write_table([], header(EXTRA)), Tally()
    path.write_bytes(rows)
    head = path.with_suffix(".header")

    @FUZZ
    @given(
        section=st.sampled_from(["position", "format", "extra", "extra_separator", "order"]),
        member=MEMBERS,
        value=VALUES,
        bad_records=HOW,
    )
    def run(section, member, value, bad_records):
        content = header(EXTRA)
        content[section] = {**content[section], member: value} if section in ("position", "format") else value
        head.write_text(json.dumps(content))
        tally.add(judge(path, head, bad_records))

    run()
    tally.check()


@pytest.mark.parametrize("name", ["a.par", "a.gz", "a.bz2"])
def test_bytes_of_nothing(tmp_path, name):
    path = tmp_path / name

    @FUZZ
    @given(data=st.binary(max_size=400))
    def run(data):
        path.write_bytes(data)
        assert judge(path, path, "leave-out") is False or path.suffix == ".par"

    run()
