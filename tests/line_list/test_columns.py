"""What stands in a 160-character record is what the list holds, in the units used inside."""

from __future__ import annotations

import numpy as np
import pytest

from opacity.line_list.read import read_lines

# One standard atmosphere is 1.01325 bar by definition.
ATMOSPHERE = 1.01325

WRITTEN_OUT = (
    " 2A  667.123456 1.234E-21 5.678E-02.07500.100  123.45670.75-.001234"
    + "quanta up".ljust(30)
    + "quanta low".ljust(30)
    + "465543"
    + " 7 7 5 2 2 7"
    + " "
    + "   15.0"
    + "   13.0"
)


def test_every_column_of_a_record_written_out(write_par):
    lines = read_lines(write_par([WRITTEN_OUT]))
    assert len(lines) == 1
    assert lines.molecule_formula == "CO2"
    assert (lines.isotopologues[0].molecule, lines.isotopologues[0].local) == (2, 11)
    assert lines.wavenumber[0] == 667.123456
    assert lines.strength[0] == 1.234e-21
    assert lines.einstein_a[0] == 5.678e-2
    assert lines.lower_energy[0] == 123.4567
    assert lines.upper_weight[0] == 15.0
    assert lines.lower_weight[0] == 13.0
    air, self_ = lines.broadeners["air"], lines.broadeners["self"]
    assert air.gamma[0] == pytest.approx(0.075 / ATMOSPHERE, rel=1e-15)
    assert air.exponent[0] == 0.75
    assert air.shift[0] == pytest.approx(-0.001234 / ATMOSPHERE, rel=1e-15)
    assert self_.gamma[0] == pytest.approx(0.1 / ATMOSPHERE, rel=1e-15)
    assert np.isnan(self_.exponent[0])
    assert np.isnan(self_.shift[0])
    assert lines.record[0] == 1
    assert lines.ledger.as_dict() == {"read": 1, "kept": 1, "left_out": {}, "notes": {}}


def test_many_records_keep_their_own_values(record, write_par):
    rng = np.random.default_rng(5)
    nu = np.round(np.sort(rng.uniform(1.0, 9000.0, 300)), 6)
    energy = np.round(rng.uniform(0.0, 6000.0, 300), 4)
    gamma = np.round(rng.uniform(0.01, 0.2, 300), 4)
    lines = read_lines(
        write_par(
            [record(wavenumber=a, lower_energy=b, gamma_air=c) for a, b, c in zip(nu, energy, gamma, strict=True)]
        )
    )
    np.testing.assert_array_equal(lines.wavenumber, nu)
    np.testing.assert_array_equal(lines.lower_energy, energy)
    np.testing.assert_allclose(lines.broadeners["air"].gamma, gamma / ATMOSPHERE, rtol=1e-15)


@pytest.mark.parametrize(("code", "local"), [(str(n), n) for n in range(1, 10)] + [("0", 10), ("A", 11), ("B", 12)])
def test_isotopologue_codes_of_carbon_dioxide(record, write_par, code, local):
    lines = read_lines(write_par([record(molecule=2, code=code)]))
    assert [one.local for one in lines.isotopologues] == [local]
    assert lines.isotopologues[0].molecule_formula == "CO2"


def test_each_line_points_to_its_isotopologue(record, write_par):
    codes = ["2", "1", "3", "1", "2"]
    lines = read_lines(write_par([record(code=code, wavenumber=100.0 + n) for n, code in enumerate(codes)]))
    assert [str(lines.isotopologues[i].local) for i in lines.isotopologue] == codes
    assert len(lines.isotopologues) == 3


@pytest.mark.parametrize(
    ("text", "value"),
    [
        (" 1.234-101", 1.234e-101),
        (" 1.234-010", 1.234e-10),
        ("1.5e-20", 1.5e-20),
        ("+2.E-22", 2e-22),
        (".5E-20", 5e-21),
        ("0", 0.0),
        ("1E-999", 0.0),
    ],
)
def test_spellings_of_a_number(record, write_par, text, value):
    lines = read_lines(write_par([record(strength=text), record(strength="1.000E-20", wavenumber=9000.0)]))
    assert lines.strength.tolist() == [value, 1e-20]


@pytest.mark.parametrize(("field", "kind"), [("gamma_air", "gamma"), ("delta_air", "shift")])
@pytest.mark.parametrize("text", ["", "0.0", ".000"])
def test_a_width_or_shift_of_0_or_blank_is_not_given(record, write_par, field, kind, text):
    lines = read_lines(write_par([record(**{field: text}), record(wavenumber=9000.0)]))
    column = getattr(lines.broadeners["air"], kind)
    assert np.isnan(column).tolist() == [True, False]


@pytest.mark.parametrize("field", ["einstein_a", "upper_weight", "lower_weight"])
def test_optional_columns_may_be_blank(record, write_par, field):
    lines = read_lines(write_par([record(**{field: " "})]))
    assert np.isnan(getattr(lines, field)[0])
    assert lines.strength[0] == 1.234e-21


def test_an_exponent_of_0_is_a_value(record, write_par):
    assert read_lines(write_par([record(n_air=0.0)])).broadeners["air"].exponent[0] == 0.0


def test_notes_count_strengths_of_0_and_disorder(record, write_par):
    lines = read_lines(
        write_par(
            [
                record(wavenumber=300.0, strength=0.0),
                record(wavenumber=100.0, lower_energy=-1.0),
                record(wavenumber=200.0, lower_energy=-1.0),
            ]
        )
    )
    assert lines.ledger.as_dict() == {
        "read": 3,
        "kept": 3,
        "left_out": {},
        "notes": {
            "out of order in wavenumber: sorted": 1,
            "strength 0: contributes nothing": 1,
        },
    }
    assert lines.wavenumber.tolist() == [100.0, 200.0, 300.0]
    assert lines.record.tolist() == [2, 3, 1]
    assert lines.strength.tolist() == [1.234e-21, 1.234e-21, 0.0]


def test_equal_wavenumbers_keep_their_order(record, write_par):
    lines = read_lines(write_par([record(wavenumber=5.0, strength=n * 1e-20) for n in (3.0, 1.0, 2.0)]))
    np.testing.assert_allclose(lines.strength, [3e-20, 1e-20, 2e-20], rtol=1e-15)
