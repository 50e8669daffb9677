"""Whatever bytes a list holds, reading it gives lines that add up or an error of one line that names the file."""

from __future__ import annotations

import json
import os
from pathlib import Path

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
    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
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


@pytest.fixture(scope="module")
def reached():
    """Counts of examples that ended in lines and in an error: a fuzz that only meets one of them shows nothing."""
    counts = {}
    yield counts
    for name, (lines, errors) in counts.items():
        assert lines > 0.05 * EXAMPLES, name
        assert errors > 0.05 * EXAMPLES, name


def tally(counts, name, result):
    lines, errors = counts.get(name, (0, 0))
    counts[name] = (lines + result, errors + (not result))


@FUZZ
@given(edits=EDITS, bad_records=st.sampled_from(["stop", "leave-out"]))
def test_records_of_160_characters(edits, bad_records, record, tmp_path, reached):
    data = "".join(record(wavenumber=2000.0 + n) + "\n" for n in range(6)).encode()
    path = Path(tmp_path) / "a.par"
    path.write_bytes(edited(data, edits))
    tally(reached, "par", judge(path, path, bad_records))


@FUZZ
@given(edits=EDITS, bad_records=st.sampled_from(["stop", "leave-out"]))
def test_rows_of_a_hapi_table(edits, bad_records, record, header, tmp_path, reached):
    path = Path(tmp_path) / "a.data"
    path.with_suffix(".header").write_text(json.dumps(header(("gamma_h2", "n_h2", "delta_h2"))))
    data = "".join(record(wavenumber=2000.0 + n) + ", 0.0700, 0.5000,#\n" for n in range(6)).encode()
    path.write_bytes(edited(data, edits))
    tally(reached, "data", judge(path, path, bad_records))


@FUZZ
@given(edits=EDITS, bad_records=st.sampled_from(["stop", "leave-out"]))
def test_the_header_of_a_hapi_table(edits, bad_records, record, header, tmp_path, reached):
    path = Path(tmp_path) / "a.data"
    path.write_bytes("".join(record(wavenumber=2000.0 + n) + ", 0.0700, 0.5000,#\n" for n in range(6)).encode())
    head = path.with_suffix(".header")
    head.write_bytes(edited(json.dumps(header(("gamma_h2", "n_h2", "delta_h2")), indent=1).encode(), edits))
    tally(reached, "header", judge(path, head, bad_records))


@FUZZ
@given(data=st.binary(max_size=400), name=st.sampled_from(["a.par", "a.gz", "a.bz2"]))
def test_bytes_of_nothing(data, name, tmp_path):
    path = Path(tmp_path) / name
    path.write_bytes(data)
    judge(path, path, "leave-out")
