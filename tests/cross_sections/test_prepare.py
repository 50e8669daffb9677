"""Lines made ready: abundances, strengths and widths at a node against the published formulas in 30 digits."""

from __future__ import annotations

import os
from dataclasses import replace
from pathlib import Path

import mpmath
import numpy as np
import pytest

from opacity.arguments import DefaultWidth
from opacity.cross_sections.prepare import abundance_factors, prepare
from opacity.errors import InputError, MoleculeError
from opacity.kernels.line_strength import strength_from_einstein_a
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.read import read_lines
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.hapi_tables import hapi
from opacity.molecule.isotopologue import Isotopologue, isotopologue

# Invented lines of two isotopologues of CO: nu, S, E'', isotopologue.
NU = np.array([4.0, 23.5, 2000.0, 2143.25, 2250.5, 4260.0])
S = np.array([3e-24, 2e-23, 1e-28, 4e-19, 5e-21, 3e-21])
E = np.array([0.0, 40.0, 9500.0, 3.85, 600.0, 1000.0])
ISO = np.array([0, 1, 0, 0, 1, 1])
AIR = {
    "gamma": 0.06 + 0.001 * np.arange(6),
    "exponent": 0.7 + 0.01 * np.arange(6),
    "shift": -0.003 + 0.001 * np.arange(6),
}
H2 = {
    "gamma": 0.07 - 0.001 * np.arange(6),
    "exponent": 0.6 - 0.01 * np.arange(6),
    "shift": 0.002 - 0.001 * np.arange(6),
}
SELF = {"gamma": np.full(6, 0.08), "exponent": np.full(6, np.nan), "shift": np.full(6, np.nan)}
CO = (isotopologue(5, 1), isotopologue(5, 2))


def made_list(isotopologues=CO, index=ISO):
    nothing = np.full(6, np.nan)
    return LineList(
        wavenumber=NU,
        strength=S,
        lower_energy=E,
        einstein_a=nothing,
        upper_weight=nothing,
        lower_weight=nothing,
        isotopologue=np.asarray(index, dtype=np.int16),
        isotopologues=isotopologues,
        basis=tuple(StrengthBasis(296.0, True, one.abundance) for one in isotopologues),
        broadeners={"air": BroadenerColumns(**AIR), "h2": BroadenerColumns(**H2), "self": BroadenerColumns(**SELF)},
        record=np.arange(1, 7),
        file=np.zeros(6, dtype=np.int16),
        files=("made",),
        ledger=Ledger(read=6, kept=6),
    )


def ready(lines=None, **changes):
    choices = {"partition_function": "TIPS-2021", "abundance": "terrestrial", "broadeners": {"air": 1.0}}
    return prepare(made_list() if lines is None else lines, **{**choices, **changes})


def precise_strength(row, temperature):
    """S(T) of one line in 30 digits (Rothman et al. 1998, JQSRT 60, 665, appendix; constants of CODATA 2018)."""
    with mpmath.workdps(30):
        c2 = mpmath.mpf("6.62607015e-34") * 29979245800 / mpmath.mpf("1.380649e-23")
        t, t0 = mpmath.mpf(temperature), mpmath.mpf(296)
        nu, energy = mpmath.mpf(NU[row]), mpmath.mpf(E[row])
        local = int(ISO[row]) + 1
        q, q0 = (mpmath.mpf(hapi().partitionSum(5, local, float(x), version=2021)) for x in (t, t0))
        boltzmann = mpmath.exp(-c2 * energy / t) / mpmath.exp(-c2 * energy / t0)
        emission = (1 - mpmath.exp(-c2 * nu / t)) / (1 - mpmath.exp(-c2 * nu / t0))
        return mpmath.mpf(S[row]) * q0 / q * boltzmann * emission


@pytest.mark.parametrize("temperature", [70.0, 296.0, 3000.0])
def test_strengths_follow_the_published_formula(temperature):
    found = ready().strengths(temperature)
    for row in range(6):
        # The exponent c2 E'' (1/T - 1/T0) reaches 150, of which double precision keeps 14 digits.
        assert float(found[row] / precise_strength(row, temperature)) == pytest.approx(1.0, rel=1e-13)


def test_strengths_at_296_kelvin_are_those_of_the_list():
    np.testing.assert_allclose(ready().strengths(296.0), S, rtol=1e-15)
    np.testing.assert_array_equal(ready().strength, S)


def precise_widths(row, temperature, pressure, mixture):
    """Doppler and pressure half-widths and centre of one line in 30 digits (Rothman et al. 1998, appendix)."""
    with mpmath.workdps(30):
        t, p = mpmath.mpf(temperature), mpmath.mpf(pressure)
        lorentz = sum(
            p * x * mpmath.mpf(one["gamma"][row]) * (296 / t) ** mpmath.mpf(one["exponent"][row]) for one, x in mixture
        )
        centre = mpmath.mpf(NU[row]) + p * sum(mpmath.mpf(x) * mpmath.mpf(one["shift"][row]) for one, x in mixture)
        mass = mpmath.mpf(CO[ISO[row]].mass) / 1000
        gas = mpmath.mpf("1.380649e-23") * mpmath.mpf("6.02214076e23")
        doppler = centre / 299792458 * mpmath.sqrt(2 * mpmath.log(2) * gas * t / mass)
        return float(doppler), float(lorentz), float(centre)


@pytest.mark.parametrize("temperature", [70.0, 296.0, 3000.0])
@pytest.mark.parametrize("pressure", [1e-6, 1.0, 100.0])
def test_widths_and_centres_follow_the_published_formulas(temperature, pressure):
    node = ready(broadeners={"air": 0.3, "H2": 0.7}).at(temperature, pressure)
    assert (node.temperature, node.pressure) == (temperature, pressure)
    np.testing.assert_array_equal(node.wavenumber, NU)
    for row in range(6):
        doppler, lorentz, centre = precise_widths(row, temperature, pressure, ((AIR, 0.3), (H2, 0.7)))
        assert node.doppler[row] == pytest.approx(doppler, rel=1e-14)
        assert node.lorentz[row] == pytest.approx(lorentz, rel=1e-14)
        assert node.centre[row] == pytest.approx(centre, rel=1e-15)


def test_the_doppler_width_of_carbon_monoxide_as_printed():
    # alpha = 3.581163e-7 nu sqrt(T/M), the usual form of the formula.
    node = ready(broadeners={"H2": 1.0}).at(1000.0, 0.0)
    mass = np.array([27.994915, 28.998270])[ISO]
    np.testing.assert_allclose(node.doppler, 3.581163e-7 * NU * np.sqrt(1000.0 / mass), rtol=2e-7)
    np.testing.assert_array_equal(node.lorentz, 0.0)


def test_a_shift_that_outgrows_the_line_leaves_a_doppler_width():
    columns = {"air": BroadenerColumns(np.full(6, 0.07), np.full(6, 0.7), np.full(6, -1.0))}
    lines = made_list()
    lines.broadeners.clear()
    lines.broadeners.update(columns)
    node = ready(lines).at(296.0, 100.0)
    assert node.centre[0] == -96.0
    plain = ready().at(296.0, 0.0)
    assert node.doppler[0] == pytest.approx(0.5 * plain.doppler[0], rel=1e-15)
    assert node.doppler[3] == pytest.approx(plain.doppler[3] * (NU[3] - 100.0) / NU[3], rel=1e-14)


def test_a_missing_shift_is_0_and_counted():
    found = ready(broadeners={"self": 1.0})
    np.testing.assert_array_equal(found.at(296.0, 50.0).centre, NU)
    counted = {one.what: one.lines for one in found.assumptions}
    assert counted == {
        "no temperature exponent for self given: that of air taken": 6,
        "no pressure shift by self given: taken as 0": 6,
    }


def test_strengths_computed_before_are_taken_as_given():
    given = np.arange(6.0)
    assert ready().at(500.0, 1.0, given).strength is given
    np.testing.assert_array_equal(ready().at(500.0, 1.0).strength, ready().strengths(500.0))


def test_one_isotopologue_alone_has_the_strength_over_its_abundance():
    lines = made_list((CO[1],), np.zeros(6))
    np.testing.assert_array_equal(ready(lines, abundance="pure").strength, S * (1.0 / CO[1].abundance))
    with pytest.raises(
        InputError, match=r'^abundance: "pure" needs lines of one isotopologue; expected one, found \(12C\)\(16O\), '
    ):
        ready(abundance="pure")


@pytest.mark.parametrize("names", [("(12C)(16O)", "(13C)(16O)"), ("1", "2"), ("1", "(13C)(16O)")])
def test_fractions_replace_the_terrestrial_ones(names):
    found = ready(abundance=dict(zip(names, (0.9, 0.1), strict=True)))
    factor = np.array([0.9 / CO[0].abundance, 0.1 / CO[1].abundance])[ISO]
    np.testing.assert_array_equal(found.strength, S * factor)
    same = ready(abundance=dict(zip(names, (CO[0].abundance, CO[1].abundance), strict=True)))
    np.testing.assert_array_equal(same.strength, S)


@pytest.mark.parametrize("abundance", [{"2": 1.0}, {"1": 0.0, "2": 1.0}])
def test_an_isotopologue_that_is_not_in_the_mixture_is_left_out_and_counted(abundance):
    found = ready(abundance=abundance)
    np.testing.assert_array_equal(found.wavenumber, NU[ISO == 1])
    np.testing.assert_array_equal(found.strength, S[ISO == 1] / CO[1].abundance)
    np.testing.assert_array_equal(found.mass, CO[1].mass)
    assert found.isotopologues == (CO[1],)
    assert len(found.partition) == 1
    assert found.isotopologue.tolist() == [0, 0, 0]
    assert found.ledger.as_dict()["left_out"] == {"isotopologue not in the mixture chosen": 3}
    assert found.ledger.adds_up()
    whole = ready(abundance={"1": 0.5, "2": 0.5})
    np.testing.assert_allclose(found.strengths(700.0), 2.0 * whole.strengths(700.0)[ISO == 1], rtol=1e-15)


@pytest.mark.parametrize(
    ("abundance", "message"),
    [
        ({"3": 1.0}, r"^abundance: no lines of isotopologue 3; expected \(12C\)\(16O\) \(1\), \(13C\)\(16O\) \(2\)$"),
        ({"1": 0.5, "(14C)(16O)": 0.5}, r"^abundance: no lines of isotopologue \(14C\)\(16O\); expected "),
        ({"1": 0.5, "(12C)(16O)": 0.5}, r"^abundance: \(12C\)\(16O\) is given twice; name it by formula or by number$"),
        ("solar", r'^abundance: unknown; expected "terrestrial", "pure" or fractions by isotopologue, found solar$'),
    ],
)
def test_abundances_that_cannot_be_used(abundance, message):
    with pytest.raises(InputError, match=message):
        ready(abundance=abundance)


def test_a_molecule_that_is_not_known_keeps_its_strengths():
    one = Isotopologue(99, 1, "X(2Y)", "XY", 50.0, 1.0, known=False)
    basis = (StrengthBasis(296.0, True, 1.0),)
    assert abundance_factors((one,), basis, "pure") == abundance_factors((one,), basis, "terrestrial") == [1.0]


@pytest.mark.parametrize(
    "broadeners",
    [
        {},
        {"air": 0.5},
        {"air": 0.5, "H2": 0.6},
        {"air": 1.5, "H2": -0.5},
        {"air": 1.0, "H2": 0.0},
        {"air": float("nan")},
        {"air": float("inf")},
        {"air": 1.0 + 2e-6},
    ],
)
def test_what_is_no_mixture(broadeners):
    with pytest.raises(
        InputError, match=r"^broadeners: not mole fractions; expected values above 0 with sum 1, found "
    ):
        ready(broadeners=broadeners)


def test_widths_that_are_not_to_be_had_and_their_default():
    with pytest.raises(MoleculeError, match=r"^broadeners: 6 of 6 lines have no half-width by He; expected columns"):
        ready(broadeners={"He": 1.0})
    found = ready(broadeners={"He": 1.0}, defaults={"He": DefaultWidth(0.05, 0.5, "from memory")})
    np.testing.assert_allclose(found.at(1184.0, 2.0).lorentz, 2.0 * 0.05 * 0.5, rtol=1e-15)


def test_partition_functions_are_those_chosen(tmp_path):
    named = ready(partition_function="TIPS-2025")
    assert [one.source for one in named.partition] == ["TIPS-2025 (12C)(16O)", "TIPS-2025 (13C)(16O)"]
    path = tmp_path / "made.pf"
    path.write_text("".join(f"{t} {2.0 * t}\n" for t in range(10, 2000, 10)))
    from_file = ready(made_list((CO[0],), np.zeros(6)), partition_function=path)
    # Q = 2 T: between 296 and 592 K it doubles.
    plain = S * np.exp(-1.438776877 * E * (1 / 592 - 1 / 296))
    emission = np.expm1(-1.438776877 * NU / 592) / np.expm1(-1.438776877 * NU / 296)
    np.testing.assert_allclose(from_file.strengths(592.0), 0.5 * plain * emission, rtol=1e-8)
    with pytest.raises(
        InputError, match=r'^partition_function: unknown source; expected "TIPS-2021" or "TIPS-2025" or'
    ):
        ready(partition_function="TIPS-2011")
    unknown = Isotopologue(99, 1, "X(2Y)", "XY", 50.0, 1.0, known=False)
    with pytest.raises(MoleculeError, match=r"^partition_function: TIPS-2021 does not hold XY; give a file"):
        ready(made_list((unknown,), np.zeros(6)))


def test_a_temperature_at_which_the_partition_function_is_not_valid():
    with pytest.raises(MoleculeError, match=r"^partition function TIPS-2021 \(12C\)\(16O\): temperature outside its"):
        ready().at(10.0, 1.0)


def test_no_lines():
    found = ready(made_list().select(np.zeros(6, dtype=bool), "all of them"))
    assert len(found) == 0
    node = found.at(500.0, 1.0)
    assert node.strength.shape == node.doppler.shape == node.lorentz.shape == (0,)
    assert found.ledger.adds_up()


def test_notes_of_the_list_are_no_assumptions_and_an_unknown_energy_is_one():
    lines = made_list()
    lines.ledger.notes["something seen"] = 2
    assert ready(lines).assumptions == ()
    unknown = replace(lines, lower_energy=np.where(ISO == 0, -1.0, E))
    (assumed,) = ready(unknown).assumptions
    assert (assumed.what, assumed.lines) == ("lower-state energy below 0 (unknown): used as it stands", 3)


def test_what_has_no_line_left_decides_nothing():
    """An isotopologue that a selection drops is neither counted for "pure" nor given a partition function."""
    lines = made_list().select(ISO == 1, "dropped")
    assert (lines.isotopologues, lines.dropped) == ((CO[1],), (CO[0],))
    assert lines.isotopologue.tolist() == [0, 0, 0]
    found = ready(lines, abundance="pure")
    np.testing.assert_array_equal(found.strength, S[ISO == 1] / CO[1].abundance)
    np.testing.assert_array_equal(found.mass, CO[1].mass)
    assert [one.source for one in found.partition] == ["TIPS-2021 (13C)(16O)"]
    # What was dropped may still be named, and nothing else.
    shared = ready(lines, abundance={"1": 0.9, "(13C)(16O)": 0.1})
    np.testing.assert_allclose(shared.strength, 0.1 * found.strength, rtol=1e-15)
    with pytest.raises(InputError, match=r"^abundance: no lines of isotopologue 3; expected \(13C\)\(16O\) \(2\), "):
        ready(lines, abundance={"2": 0.5, "3": 0.5})


@pytest.mark.real_lines
@pytest.mark.skipif("OPACITY_REAL_LINES" not in os.environ, reason="OPACITY_REAL_LINES names no folder of real lists")
@pytest.mark.parametrize("temperature", [296.0, 1000.0])
def test_strengths_of_real_carbon_monoxide_follow_from_einstein_a(temperature):
    path = Path(os.environ["OPACITY_REAL_LINES"]) / "CO.par"
    if not path.is_file():
        pytest.skip(f"{path} is not there")
    lines = read_lines(path)
    found = prepare(lines, partition_function="TIPS-2021", abundance="terrestrial", broadeners={"air": 1.0})
    place = lines.isotopologue
    abundance = np.array([one.abundance for one in lines.isotopologues])[place]
    partition = np.array([q(temperature) for q in found.partition])[place]
    computed = strength_from_einstein_a(
        lines.wavenumber, lines.lower_energy, lines.einstein_a, lines.upper_weight, abundance, temperature, partition
    )
    assert len(lines) > 200
    # Both S and A are printed with four digits, 5e-4 each at worst; edition differences add to it.
    np.testing.assert_allclose(computed, found.strengths(temperature), rtol=2e-3)
