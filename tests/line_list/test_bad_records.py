"""A record that can't be right is named by file and line, or counted and left out; never read as something else."""

from __future__ import annotations

import re

import pytest

from opacity.errors import LineListError
from opacity.line_list.read import read_lines
from opacity.line_list.records import ReadOptions

NUMERIC = {
    "molecule": "molecule",
    "wavenumber": "wavenumber",
    "strength": "strength",
    "einstein_a": "einstein a",
    "gamma_air": "gamma air",
    "gamma_self": "gamma self",
    "lower_energy": "lower energy",
    "n_air": "exponent air",
    "delta_air": "shift air",
    "upper_weight": "upper weight",
    "lower_weight": "lower weight",
}


def judged(write_par, good, bad, reason):
    """With "stop" the second of three records is named, with "leave-out" it is counted and the others are kept."""
    path = write_par([good, bad, good])
    with pytest.raises(LineListError, match="^" + re.escape(f"{path}:2: {reason}")) as caught:
        read_lines(path)
    message = str(caught.value)
    assert len(message.splitlines()) == 1
    assert message.isprintable()
    assert "1 of 3 records are unusable" in message
    lines = read_lines(path, bad_records="leave-out")
    assert lines.record.tolist() == [1, 3]
    assert dict(lines.ledger.left_out) == {reason: 1}
    assert (lines.ledger.read, lines.ledger.kept) == (3, 2)
    assert lines.ledger.adds_up()


WORDS = ["x", "nan", "inf", "1_0", "0x1", "1,5", "--1", "1e", "1 1", "**", "#1", "1#", "\t1", "1D1", "1.-2"]
SHORT_WORDS = ["x", "na", "1_", "0x", "1,", "--", "1e", "**", "#1", "1#", "\t1", "5D"]


@pytest.mark.parametrize(
    ("field", "text"),
    [(field, word) for field in NUMERIC for word in (SHORT_WORDS if field == "molecule" else WORDS)],
)
def test_what_is_no_number(record, write_par, field, text):
    judged(write_par, record(), record(**{field: text}), f"{NUMERIC[field]} is not a number")


@pytest.mark.parametrize("field", [name for name in NUMERIC if name not in ("molecule", "n_air")])
@pytest.mark.parametrize("text", ["9E999", "1E400", "2+999"])
def test_a_number_beyond_all_bounds(record, write_par, field, text):
    judged(write_par, record(), record(**{field: text}), f"{NUMERIC[field]} is not finite")


@pytest.mark.parametrize("field", ["molecule", "wavenumber", "strength", "lower_energy"])
@pytest.mark.parametrize("text", [" ", "#", "##"])
def test_a_needed_number_that_is_missing(record, write_par, field, text):
    judged(write_par, record(), record(**{field: text}), f"{NUMERIC[field]} is missing")


@pytest.mark.parametrize(
    ("values", "reason"),
    [
        ({"wavenumber": 0.0}, "wavenumber is not above 0"),
        ({"wavenumber": -2.5}, "wavenumber is not above 0"),
        ({"strength": -1e-20}, "strength is negative"),
        ({"einstein_a": -1.0}, "Einstein A is negative"),
        ({"gamma_air": "-.07"}, "air width is negative"),
        ({"gamma_self": "-.07"}, "self width is negative"),
        ({"n_air": "10.1"}, "air temperature exponent is impossible"),
        ({"n_air": "-11."}, "air temperature exponent is impossible"),
        ({"molecule": "-5"}, "molecule number is impossible"),
        ({"molecule": "0"}, "molecule number is impossible"),
        ({"molecule": ".5"}, "molecule number is impossible"),
        ({"molecule": "99"}, "unknown isotopologue"),
        ({"code": "7"}, "unknown isotopologue"),
        ({"code": "0"}, "unknown isotopologue"),
        ({"code": "C"}, "unknown isotopologue"),
        ({"code": "a"}, "unknown isotopologue"),
        ({"code": " "}, "unknown isotopologue"),
        ({"code": "\0"}, "record with bytes that are no text"),
        ({"wavenumber": "2000.0\0"}, "record with bytes that are no text"),
        ({"strength": "\x001E-20"}, "record with bytes that are no text"),
        ({"wavenumber": "2000.0\xb2"}, "record with bytes that are no text"),
        ({"quanta": "caf\xe9"}, "record with bytes that are no text"),
        ({"quanta": "a\x0bb\x1cc\x85d\re"}, "record with bytes that are no text"),
        ({"quanta": "a\x1b[31mb"}, "record with bytes that are no text"),
    ],
)
def test_what_cannot_be_right(record, write_par, values, reason):
    judged(write_par, record(), record(**values), reason)


@pytest.mark.parametrize(
    "change", [lambda r: r[:-1], lambda r: r[:2], lambda r: r + "x", lambda r: r + "  1", lambda r: r + r]
)
def test_a_record_of_the_wrong_length(record, write_par, change):
    judged(write_par, record(), change(record()), "record of the wrong length")


def test_text_of_two_bytes_a_letter_makes_a_record_too_long(record, tmp_path):
    path = tmp_path / "a.par"
    path.write_text(record(quanta="café"), encoding="utf-8")
    with pytest.raises(LineListError, match=r":1: record of the wrong length; expected 160 characters, found \" 51"):
        read_lines(path)


def test_the_first_of_several_bad_records_is_named_and_all_are_counted(record, write_par):
    path = write_par(
        [record(), record(strength="-1E-20"), record(wavenumber="x"), record()[:50], record(wavenumber="y")]
    )
    with pytest.raises(LineListError, match=r":2: strength is negative; expected 0 or more, .* 4 of 5 records are"):
        read_lines(path)
    lines = read_lines(path, bad_records="leave-out")
    assert lines.ledger.as_dict() == {
        "read": 5,
        "kept": 1,
        "left_out": {
            "record of the wrong length": 1,
            "strength is negative": 1,
            "wavenumber is not a number": 2,
        },
        "notes": {},
    }


def test_a_record_with_several_faults_is_counted_once(record, write_par):
    path = write_par([record(), record(strength="x", wavenumber="-5", code="Z")])
    lines = read_lines(path, bad_records="leave-out")
    assert sum(lines.ledger.left_out.values()) == 1
    assert lines.ledger.adds_up()


def test_a_list_of_which_nothing_is_left_is_refused(record, write_par):
    path = write_par([record(strength="x")] * 3)
    with pytest.raises(LineListError, match=r"every record was left out; found 3 strength is not a number; mend"):
        read_lines(path, bad_records="leave-out")


@pytest.mark.parametrize(
    ("changes", "what"),
    [
        ({"strength": 1e-20, "lower_energy": 99999.9999}, "strength is impossible for its lower-state energy"),
        ({"strength": 1e-5}, "strength is impossible for its lower-state energy"),
        ({"lower_energy": -1.5}, "lower-state energy is impossible"),
    ],
)
def test_values_no_line_can_have_are_refused(record, write_par, changes, what):
    with pytest.raises(LineListError, match=rf"made\.par:1: {what}; expected"):
        read_lines(write_par([record(**changes)]))


def test_a_record_that_stands_in_two_files_is_refused(record, write_par, tmp_path):
    path = write_par([record(wavenumber=2000.0), record(wavenumber=2001.0)])
    copy = tmp_path / "copy.par"
    copy.write_bytes(path.read_bytes())
    with pytest.raises(LineListError, match=r"copy\.par:1: the same record stands in .*made\.par:1 too.*found 2 such"):
        read_lines([path, copy])
    twice = read_lines(write_par([record(), record(), record(wavenumber=2003.0)]))
    assert len(twice) == 3
    assert sum(count for note, count in twice.ledger.notes.items() if note.startswith("identical")) == 1


def test_lines_of_several_molecules_are_refused(record, write_par):
    path = write_par([record(), record(molecule=2)])
    with pytest.raises(LineListError, match=r"lines of several molecules; expected one molecule, found CO, CO2$"):
        read_lines(path)


def test_the_recipe_says_which_molecule(record, write_par):
    path = write_par([record(), record(molecule=2), record()])
    options = ReadOptions(formula="CO")
    with pytest.raises(LineListError) as caught:
        read_lines(path, options=options)
    assert str(caught.value) == (
        f"formula: {path}:2 is a record of another molecule; expected records of CO, found CO2 in 1 of 3 records;"
        " the formula or the list is wrong"
    )
    assert caught.value.argument == "formula"
    lines = read_lines(path, bad_records="leave-out", options=options)
    assert dict(lines.ledger.left_out) == {"record of another molecule": 1}
    assert lines.record.tolist() == [1, 3]


@pytest.mark.parametrize("code", ["1", "7"])
@pytest.mark.parametrize("molecule", [2, 99])
def test_a_list_all_of_another_molecule_is_refused_even_where_bad_records_are_left_out(
    record, write_par, molecule, code
):
    path = write_par([record(molecule=molecule, code=code)] * 2)
    found = {2: "CO2", 99: "molecule number 99"}[molecule]
    with pytest.raises(LineListError, match=f"expected records of CO, found {found} in 2 of 2 records; the formula"):
        read_lines(path, bad_records="leave-out", options=ReadOptions(formula="CO"))


def test_a_molecule_that_is_not_known_needs_formula_and_mass(record, write_par):
    path = write_par([record(molecule=99)])
    with pytest.raises(LineListError, match=":1: unknown isotopologue"):
        read_lines(path, options=ReadOptions(formula="XY"))
    lines = read_lines(path, options=ReadOptions(formula="XY", mass=50.0, isotopologue="X(2Y)"))
    one = lines.isotopologues[0]
    assert (one.formula, one.molecule_formula, one.mass, one.abundance, one.known) == ("X(2Y)", "XY", 50.0, 1.0, False)
    with pytest.raises(LineListError, match=":1: unknown isotopologue"):
        read_lines(write_par([record(molecule=99, code="2")]), options=ReadOptions(formula="XY", mass=50.0))
