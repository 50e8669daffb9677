"""Published band strengths: units, limits of judging, and the mix-up of reference temperatures."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from opacity.check.band_strength import check_band, integral_between
from opacity.check.run import run_checks
from opacity.recipe.model import BandStrength
from opacity.units import BAND_STRENGTH_UNITS

RANGE = (2146.5, 2147.7)
FACTORS = {
    # Loschmidt constant 2.686780111e19 cm-3 at 273.15 K and 1 atm, Avogadro constant 6.02214076e23 (CODATA 2018).
    "cm/molecule": 1.0,
    "km/mol": 6.02214076e23 * 1e-5,
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


def test_ends_between_points_count_in_part():
    nu, values = np.array([10.0, 11.0, 12.0, 13.0]), np.array([0.0, 2.0, 4.0, 2.0])
    assert integral_between(nu, values, 10.0, 13.0) == pytest.approx(1.0 + 3.0 + 3.0)
    assert integral_between(nu, values, 10.5, 12.5) == pytest.approx(0.75 + 3.0 + 1.75)
    assert integral_between(nu, values, 11.25, 11.75) == pytest.approx(0.5 * 3.0)
    assert integral_between(nu, values, 11.0, 12.0) == pytest.approx(3.0)
