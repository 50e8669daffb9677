"""Catalogue records of any bytes: refused in one line, or read as the numbers that stand there."""

from __future__ import annotations

import math
import re

import pytest
from hypothesis import given

from opacity.errors import OpacityError
from opacity.line_list.catalogue import NM2_MHZ, read_catalogue

from .test_any_bytes import EDITS, FUZZ, HOW, Tally, edited
from .test_catalogue import record


def test_any_bytes(tmp_path):
    data = "".join(record(frequency=f"{43423.8530 + n:.4f}", energy=f"{n * 111.5:.4f}") + "\n" for n in range(6))
    path, tally = tmp_path / "a.cat", Tally()

    @FUZZ
    @given(edits=EDITS, bad_records=HOW)
    def run(edits, bad_records):
        path.write_bytes(edited(data.encode(), edits))
        tally.add(judge_any(path, bad_records))

    run()
    tally.check()


def number(text):
    """As float, and Fortran's exponents of three digits without a letter."""
    return float(re.sub(r"(?<=[\d.])([+-]\d{3})$", r"E\1", text.strip()))


def judge_any(path, bad_records):
    try:
        lines = read_catalogue(path, bad_records=bad_records)
    except OpacityError as error:
        message = str(error)
        assert message.startswith(str(path))
        assert message.isprintable()
        return False
    assert lines.ledger.adds_up()
    assert lines.ledger.kept == len(lines)
    assert len(lines) > 0 or bad_records == "leave-out"
    raw = path.read_bytes().split(b"\n")
    for i, place in enumerate(lines.record):
        text = raw[place - 1].decode()
        unit = 1.0 if math.copysign(1.0, number(text[13:21])) < 0.0 else 29979.2458
        assert lines.wavenumber[i] == pytest.approx(number(text[:13]) / unit, rel=1e-15)
        assert lines.strength[i] == pytest.approx(10.0 ** number(text[21:29]) / NM2_MHZ, rel=1e-12)
        assert lines.lower_energy[i] == pytest.approx(number(text[31:41]), rel=1e-15)
    return True
