"""Partition functions of hapi's TIPS tables against levels, thermochemical tables and a microwave catalogue."""

from __future__ import annotations

import contextlib
import importlib
import importlib.util
import io
import math
import warnings
from pathlib import Path
from types import ModuleType
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

SAMPLES = Path(__file__).resolve().parents[2] / "data-samples"
EDITIONS = [2021, 2025]
C2 = 1.438776877  # cm K, CODATA 2018

# HITRAN numbers (molecule, isotopologue).
ISOTOPOLOGUES = {
    "H2O": (1, 1),
    "CO2": (2, 1),
    "N2O": (4, 1),
    "CO": (5, 1),
    "13CO": (5, 2),
    "NO": (8, 1),
    "OH": (13, 1),
    "HF": (14, 1),
    "HCl": (15, 1),
    "HCN": (23, 1),
    "PH3": (28, 1),
}


def quiet_import(name: str) -> ModuleType:
    with warnings.catch_warnings(), contextlib.redirect_stdout(io.StringIO()):
        warnings.simplefilter("ignore")
        return importlib.import_module(name)


def tips(species: str, temperature: float, edition: int) -> float:
    """Q of TIPS-2021 (Gamache et al., JQSRT 271, 107713) or TIPS-2025 (Gamache et al., JQSRT 345, 109568)."""
    hapi = quiet_import("hapi")
    return float(hapi.partitionSum(*ISOTOPOLOGUES[species], float(temperature), version=edition))


# ---------------------------------------------------------------- carbon monoxide: sum over levels


@pytest.fixture(scope="module")
def levels() -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Energies (cm-1) and weights of all levels that count up to 3000 K, from the sample list's constants."""
    with pytest.MonkeyPatch.context() as patch:
        patch.syspath_prepend(str(SAMPLES))
        script = importlib.import_module("make_carbon_monoxide")
    numbers = [(v, j) for v in range(20) for j in range(150)]
    energies = np.array([script.level_energy(v, j) for v, j in numbers])
    return energies, np.array([2.0 * j + 1.0 for _, j in numbers])


def direct_sum(levels: tuple[NDArray[np.float64], NDArray[np.float64]], temperature: float) -> float:
    energies, weights = levels
    return float(np.sum(weights * np.exp(-C2 * energies / temperature)))


def test_levels_left_out_do_not_count(levels: tuple[NDArray[np.float64], NDArray[np.float64]]) -> None:
    energies, weights = levels
    share = weights * np.exp(-C2 * energies / 3000.0)
    by_v = share.reshape(20, 150).sum(axis=1) / share.sum()
    # v and J fall off geometrically: the last one is an upper bound for all that follow, times two.
    assert by_v[-1] < 1e-7
    assert share.reshape(20, 150)[:, -1].sum() / share.sum() < 1e-8


@pytest.mark.parametrize("edition", EDITIONS)
def test_carbon_monoxide_is_the_sum_over_its_levels(
    edition: int, levels: tuple[NDArray[np.float64], NDArray[np.float64]]
) -> None:
    """Energies: Dunham constants of Huber & Herzberg 1979, higher orders from memory."""
    for temperature in [20.0, *np.arange(30.0, 300.0, 7.5), *np.arange(300.0, 3000.5, 33.75)]:
        found = tips("CO", temperature, edition)
        assert found == pytest.approx(direct_sum(levels, temperature), rel=2e-5), f"{temperature} K"


@pytest.mark.parametrize("edition", EDITIONS)
def test_between_20_and_30_kelvin_hapi_interpolates_coarsely(
    edition: int, levels: tuple[NDArray[np.float64], NDArray[np.float64]]
) -> None:
    """hapi draws a cubic through rows 10 K apart; the same cubic through the sum over levels gives the same."""
    rows = np.array([10.0, 20.0, 30.0, 40.0])
    values = np.array([direct_sum(levels, row) for row in rows])
    for temperature in np.arange(20.5, 30.0, 0.5):
        factors = [np.prod((temperature - np.delete(rows, i)) / (rows[i] - np.delete(rows, i))) for i in range(4)]
        cubic = float(np.dot(factors, values))
        assert tips("CO", temperature, edition) == pytest.approx(cubic, rel=2e-5), f"{temperature} K"


# ---------------------------------------------------------------- NASA polynomials packaged in cantera

GAS_CONSTANT = 8314.462618  # J/(kmol K), CODATA 2018
STANDARD_TEMPERATURE = 298.15

# Species, its name there, file, TIPS editions, highest temperature (K), tolerance of Q(T)/Q(298.15 K).  The files name
# their sources: GRI-Mech 3.0, and NASA's thermodynamic data (McBride, Gordon & Reno 1993, NASA TM 4513).
POLYNOMIALS = [
    ("CO", "CO", "gri30.yaml", EDITIONS, 3000.0, 1.5e-3),
    ("CO", "CO", "nasa_gas.yaml", EDITIONS, 3000.0, 1.5e-3),
    ("OH", "OH", "gri30.yaml", EDITIONS, 3000.0, 2.5e-3),
    ("OH", "OH", "nasa_gas.yaml", EDITIONS, 3000.0, 2.5e-3),
    ("HCl", "HCL", "nasa_gas.yaml", EDITIONS, 3000.0, 4e-3),
    ("HF", "HF", "nasa_gas.yaml", EDITIONS, 3000.0, 2e-3),
    ("NO", "NO", "gri30.yaml", [2025], 3000.0, 2.5e-3),
    ("NO", "NO", "nasa_gas.yaml", [2025], 3000.0, 2.5e-3),
    ("CO2", "CO2", "gri30.yaml", EDITIONS, 2000.0, 6e-3),
    ("CO2", "CO2", "nasa_gas.yaml", EDITIONS, 2000.0, 6e-3),
    ("H2O", "H2O", "gri30.yaml", EDITIONS, 2000.0, 6e-3),
    ("H2O", "H2O", "nasa_gas.yaml", EDITIONS, 2000.0, 6e-3),
    ("N2O", "N2O", "gri30.yaml", EDITIONS, 1500.0, 3e-3),
    ("N2O", "N2O", "nasa_gas.yaml", EDITIONS, 1500.0, 3e-3),
    ("HCN", "HCN", "gri30.yaml", EDITIONS, 1000.0, 2e-3),
    ("HCN", "HCN", "nasa_gas.yaml", EDITIONS, 1000.0, 2e-3),
]


def internal_energy_at_298(species: str, edition: int) -> float:
    """H(298.15 K) - H(0) of the ideal gas in J/kmol: R T^2 dlnQ/dT for the inside, 5/2 R T for the motion."""
    half = 1.0
    upper, lower = (tips(species, STANDARD_TEMPERATURE + d, edition) for d in (half, -half))
    slope = math.log(upper / lower) / (2.0 * half)
    return GAS_CONSTANT * (STANDARD_TEMPERATURE**2 * slope + 2.5 * STANDARD_TEMPERATURE)


def polynomial_log_ratio(thermo: Any, temperature: float, content: float) -> float:
    """ln Q(T)/Q(298.15 K) from G(T): -(G(T) - H(0))/RT = ln Q + 5/2 ln T + constant; `content` is H(298.15) - H(0)."""
    zero = thermo.h(STANDARD_TEMPERATURE) - content

    def planck_function(t: float) -> float:
        return float(thermo.s(t) - (thermo.h(t) - zero) / t) / GAS_CONSTANT - 2.5 * math.log(t)

    return planck_function(temperature) - planck_function(STANDARD_TEMPERATURE)


@pytest.fixture(scope="module")
def polynomials() -> dict[tuple[str, str], Any]:
    cantera = quiet_import("cantera")
    return {
        (file, species.name): species.thermo
        for file in ("gri30.yaml", "nasa_gas.yaml")
        for species in cantera.Species.list_from_file(file)
    }


@pytest.mark.parametrize(
    ("species", "name", "file", "edition", "highest", "tolerance"),
    [(s, n, f, edition, t, tol) for s, n, f, editions, t, tol in POLYNOMIALS for edition in editions],
)
def test_ratio_meets_nasa_polynomials(
    species: str,
    name: str,
    file: str,
    edition: int,
    highest: float,
    tolerance: float,
    polynomials: dict[tuple[str, str], Any],
) -> None:
    thermo = polynomials[file, name]
    content = internal_energy_at_298(species, edition)
    reference = tips(species, STANDARD_TEMPERATURE, edition)
    for temperature in np.linspace(thermo.min_temp, highest, 41):
        found = tips(species, temperature, edition) / reference
        wanted = math.exp(polynomial_log_ratio(thermo, temperature, content))
        assert found == pytest.approx(wanted, rel=tolerance), f"{temperature:.0f} K"


# H(298.15 K) - H(0), kJ/mol, and its uncertainty: CODATA Key Values for Thermodynamics (Cox, Wagman & Medvedev 1989),
# from memory.  It fixes the slope of Q, which the ratios above take from TIPS itself.
CODATA_CONTENT = [
    ("CO", 8.671, 0.001),
    ("HCl", 8.640, 0.001),
    ("HF", 8.599, 0.001),
    ("CO2", 9.365, 0.003),
    ("H2O", 9.905, 0.005),
]


@pytest.mark.parametrize("edition", EDITIONS)
@pytest.mark.parametrize(("species", "content", "uncertainty"), CODATA_CONTENT)
def test_heat_content_meets_key_values(species: str, content: float, uncertainty: float, edition: int) -> None:
    found = internal_energy_at_298(species, edition) * 1e-6
    assert found == pytest.approx(content, abs=uncertainty)


# ---------------------------------------------------------------- JPL catalogue packaged in astroquery

JPL_TEMPERATURES = (300.0, 225.0, 150.0, 75.0, 37.5)

# Species, tag, nuclear-spin factor HITRAN over catalogue, highest temperature (K).  The catalogue's HCN and PH3 hold
# the ground vibrational state only, which tells above 75 K.
JPL_ENTRIES = [
    ("CO", 28001, 1.0, 225.0),
    ("13CO", 29001, 2.0, 225.0),
    ("H2O", 18003, 1.0, 225.0),
    ("NO", 30008, 1.0, 225.0),
    ("OH", 17001, 1.0, 225.0),
    ("HCl", 36001, 2.0, 225.0),
    ("HF", 20002, 4.0, 225.0),
    ("N2O", 44004, 9.0, 225.0),
    ("HCN", 27001, 2.0, 75.0),
    ("PH3", 34003, 4.0, 75.0),
]


@pytest.fixture(scope="module")
def catalogue() -> dict[int, tuple[float, ...]]:
    """Q at `JPL_TEMPERATURES` by tag, from the catalogue's directory of species, which rides in the package astroquery.

    Pickett et al. 1998, JQSRT 60, 883; columns I6,1X,A14,I5,7F7.4,I2, with log10 Q.
    """
    spec = importlib.util.find_spec("astroquery")
    assert spec is not None
    assert spec.origin is not None
    files = sorted(Path(spec.origin).parent.glob("**/jplspec/data/catdir.cat"))
    assert len(files) == 1
    entries = {}
    for row in files[0].read_text(encoding="ascii").splitlines():
        logs = [float(row[26 + 7 * i : 33 + 7 * i]) for i in range(len(JPL_TEMPERATURES))]
        entries[int(row[:6])] = tuple(10.0**value for value in logs)
    return entries


@pytest.mark.parametrize("edition", EDITIONS)
@pytest.mark.parametrize(("species", "tag", "spin", "highest"), JPL_ENTRIES)
def test_jpl_catalogue(
    species: str, tag: int, spin: float, highest: float, edition: int, catalogue: dict[int, tuple[float, ...]]
) -> None:
    for temperature, value in zip(JPL_TEMPERATURES, catalogue[tag], strict=True):
        if temperature <= highest:
            found = tips(species, temperature, edition)
            assert found == pytest.approx(spin * value, rel=5e-4), f"{temperature} K"


@pytest.mark.parametrize("temperature", [225.0, 150.0])
def test_jpl_hydrogen_cyanide_with_its_bending_vibration(
    temperature: float, catalogue: dict[int, tuple[float, ...]]
) -> None:
    """The catalogue's ground-state Q times that of the bend: an oscillator, twofold, 713.46 cm-1 (from memory)."""
    bend = (1.0 - math.exp(-C2 * 713.46 / temperature)) ** -2
    wanted = 2.0 * bend * catalogue[27001][JPL_TEMPERATURES.index(temperature)]
    assert tips("HCN", temperature, 2021) == pytest.approx(wanted, rel=5e-4)
