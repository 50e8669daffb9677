"""Published band strengths: units, limits of judging, and the mix-up of reference temperatures."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest

from opacity.check.band_strength import check_band, integral_between
from opacity.check.run import run_checks
from opacity.molecule.isotopologue import isotopologue
from opacity.recipe.model import BandStrength
from opacity.units import BAND_STRENGTH_UNITS

RANGE = (2146.5, 2147.7)
FACTORS = {
    # Loschmidt constant 2.686780111e19 cm-3 at 273.15 K and 1 atm, Avogadro constant 6.02214076e23 (CODATA 2018).
    "cm/molecule": 1.0,
    "km/mol": 6.02214076e23 * 1e-5,
    "cm/mol": 6.02214076e23,
    "cm-2 atm-1 (273.15 K)": 2.686780111e19,
    "cm-2 atm-1 (296 K)": 2.686780111e19 * 273.15 / 296.0,
    "cm-2 atm-1 (300 K)": 2.686780111e19 * 273.15 / 300.0,
    "cm-2 amagat-1": 2.686780111e19,
}


def strength_in(case, temperature=296.0):
    """The strength (cm/molecule) of the lines with their centre in RANGE."""
    inside = (case.lines.wavenumber > RANGE[0]) & (case.lines.wavenumber < RANGE[1])
    return float(case.lines.strengths(temperature)[inside].sum())


def band_of(case, strength=None, unit="cm/molecule", **changes):
    value = strength_in(case) if strength is None else strength
    band = BandStrength("R(0)", RANGE, value, unit, 296.0, 0.007, "the list itself")
    return replace(band, **changes)


def judged(case, band, values=None, pressure=0.01):
    return check_band(band, values or case.values, pressure, case.lines, case.recipe.profile)


def test_every_unit_is_tested():
    assert set(FACTORS) == set(BAND_STRENGTH_UNITS)


@pytest.mark.parametrize("unit", FACTORS)
def test_a_strength_agrees_in_every_unit(small, unit):
    row = judged(small, band_of(small, strength_in(small) * FACTORS[unit], unit))
    assert row.verdict == "agrees"
    # Wings: 0.6 cm-1 beyond the line 2 gamma/(pi d) = 7e-4 is lost, at 0.01 bar.
    assert abs(row.value) < 3e-3
    assert row.limit == pytest.approx(0.014)
    assert "cm/molecule" in row.detail
    assert "296 K, 0.01 bar; the list itself" in row.detail


@pytest.mark.parametrize(
    "meant, written", [("cm-2 atm-1 (273.15 K)", "cm-2 atm-1 (296 K)"), ("cm-2 atm-1 (296 K)", "cm-2 atm-1 (273.15 K)")]
)
def test_the_mix_up_of_reference_temperatures_is_caught(small, meant, written):
    row = judged(small, band_of(small, strength_in(small) * FACTORS[meant], written))
    assert row.verdict == "differs"
    assert abs(row.value) == pytest.approx(0.08, abs=0.006)


def test_within_two_standard_deviations_it_agrees_beyond_it_differs(small):
    for factor, verdict in ((1.010, "agrees"), (1.017, "differs"), (0.990, "agrees"), (0.983, "differs")):
        assert judged(small, band_of(small, strength_in(small) * factor)).verdict == verdict


@pytest.mark.parametrize("limits", [(2144.0, 2147.0), (2147.0, 2149.001), (1000.0, 1100.0)])
def test_a_band_beyond_the_table_cannot_be_judged(small, limits):
    row = judged(small, band_of(small, range=limits))
    assert row.verdict == "cannot judge"
    assert row.detail == f"{limits[0]:g}-{limits[1]:g} cm-1 is not all inside the table (2145-2149)"


@pytest.mark.parametrize("temperature", [295.9, 480.1])
def test_a_temperature_beyond_the_table_cannot_be_judged(small, temperature):
    row = judged(small, band_of(small, temperature=temperature))
    assert row.verdict == "cannot judge"
    assert row.detail == f"the table has no spectrum at {temperature:g} K"


def test_between_distant_nodes_the_interpolation_is_named_and_not_the_table(make_case):
    case = make_case(nodes="temperature = [150.0, 700.0]\npressure = [0.01]")
    row = judged(case, band_of(case))
    assert row.verdict == "cannot judge"
    assert row.detail.startswith("no node at 296 K, and interpolating between nodes changes the band by -")


def test_between_near_nodes_a_band_is_judged_and_the_cost_told(make_case):
    case = make_case(nodes="temperature = [290.0, 302.0]\npressure = [0.01]")
    row = judged(case, band_of(case))
    assert row.verdict == "agrees"
    assert "296 K, interpolated at a cost of -" in row.detail
    assert judged(case, band_of(case, 1.03 * strength_in(case))).verdict == "differs"


def test_along_a_profile_only_its_own_nodes_serve(make_case):
    case = make_case(nodes="nodes = [[296.0, 0.01], [480.0, 0.01]]")
    assert judged(case, band_of(case)).verdict == "agrees"
    assert judged(case, band_of(case, temperature=380.0)).detail == "the table has no spectrum at 380 K"


def test_the_pressure_that_resolves_the_lines_is_chosen(make_case):
    # At 0.01 bar half of the strength is not resolved, at 1 bar the wings leave the band: 0.2 bar is best.
    case = make_case(
        wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.01 }",
        nodes="temperature = [296.0]\npressure = [0.01, 0.2, 1.0]",
    )
    recipe = replace(case.recipe, band_strengths=(band_of(case, uncertainty=0.05),))
    row = run_checks(case.values, recipe, case.lines, 1).results[2]
    assert row.verdict == "agrees"
    assert "296 K, 0.2 bar" in row.detail


def test_a_step_that_resolves_no_pressure_cannot_be_judged(make_case):
    case = make_case(wavenumber="{ start = 2145.0, stop = 2149.0, step = 1.0 }")
    recipe = replace(case.recipe, band_strengths=(band_of(case),))
    row = run_checks(case.values, recipe, case.lines, 1).results[2]
    assert row.verdict == "cannot judge"
    assert row.detail == "the step is too coarse for the lines at every pressure"


def test_a_band_of_one_isotopologue_is_corrected_for_abundance(make_case):
    case = make_case()
    iso = case.lines.isotopologues[0]
    band = band_of(case, isotopologue=iso.formula)  # the case is pure: fraction 1
    assert check_band(band, case.values, 0.01, case.lines, case.recipe.profile).verdict == "agrees"
    # The same values taken for those of a mixture of which the isotopologue is half: twice as much a molecule of it.
    half = check_band(band, case.values, 0.01, case.lines, case.recipe.profile, abundance={iso.formula: 0.5})
    assert half.value == pytest.approx(1.0, abs=5e-3)
    assert "of (12C)(16O) alone, abundance 0.5, +" in half.detail
    natural = replace(band, isotopologue="natural")
    row = check_band(natural, case.values, 0.01, case.lines, case.recipe.profile, abundance="terrestrial")
    assert row.value == pytest.approx(1.0 / 0.98654 - 1.0, abs=3e-3)
    assert "of the natural mixture, of which the table holds 98.65 %" in row.detail
    other = replace(band, isotopologue="(13C)(16O)")
    row = check_band(other, case.values, 0.01, case.lines, case.recipe.profile)
    assert (row.verdict, row.detail) == ("cannot judge", "the table holds no line of (13C)(16O) in the band")


def test_other_isotopologues_are_taken_off_a_band_of_one(make_case):
    """One of the band's lines given to (13C)(16O): its strength is not of the band."""
    case = make_case()
    lines, heavy = case.lines, isotopologue(5, 2)
    wide = (2145.2, 2148.8)
    inside = np.flatnonzero((lines.wavenumber > wide[0]) & (lines.wavenumber < wide[1]))
    weakest = inside[np.argmin(lines.strength[inside])]
    number = np.zeros(len(lines), dtype=np.int16)
    number[weakest] = 1
    both = replace(
        lines,
        isotopologue=number,
        isotopologues=(*lines.isotopologues, heavy),
        basis=(*lines.basis, *lines.basis),
        partition=(*lines.partition, *lines.partition),
    )
    band = band_of(case, isotopologue=lines.isotopologues[0].formula, range=wide)
    plain = judged(case, band)
    row = check_band(band, case.values, 0.01, both, case.recipe.profile)
    taken = float(lines.strengths(296.0)[weakest])
    assert taken > 0.0
    assert (plain.value - row.value) * strength_in(case) == pytest.approx(taken, rel=1e-6)
    assert "of other isotopologues" in row.detail


@pytest.mark.parametrize(
    "factor, verdict", [(1.45, "agrees"), (1.55, "differs"), (1.0 / 1.45, "agrees"), (1.0 / 1.55, "differs")]
)
def test_a_value_from_memory_or_without_uncertainty_finds_factors_only(small, factor, verdict):
    for change, why in (
        ({"source": "from memory"}, "a value from memory"),
        ({"uncertainty": None}, "no uncertainty is published"),
    ):
        row = judged(small, band_of(small, strength_in(small) / factor, **change))
        assert row.verdict == verdict
        assert f"times as much ({why}: within a factor 1.5 is taken to agree)" in row.detail


def test_the_difference_is_told_in_per_cent_and_in_uncertainties(small):
    row = judged(small, band_of(small, strength_in(small) / 1.1))
    percent, deviations = re.search(r" cm/molecule, (\S+) % \((\S+) uncertainties\); 296 K", row.detail).groups()
    assert float(percent) == pytest.approx(10.0, abs=0.4)
    assert float(deviations) == pytest.approx(float(percent) / 0.7, abs=0.06)


def test_ends_between_points_count_in_part():
    nu, values = np.array([10.0, 11.0, 12.0, 13.0]), np.array([0.0, 2.0, 4.0, 2.0])
    assert integral_between(nu, values, 10.0, 13.0) == pytest.approx(1.0 + 3.0 + 3.0)
    assert integral_between(nu, values, 10.5, 12.5) == pytest.approx(0.75 + 3.0 + 1.75)
    assert integral_between(nu, values, 11.25, 11.75) == pytest.approx(0.5 * 3.0)
    assert integral_between(nu, values, 11.0, 12.0) == pytest.approx(3.0)
