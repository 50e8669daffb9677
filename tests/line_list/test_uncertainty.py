"""Codes of uncertainty in records and errors in catalogues, held against the meaning printed for each code."""

from __future__ import annotations

import bz2
import json
import math

import numpy as np
import pytest

from opacity.line_list.read import read_lines
from opacity.line_list.uncertainty import TooManyRecordsError, catalogue_errors, record_codes

from .conftest import FIELDS, format_record, hapi_header

NAN = math.nan
# Upper ends of the classes by code; Rothman et al. 2005, JQSRT 96, 139, table 5, from memory.
RELATIVE = {"4": 0.20, "5": 0.10, "6": 0.05, "7": 0.02, "8": 0.01}
POSITION = {"1": 1.0, "2": 0.1, "3": 1e-2, "4": 1e-3, "5": 1e-4, "6": 1e-5, "7": 1e-6, "8": 1e-7, "9": 1e-8}
SYMBOLS = "0123456789 x-"


def records(codes, **values):
    return [format_record(wavenumber=2100.0 + k, ierr=code, **values) for k, code in enumerate(codes)]


def stated(path, format="hitran"):
    return record_codes(path, format).of(read_lines(path, format))


def equal(found, wanted):
    assert np.array_equal(found, np.array(wanted), equal_nan=True)


@pytest.mark.parametrize("ending", ["", ".bz2"])
@pytest.mark.parametrize("place", range(4))
def test_each_code_is_the_upper_end_of_its_class(tmp_path, place, ending):
    codes = ["888888"[:place] + symbol + "888888"[place + 1 :] for symbol in SYMBOLS]
    # Blank lines count as lines of the text.
    text = "\n\n".join(records(codes)).encode() + b"\n"
    path = tmp_path / f"a.par{ending}"
    path.write_bytes(bz2.compress(text) if ending else text)
    found = stated(path)
    columns = [found.position, found.strength, found.width["air"], found.width["self"]]
    meaning = POSITION if place == 0 else RELATIVE
    equal(columns[place], [meaning.get(symbol, NAN) for symbol in SYMBOLS])
    for other, values in enumerate(columns):
        if other != place:
            equal(values, [(POSITION if other == 0 else RELATIVE)["8"]] * len(SYMBOLS))


def test_codes_stay_with_their_lines_in_any_order_and_selection(tmp_path):
    path = tmp_path / "a.par"
    order = np.random.default_rng(3).permutation(9)
    rows = records([f"4{k}0000" for k in range(9)])
    path.write_text("\n".join(rows[k] for k in order) + "\n")
    lines = read_lines(path)
    found = record_codes(path, "hitran").of(lines.select(lines.wavenumber > 2103.5))
    equal(found.strength, [RELATIVE.get(str(k), NAN) for k in range(4, 9)])


def test_a_width_that_the_record_does_not_give_has_no_code(tmp_path):
    path = tmp_path / "a.par"
    path.write_text("\n".join([*records(["888888"], gamma_self=0.0), *records(["888888"], gamma_air="     ")]) + "\n")
    found = stated(path)
    equal(found.width["air"], [0.01, NAN])
    equal(found.width["self"], [NAN, 0.01])


def hapi_table(tmp_path, header, rows):
    path = tmp_path / "a.data"
    path.with_suffix(".header").write_text(json.dumps(header) if isinstance(header, dict) else header)
    path.write_text("\n".join(rows) + "\n")
    return path


def test_a_hapi_table_says_where_its_codes_are(tmp_path):
    rows = [f"{row},0.05" for row in records(["375623", "000000"])]
    path = hapi_table(tmp_path, hapi_header(("gamma_h2",)), rows)
    found = stated(path, "hapi")
    equal(found.position, [1e-2, NAN])
    equal(found.strength, [0.02, NAN])
    equal(found.width["air"], [0.1, NAN])
    equal(found.width["self"], [0.05, NAN])


def test_a_hapi_table_without_the_column_has_none(tmp_path):
    header = hapi_header()
    header = json.loads(header) if isinstance(header, str) else header
    del header["position"]["ierr"]
    assert record_codes(hapi_table(tmp_path, header, records(["375623"])), "hapi") is None


@pytest.mark.parametrize("most", [2, 3])
def test_no_more_records_are_held_than_promised(tmp_path, most):
    path = tmp_path / "a.par"
    path.write_text("\n".join(records(["375623"] * 3)) + "\n")
    if most == 3:
        assert record_codes(path, "hitran", most).packed.size == 4
    else:
        with pytest.raises(TooManyRecordsError):
            record_codes(path, "hitran", most)


def test_errors_of_a_catalogue_in_both_units(tmp_path):
    # Invented numbers in the columns of the format: MHz, and cm-1 where the error is negative.
    row = "{:13.4f}{:8.4f} -5.0000 2   10.0000  3  28001 101"
    path = tmp_path / "c028001.cat"
    rows = [row.format(115271.2018, 0.0005), row.format(230538.0, 0.0), row.format(50.0, -0.0025)]
    path.write_text("\n".join(rows) + "\n")
    lines = read_lines(path, formula="CO", isotopologue="1")
    found = catalogue_errors(path).of(lines)
    assert found.position == pytest.approx([0.0005 / 29979.2458, NAN, 0.0025], rel=1e-6, nan_ok=True)
    for values in (found.strength, *found.width.values()):
        assert np.all(np.isnan(values))
    with pytest.raises(TooManyRecordsError):
        catalogue_errors(path, 2)


def test_the_codes_are_where_the_layout_has_them():
    assert sum(width for width, _, _ in list(FIELDS.values())[: list(FIELDS).index("ierr")]) == 127
