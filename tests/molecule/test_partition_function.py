"""TIPS partition functions: right values, and none outside the range in which an edition can be trusted."""

from __future__ import annotations

import math
import subprocess
import sys
from types import SimpleNamespace

import numpy as np
import pytest

from opacity.constants import SECOND_RADIATION
from opacity.errors import MoleculeError
from opacity.molecule import partition_function as pf
from opacity.molecule.hapi_tables import hapi
from opacity.molecule.isotopologue import Isotopologue, isotopologue

EDITIONS = {"TIPS-2021": 2021, "TIPS-2025": 2025}


@pytest.mark.parametrize(
    ("molecule", "value"),
    # Q(296 K) of the main isotopologue as HITRAN prints it (from memory).
    [(1, 174.58), (2, 286.09), (5, 107.42), (6, 590.48)],
)
@pytest.mark.parametrize("edition", EDITIONS)
def test_values_at_296_kelvin(edition, molecule, value):
    assert pf.tips(edition, isotopologue(molecule, 1))(296.0) == pytest.approx(value, rel=1e-4)


@pytest.mark.parametrize("edition", EDITIONS)
@pytest.mark.parametrize("key", [(1, 1), (5, 2), (2, 12), (13, 1)])
def test_values_are_those_of_the_edition_named(edition, key):
    q = pf.tips(edition, isotopologue(*key))
    for temperature in (20.0, 77.7, 296.0, 1234.5, 3000.0):
        assert q(temperature) == hapi().partitionSum(*key, temperature, version=EDITIONS[edition])
    assert q.source == f"{edition} {isotopologue(*key).formula}"


def test_editions_are_told_apart():
    nitrous_oxide = isotopologue(4, 1)
    assert pf.tips("TIPS-2025", nitrous_oxide)(1700.0) != pf.tips("TIPS-2021", nitrous_oxide)(1700.0)


@pytest.mark.parametrize(
    ("edition", "key", "inside", "outside"),
    [
        # Steps and breaks measured in the tables themselves.
        ("TIPS-2025", (19, 1), 3300.0, 3375.0),  # OCS: + 1 % at 3370-3380 K
        ("TIPS-2025", (10, 1), 360.0, 395.0),  # NO2: -1.1 % at 390-400 K
        ("TIPS-2025", (11, 1), 2900.0, 2940.0),  # NH3: broken at 2935-2950 K
        ("TIPS-2025", (6, 1), 1500.0, 2000.0),  # CH4: 11-29 % low at 2000-2250 K
        ("TIPS-2025", (6, 2), 1500.0, 2000.0),
        ("TIPS-2021", (7, 1), 700.0, 1000.0),  # O2: 32 % low at 3000 K
        ("TIPS-2021", (4, 1), 1700.0, 3000.0),  # N2O: 19 % low at 3000 K
        ("TIPS-2021", (11, 1), 1900.0, 3000.0),  # NH3: 6 % low at 3000 K
        ("TIPS-2021", (11, 2), 900.0, 1500.0),  # 15NH3: 10 % low at 1500 K
        ("TIPS-2021", (22, 1), 3400.0, 5000.0),  # N2: 4 % low at 5000 K
        ("TIPS-2021", (8, 1), 2400.0, 3000.0),  # NO
        ("TIPS-2025", (13, 3), 900.0, 2000.0),  # OD: falls against a rigid rotor
        ("TIPS-2025", (20, 1), 1300.0, 3000.0),  # H2CO: falls against a rigid rotor
        ("TIPS-2025", (7, 2), 1700.0, 3000.0),
        # Ends of the tables.
        ("TIPS-2021", (3, 1), 1000.0, 1000.5),
        ("TIPS-2025", (3, 1), 1000.0, 1000.5),
        ("TIPS-2021", (5, 1), 9000.0, 9001.0),
        # Below 20 K hapi's interpolation is wrong.
        ("TIPS-2021", (5, 1), 20.0, 19.99),
        ("TIPS-2025", (1, 1), 20.0, 9.4),
        ("TIPS-2021", (5, 1), 296.0, 0.0),
        ("TIPS-2021", (5, 1), 296.0, -5.0),
        ("TIPS-2021", (5, 1), 296.0, math.nan),
        ("TIPS-2021", (5, 1), 296.0, math.inf),
    ],
)
def test_the_valid_range_is_kept(edition, key, inside, outside):
    q = pf.tips(edition, isotopologue(*key))
    assert q(inside) > 0.0
    assert q.lowest <= inside <= q.highest
    expected = rf"^partition function {edition} .*: temperature outside its valid range; expected .* to .* K, found "
    with pytest.raises(MoleculeError, match=expected):
        q(outside)


def rigid_harmonic_ratio(temperature, modes, rotation):
    """Q(T)/Q(296 K) of a rigid rotor (T^rotation) with harmonic oscillators (cm-1, degeneracy)."""

    def value(t):
        return t**rotation * math.prod((1.0 - math.exp(-SECOND_RADIATION * nu / t)) ** -g for nu, g in modes)

    return value(temperature) / value(296.0)


@pytest.mark.parametrize(
    ("key", "modes", "rotation"),
    [
        # Fundamentals from memory, to about 1 cm-1.
        ((52, 1), [(2106, 1), (931, 2), (2114, 3), (819, 3)], 1.5),  # GeH4
        ((53, 1), [(658, 1), (397, 2), (1535, 1)], 1.0),  # CS2
    ],
)
def test_an_edition_that_is_wrong_throughout_is_refused(key, modes, rotation):
    one = isotopologue(*key)
    good = pf.tips("TIPS-2025", one)
    for temperature in (200.0, 500.0, 1000.0):
        model = rigid_harmonic_ratio(temperature, modes, rotation)
        assert good(temperature) / good(296.0) == pytest.approx(model, rel=0.01)
    old = [hapi().partitionSum(*key, t, version=2021) for t in (1000.0, 296.0)]
    assert abs(old[0] / old[1] / rigid_harmonic_ratio(1000.0, modes, rotation) - 1.0) > 0.3
    with pytest.raises(MoleculeError, match=r"^partition_function: TIPS-2021 has no trustworthy values for .*; choose"):
        pf.tips("TIPS-2021", one)


@pytest.mark.parametrize(("edition", "key"), [("TIPS-2021", (57, 1)), ("TIPS-2021", (34, 1)), ("TIPS-2025", (34, 1))])
def test_an_edition_without_values_is_refused(edition, key):
    with pytest.raises(
        MoleculeError, match=rf"^partition_function: {edition} has no values for .*; choose another edition or a file"
    ):
        pf.tips(edition, isotopologue(*key))


def test_every_range_that_is_given_holds_296_kelvin():
    count = 0
    for key in hapi().ISO:
        for edition in EDITIONS:
            try:
                q = pf.tips(edition, isotopologue(*key))
            except MoleculeError:
                continue
            assert q.lowest <= 200.0 < 296.0 < 350.0 <= q.highest
            count += 1
    assert count > 200


MADE = Isotopologue(998, 1, "made", "made", 10.0, 1.0)
TEMPERATURES = np.concatenate([[1.0], np.arange(10.0, 3001.0, 10.0)])


def smooth(temperature):
    """A rotor with an oscillator of 800 cm-1."""
    return 0.1 * temperature**1.5 / (1.0 - np.exp(-SECOND_RADIATION * 800.0 / temperature))


@pytest.fixture
def made_edition(monkeypatch):
    """A TIPS edition that holds one table, given as values at TEMPERATURES."""

    def make(values):
        hashes = {
            "TIPS_2021_ISOT_HASH": {(998, 1): list(TEMPERATURES)},
            "TIPS_2021_ISOQ_HASH": {(998, 1): list(values)},
        }
        monkeypatch.setattr(pf, "hapi", lambda: SimpleNamespace(**hashes))
        pf._tips_table.cache_clear()
        return pf.tips("TIPS-2021", MADE)

    yield make
    pf._tips_table.cache_clear()


def test_a_smooth_table_is_trusted_whole(made_edition):
    q = made_edition(smooth(TEMPERATURES))
    assert (q.lowest, q.highest) == (20.0, 3000.0)


@pytest.mark.parametrize("size", [0.01, -0.01, 0.004])
@pytest.mark.parametrize("at", [400.0, 1230.0, 2900.0])
def test_a_step_above_ends_the_range_before_it(made_edition, at, size):
    values = smooth(TEMPERATURES)
    values[at <= TEMPERATURES] *= 1.0 + size
    q = made_edition(values)
    assert q.lowest == 20.0
    # The two points on each side of the step may show it.
    assert at - 30.0 <= q.highest < at


@pytest.mark.parametrize("at", [120.0, 200.0])
def test_a_step_below_296_kelvin_starts_the_range_behind_it(made_edition, at):
    values = smooth(TEMPERATURES)
    values[at >= TEMPERATURES] *= 1.01
    q = made_edition(values)
    assert at < q.lowest <= at + 30.0
    assert q.highest == 3000.0


def test_a_single_wrong_value_and_a_value_of_0_end_the_range(made_edition):
    for wrong in (1.005, 0.0, -1.0):
        values = smooth(TEMPERATURES)
        values[TEMPERATURES == 1000.0] *= wrong
        assert 970.0 <= made_edition(values).highest < 1000.0


def test_what_is_too_small_to_be_a_step(made_edition):
    values = smooth(TEMPERATURES)
    values[TEMPERATURES >= 1000.0] *= 1.001
    assert made_edition(values).highest == 3000.0


def test_residuals_of_a_cubic_are_0_and_a_bump_is_seen_in_full():
    temperature = np.geomspace(20.0, 3000.0, 60)
    log_t = np.log(temperature)
    value = np.exp(1.0 + 0.3 * log_t - 0.2 * log_t**2 + 0.03 * log_t**3)
    assert np.abs(pf.neighbour_residuals(temperature, value)).max() < 1e-12
    value[30] *= math.exp(0.01)
    residuals = pf.neighbour_residuals(temperature, value)
    assert residuals[28] == pytest.approx(0.01, rel=1e-9)
    assert np.argmax(np.abs(residuals)) == 28


@pytest.mark.parametrize(
    ("key", "temperature", "difference", "within"),
    [
        ((5, 1), 3000.0, 0.0, 1e-4),
        ((4, 1), 3000.0, -0.19, 0.02),  # N2O: 19 %
        ((7, 1), 3000.0, -0.32, 0.02),  # O2: 32 %
        ((5, 1), 296.0, 0.0, 1e-15),
        ((3, 1), 2000.0, 0.0, 0.0),  # no values
        ((57, 1), 500.0, 0.0, 0.0),  # not in TIPS-2021
    ],
)
def test_how_far_the_editions_differ(key, temperature, difference, within):
    assert pf.editions_differ(isotopologue(*key), temperature) == pytest.approx(difference, abs=within)


def test_no_banner_is_printed():
    def run(code):
        return subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)

    through = run(
        "from opacity.molecule.isotopologue import isotopologue\n"
        "from opacity.molecule.partition_function import tips\n"
        "tips('TIPS-2021', isotopologue(5, 1))(500.0)"
    )
    assert (through.stdout, through.stderr) == ("", "")
    # Without the guard there is one, so that the test above can fail.
    assert "HAPI" in run("import hapi").stdout


def test_nothing_is_printed_when_values_are_asked_for(capfd):
    pf.tips("TIPS-2025", isotopologue(1, 1))(500.0)
    pf.editions_differ(isotopologue(4, 1), 500.0)
    assert capfd.readouterr() == ("", "")
