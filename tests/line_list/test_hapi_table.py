"""Local tables of hapi: a header that says where the columns are, and columns behind the fixed part."""

from __future__ import annotations

import bz2
import gzip
import json
import re

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.line_list.hapi_table import header_of, is_hapi
from opacity.line_list.read import read_lines

ATMOSPHERE = 1.01325
EXTRA = ("gamma_h2", "n_h2", "delta_h2", "gamma_he", "n_he", "n_self", "delta_self")


def column(lines, broadener, kind):
    return getattr(lines.broadeners[broadener], kind)


def test_extra_columns_of_every_kind(record, header, write_table):
    path = write_table([record() + ",0.069,0.62,-0.0011,0.0464,0.55,0.71,0.0022"], header(EXTRA))
    lines = read_lines(path)
    assert sorted(lines.broadeners) == ["air", "h2", "he", "self"]
    assert column(lines, "h2", "gamma")[0] == pytest.approx(0.069 / ATMOSPHERE, rel=1e-15)
    assert column(lines, "h2", "exponent")[0] == 0.62
    assert column(lines, "h2", "shift")[0] == pytest.approx(-0.0011 / ATMOSPHERE, rel=1e-15)
    assert column(lines, "he", "gamma")[0] == pytest.approx(0.0464 / ATMOSPHERE, rel=1e-15)
    assert column(lines, "he", "exponent")[0] == 0.55
    assert np.isnan(column(lines, "he", "shift")[0])
    assert column(lines, "self", "gamma")[0] == pytest.approx(0.071 / ATMOSPHERE, rel=1e-15)
    assert column(lines, "self", "exponent")[0] == 0.71
    assert column(lines, "self", "shift")[0] == pytest.approx(0.0022 / ATMOSPHERE, rel=1e-15)
    assert column(lines, "air", "gamma")[0] == pytest.approx(0.0651 / ATMOSPHERE, rel=1e-15)
    assert lines.wavenumber[0] == 2100.123456
    assert lines.lower_weight[0] == 11.0


def test_a_table_without_extra_columns_reads_as_the_160_characters_do(record, header, write_table, write_par):
    content = [record(wavenumber=3.0), record(wavenumber=2.0, code="2"), record(wavenumber=2.5, code="A", molecule=2)]
    for records in (content[:2], content[2:]):
        table, plain = read_lines(write_table(records, header())), read_lines(write_par(records))
        for name in ("wavenumber", "strength", "lower_energy", "einstein_a", "upper_weight", "lower_weight", "record"):
            np.testing.assert_array_equal(getattr(table, name), getattr(plain, name))
        for name in ("air", "self"):
            for kind in ("gamma", "exponent", "shift"):
                np.testing.assert_array_equal(column(table, name, kind), column(plain, name, kind))
        assert table.isotopologues == plain.isotopologues


@pytest.mark.parametrize(("ending", "pack"), [(".gz", gzip.compress), (".bz2", bz2.compress), (".GZ", gzip.compress)])
def test_a_compressed_table_has_the_header_of_the_plain_one(record, header, write_table, ending, pack):
    path = write_table([record() + ",0.069,0.62,-0.0011,0.0464,0.55,0.71,0.0022"], header(EXTRA))
    packed = path.with_name(path.name + ending)
    packed.write_bytes(pack(path.read_bytes()))
    lines = read_lines(packed)
    assert sorted(lines.broadeners) == ["air", "h2", "he", "self"]
    assert (is_hapi(packed), header_of(packed)) == (True, path.with_suffix(".header"))


@pytest.mark.parametrize("mark", ["#", "####", "      #", "", "   "])
def test_marks_of_what_is_missing(record, header, write_table, mark):
    rows = [f"{record()},{mark},0.62,#,0.05,{mark},#,#", record(wavenumber=9000.0) + ",0.07,0.6,0.1,0.05,0.5,0.7,0.1"]
    lines = read_lines(write_table(rows, header(EXTRA)))
    for name, kind in (("h2", "gamma"), ("h2", "shift"), ("he", "exponent"), ("self", "exponent"), ("self", "shift")):
        assert np.isnan(column(lines, name, kind)).tolist() == [True, False]
    assert column(lines, "h2", "exponent").tolist() == [0.62, 0.6]
    assert np.isfinite(column(lines, "he", "gamma")).all()


def test_marks_of_what_is_missing_in_the_fixed_part(record, header, write_table):
    lines = read_lines(write_table([record(upper_weight="#", gamma_self="#####", n_air="#")], header()))
    assert np.isnan(
        [lines.upper_weight[0], column(lines, "self", "gamma")[0], column(lines, "air", "exponent")[0]]
    ).all()
    with pytest.raises(LineListError, match=":1: lower energy is missing"):
        read_lines(write_table([record(lower_energy="#")], header()))


@pytest.mark.parametrize("text", ["0.0#5", "#0.05", "x", "nan", "0.1 0.2"])
def test_half_a_mark_is_no_number(record, header, write_table, text):
    path = write_table([record(), record()], header())
    path = write_table([record() + ",0.05", f"{record()},{text}"], header(("gamma_h2",)))
    with pytest.raises(LineListError, match="^" + re.escape(f"{path}:2: gamma h2 is not a number")):
        read_lines(path)


def test_names_in_upper_case_and_names_that_are_not_read(record, header, write_table):
    extra = ("gamma_H2", "n_H2", "Y_air", "gamma_HT_0_air_296", "deltap_air")
    lines = read_lines(write_table([record() + ",0.05,0.5,text,0.9,#"], header(extra)))
    assert sorted(lines.broadeners) == ["air", "h2", "self"]
    assert column(lines, "h2", "gamma")[0] == pytest.approx(0.05 / ATMOSPHERE, rel=1e-15)
    assert column(lines, "air", "gamma")[0] == pytest.approx(0.0651 / ATMOSPHERE, rel=1e-15)


def test_extra_columns_are_taken_in_the_order_of_extra(record, header, write_table):
    head = header(("n_h2", "gamma_h2"))
    head["order"] = ["gamma_h2", "n_h2", *head["order"]]
    lines = read_lines(write_table([record() + ",0.5,0.05"], head))
    assert column(lines, "h2", "exponent")[0] == 0.5
    assert column(lines, "h2", "gamma")[0] == pytest.approx(0.05 / ATMOSPHERE, rel=1e-15)


@pytest.mark.parametrize("separator", [";", "\t", " ", "|"])
def test_other_separators(record, header, write_table, separator):
    rows = [separator.join([record(), "0.05", "#"]), separator.join([record(), "0.05", ""])]
    lines = read_lines(write_table(rows, header(("gamma_h2", "n_h2"), extra_separator=separator)))
    assert len(lines) == 2
    np.testing.assert_allclose(column(lines, "h2", "gamma"), 0.05 / ATMOSPHERE, rtol=1e-15)


@pytest.mark.parametrize("tail", ["", ",0.05", ",0.05,0.5,0.1", "0.05,0.5", " ,0.05", ",0.05,0.5,"])
def test_another_number_of_columns_is_refused(record, header, write_table, tail):
    path = write_table([record() + ",0.05,0.5", record() + tail], header(("gamma_h2", "n_h2")))
    expected = f"{path}:2: record of the wrong length; expected 160 characters and 2 extra columns"
    with pytest.raises(LineListError, match="^" + re.escape(expected)):
        read_lines(path)
    lines = read_lines(path, bad_records="leave-out")
    assert lines.ledger.as_dict()["left_out"] == {"record of the wrong length": 1}
    assert lines.ledger.adds_up()


def test_columns_may_stand_anywhere(write_table):
    head = {
        "position": {"nu": 20, "sw": 0, "elower": 10, "local_iso_id": 19, "molec_id": 30, "gp": 40},
        "format": {
            "nu": "%10.4f",
            "sw": "%10.3E",
            "elower": "%9.3f",
            "local_iso_id": "%1d",
            "molec_id": "%2d",
            "gp": "%3d",
        },
    }
    row = " 1.500E-20" + "  123.456" + "3" + " 2100.5000" + " 5" + "        " + " 15"
    lines = read_lines(write_table([row], head))
    assert (lines.wavenumber[0], lines.strength[0], lines.lower_energy[0]) == (2100.5, 1.5e-20, 123.456)
    assert lines.isotopologues[0].local == 3
    assert lines.upper_weight[0] == 15.0
    assert np.isnan([lines.einstein_a[0], lines.lower_weight[0]]).all()
    assert lines.broadeners == {}


def test_a_table_without_its_header_is_refused(record, header, write_table):
    path = write_table([record()], header())
    head = path.with_suffix(".header")
    head.unlink()
    message = f"{path}: a hapi table needs its header beside it; expected {head}, found no such file"
    with pytest.raises(LineListError, match="^" + re.escape(message) + "$"):
        read_lines(path)
    head.mkdir()
    with pytest.raises(LineListError, match="^" + re.escape(message) + "$"):
        read_lines(path)


def changed(head, section, name, value):
    return {**head, section: {**head[section], name: value}}


def without(head, section, name):
    return {**head, section: {key: value for key, value in head[section].items() if key != name}}


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        (lambda head: "", "JSONDecodeError"),
        (lambda head: json.dumps(head)[:-20], "JSONDecodeError"),
        (lambda head: json.dumps(head) + "}", "JSONDecodeError"),
        (lambda head: "[" * 100_000, "RecursionError"),
        (lambda head: "[1, 2]", "TypeError"),
        (lambda head: "7", "TypeError"),
        (lambda head: "null", "TypeError"),
        (lambda head: "{}", "KeyError: 'position'"),
        (lambda head: {**head, "position": {}}, "no column molec_id, local_iso_id, nu, sw, elower"),
        (lambda head: {**head, "position": list(head["position"])}, "AttributeError"),
        (lambda head: {**head, "format": "%5d"}, "TypeError"),
        (lambda head: without(head, "position", "nu"), "no column nu"),
        (lambda head: without(head, "position", "local_iso_id"), "no column local_iso_id"),
        (lambda head: without(head, "format", "sw"), "KeyError: 'sw'"),
        (lambda head: changed(head, "format", "sw", "10.3E"), "impossible column format '10.3E'"),
        (lambda head: changed(head, "format", "sw", "%0d"), "impossible column format '%0d'"),
        (lambda head: changed(head, "format", "sw", "%5000d"), "impossible column format '%5000d'"),
        (lambda head: changed(head, "format", "sw", "a\nb"), r"impossible column format 'a\nb'"),
        (lambda head: changed(head, "format", "sw", None), "TypeError"),
        (lambda head: changed(head, "format", "local_iso_id", "%2d"), "starts inside another column"),
        (
            lambda head: {
                "position": {"molec_id": 0, "local_iso_id": 2, "nu": 9, "sw": 20, "elower": 30},
                "format": dict.fromkeys(["molec_id", "local_iso_id", "nu", "sw", "elower"], "%2d"),
            },
            "column 'local_iso_id' is 2 characters wide, not 1",
        ),
        (lambda head: changed(head, "position", "molec_id", -1), "column 'molec_id' starts inside another column or"),
        (lambda head: changed(head, "position", "nu", 10), "column 'sw' starts inside another column"),
        (lambda head: changed(head, "position", "nu", "x"), "ValueError"),
        (lambda head: changed(head, "position", "nu", None), "TypeError"),
        (lambda head: changed(head, "position", "nu", float("inf")), "OverflowError"),
        (lambda head: changed(head, "position", "nu", float("nan")), "ValueError"),
        (lambda head: changed(head, "position", "gpp", 10**12), "more than 10000"),
        (lambda head: {**head, "extra": 3}, "TypeError"),
        (lambda head: {**head, "extra": None}, "TypeError"),
        (lambda head: {**head, "extra": ["gamma_h2", "gamma_H2"]}, "column named twice: gamma_h2"),
        (lambda head: {**head, "extra": ["n_air"]}, "column named twice: exponent_air"),
        (lambda head: {**head, "extra_separator": ""}, "empty extra_separator"),
        (lambda head: {**head, "extra_separator": "é"}, "UnicodeEncodeError"),
    ],
)
def test_a_header_that_cannot_be_used(record, header, write_table, change, reason):
    path = write_table([record()], change(header()))
    start = f"{path.with_suffix('.header')}: not a header of a hapi table ("
    with pytest.raises(LineListError, match="^" + re.escape(start)) as caught:
        read_lines(path)
    assert reason in str(caught.value)
    assert len(str(caught.value).splitlines()) == 1


@pytest.mark.parametrize("content", [b"", b"\n\n"])
def test_an_empty_table_is_refused(header, write_table, content):
    path = write_table([], header(("gamma_h2",)))
    path.write_bytes(content)
    with pytest.raises(LineListError, match="^" + re.escape(f"{path}: holds no record")):
        read_lines(path)


@pytest.mark.parametrize("text", ["1e300", "5.5", "-5", "1000", "0"])
def test_a_molecule_number_that_cannot_be_right(header, write_table, text):
    names = ["molec_id", "local_iso_id", "nu", "sw", "elower"]
    head = {
        "position": dict(zip(names, (0, 9, 10, 20, 30), strict=True)),
        "format": dict(zip(names, ("%9d", "%1d", "%10d", "%10d", "%10d"), strict=True)),
    }
    tail = "1" + "2000.0".rjust(10) + "1E-20".rjust(10) + "100.0".rjust(10)
    path = write_table([f"{text:>9}{tail}"], head)
    with pytest.raises(LineListError, match=":1: molecule number is impossible; expected a whole number from 1 to 999"):
        read_lines(path)
    assert read_lines(write_table([f"{5:>9}{tail}"], head)).molecule_formula == "CO"
