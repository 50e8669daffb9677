"""The kernels' sum against the exact one: within the tolerance at every point, however weak, and never negative."""

from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

import opacity
from opacity.cross_sections.compute import spectrum
from opacity.cross_sections.exact import exact_at, exact_spectrum
from opacity.cross_sections.planner import SMALLEST_TILE
from opacity.cross_sections.prepare import prepare
from opacity.cross_sections.tolerance import regions
from opacity.line_list.read import merge

from .lists import line_list, node, random_list

AIR = {"broadeners": {"air": 1.0}}


def worst_margin(found: np.ndarray, truth: np.ndarray, tolerance: float) -> float:
    """Largest error over the tolerance; also that zeros are the truth's and nothing is negative."""
    assert np.all(np.isfinite(found))
    assert np.all(found >= 0.0)
    assert np.array_equal(found == 0.0, truth == 0.0)
    some = truth > 0.0
    if not some.any():
        return 0.0
    return float(np.max(np.abs(found[some] / truth[some] - 1.0))) / tolerance


@pytest.mark.parametrize("tolerance", [1e-2, 1e-3, 1e-4, 1e-5, 1e-6])
@pytest.mark.parametrize("cutoff", [0.1, 25.0, 500.0])
def test_extremes_of_temperature_pressure_step_and_cutoff(tolerance: float, cutoff: float) -> None:
    lines = random_list(150, 1990.0, 2060.0, seed=3)
    margin = 0.0
    for start, stop, step in ((2000.0, 2050.0, 1.0), (2010.0, 2020.0, 0.01), (2011.0, 2011.2, 1e-4)):
        nu = np.arange(round((stop - start) / step) + 1) * step + start
        choice = {
            "wavenumber": nu,
            "temperature": [70.0, 296.0, 1000.0, 3000.0, 8000.0],
            "pressure": [1e-8, 1e-3, 1.0, 1e3],
            "cutoff": cutoff,
            "tolerance": tolerance,
            **AIR,
        }
        margin = max(
            margin,
            worst_margin(
                opacity.cross_section(lines, **choice), opacity.exact_cross_section(lines, **choice), tolerance
            ),
        )
    print(f"tolerance {tolerance:g}, cut-off {cutoff:g}: worst margin {margin:.2f}")
    assert margin <= 1.0


@pytest.mark.parametrize("y", [1e-10, 1e-6, 1e-3, 0.05, 0.3, 1.0, 5.0, 30.0, 1e3, 1e5])
def test_any_ratio_of_widths(y: float) -> None:
    """Widths from 1e-6 to 50 cm-1 on a step that is too fine, fitting or hopeless for them."""
    for width in (1e-6, 1e-3, 0.1, 50.0):
        one = node([2000.0, 2000.37], doppler=width, lorentz=width * y)
        for step in (0.1 * width, width, 100.0 * width):
            nu = 2000.0 + step * np.arange(-300, 300)
            nu = np.unique(nu[nu > 0.0])
            for cutoff in (5.0 * width, 40.0):
                truth = exact_spectrum(one, nu, cutoff)
                found = spectrum(one, nu, cutoff, regions(1e-4))
                assert worst_margin(found, truth, 1e-4) <= 1.0


@pytest.mark.parametrize("tolerance", [1e-2, 1e-3, 1e-4, 1e-5, 2e-6])
def test_plinth_removal(tolerance: float) -> None:
    """Also where the cut-off lies in the core, with shifted centres, and near the cut-off, where little is left.

    The difference of two nearly equal values is itself uncertain by 1e-13 of the sum before subtraction.
    """
    rng = np.random.default_rng(6)
    nu = np.linspace(1990.0, 2010.0, 5001)
    limits = regions(tolerance, plinth=True)
    for _ in range(60):
        doppler, y = 10.0 ** rng.uniform(-3, 0), 10.0 ** rng.uniform(-6, 2.5)
        cutoff = min(doppler * 10.0 ** rng.uniform(-0.3, 3), 8.0)
        place = np.sort(np.append(rng.uniform(1995.0, 2005.0, 2), 2000.0))
        lines = node(place, doppler=doppler, lorentz=doppler * y, centre=place + rng.normal(0.0, 0.2) * cutoff)
        truth = exact_spectrum(lines, nu, cutoff, plinth=True)
        found = spectrum(lines, nu, cutoff, limits, plinth=True)
        allowed = tolerance * truth + 1e-13 * exact_spectrum(lines, nu, cutoff)
        assert np.all(np.abs(found - truth) <= allowed)
        assert np.all(found >= 0.0)


def test_a_tolerance_that_plinth_removal_cannot_meet_is_refused() -> None:
    with pytest.raises(opacity.InputError, match=r"cannot be met with plinth removal; expected 2e-06 to 0\.1"):
        regions(1e-6, plinth=True)


@pytest.mark.nojit
def test_no_line_one_line_one_point() -> None:
    nu = np.linspace(2000.0, 2001.0, 11)
    for lines in (line_list([]), line_list([1900.0]), line_list([2000.5]), line_list([2000.0]), line_list([2001.01])):
        for grid in (nu, nu[:1], nu[5:6]):
            choice = {"wavenumber": grid, "temperature": 300.0, "pressure": 0.1, "cutoff": 0.5, **AIR}
            found = opacity.cross_section(lines, **choice)
            assert found.shape == (1, 1, grid.size)
            assert worst_margin(found, opacity.exact_cross_section(lines, **choice), 1e-3) <= 1.0


@pytest.mark.nojit
def test_cutoff_counts_from_the_unshifted_wavenumber_ends_included() -> None:
    nu = np.linspace(1999.0, 2001.0, 201)
    lines = line_list([2000.0], shift=0.3)
    found = opacity.cross_section(lines, wavenumber=nu, temperature=300.0, pressure=1.0, cutoff=0.5, **AIR)[0, 0]
    assert np.array_equal(found > 0.0, np.abs(nu - 2000.0) <= 0.5)
    assert abs(nu[np.argmax(found)] - 2000.3) < 0.01
    # Wherever rounding puts the edge, the exact sum has it too.
    rng = np.random.default_rng(5)
    for centre, cutoff in zip(rng.uniform(1999.5, 2000.5, 40), rng.integers(1, 80, 40) * 0.01, strict=True):
        one = node([centre])
        found, truth = spectrum(one, nu, cutoff, regions(1e-3)), exact_spectrum(one, nu, cutoff)
        assert np.array_equal(found > 0.0, truth > 0.0)


def test_lines_outside_the_grid_reach_in() -> None:
    nu = np.linspace(2000.0, 2010.0, 1001)
    lines = line_list([1980.0, 2031.0])
    choice = {"wavenumber": nu, "temperature": 300.0, "pressure": 1.0, "cutoff": 25.0, **AIR}
    found, truth = opacity.cross_section(lines, **choice), opacity.exact_cross_section(lines, **choice)
    assert found[0, 0, 0] > 0.0
    assert found[0, 0, 550] == 0.0
    assert worst_margin(found, truth, 1e-3) <= 1.0


def test_grids_even_in_log_and_uneven() -> None:
    lines = random_list(200, 900.0, 11000.0, seed=8)
    rng = np.random.default_rng(2)
    for nu in (np.geomspace(1000.0, 10000.0, 5000), np.sort(rng.uniform(1000.0, 10000.0, 3000))):
        choice = {"wavenumber": nu, "temperature": 500.0, "pressure": [1e-4, 10.0], "cutoff": 100.0, **AIR}
        margin = worst_margin(
            opacity.cross_section(lines, **choice), opacity.exact_cross_section(lines, **choice), 1e-3
        )
        assert margin <= 1.0


def test_same_bits_for_any_number_of_workers() -> None:
    lines = random_list(300, 2000.0, 2100.0, seed=1)
    nu = np.linspace(2000.0, 2100.0, 9 * SMALLEST_TILE + 77)
    choice = {"wavenumber": nu, "temperature": [300.0, 900.0], "pressure": [1e-3, 1.0], "cutoff": 25.0, **AIR}
    one = opacity.cross_section(lines, workers=1, **choice)
    for workers in (2, 7):
        assert np.array_equal(one, opacity.cross_section(lines, workers=workers, **choice))
    with ThreadPoolExecutor(3) as executor:
        prepared = node([2050.0])
        for cells in (True, False):
            alone, shared = (
                spectrum(prepared, nu, 25.0, regions(1e-3), executor=one, cells=cells) for one in (None, executor)
            )
            assert np.array_equal(alone, shared)


def test_sum_of_two_lists_is_the_list_of_both() -> None:
    first, second = random_list(60, 2000.0, 2030.0, seed=4), random_list(60, 2000.0, 2030.0, seed=5)
    nu = np.linspace(2000.0, 2030.0, 3001)
    choice = {"wavenumber": nu, "temperature": 400.0, "pressure": 0.5, "cutoff": 10.0, "tolerance": 1e-6, **AIR}
    both = opacity.cross_section(merge([first, second]), **choice)
    apart = opacity.cross_section(first, **choice) + opacity.cross_section(second, **choice)
    np.testing.assert_allclose(both, apart, rtol=1e-13)


def test_area_of_a_resolved_line_is_its_strength() -> None:
    """The integral of one profile, with what lies beyond the cut-off by the Lorentz tail."""
    nu = np.linspace(1975.0, 2025.0, 50001)
    one = node([2000.0], strength=3e-20, doppler=0.01, lorentz=0.05)
    area = np.trapezoid(spectrum(one, nu, 25.0, regions(1e-6)), nu)
    beyond = 2.0 / np.pi * np.arctan(0.05 / 25.0)
    assert abs(area / (3e-20 * (1.0 - beyond)) - 1.0) < 2e-6


def test_limiting_profiles_doppler_and_lorentz() -> None:
    nu = np.linspace(1999.9, 2000.1, 201)
    ln2 = np.log(2.0)
    doppler = spectrum(node([2000.0], 1.0, 0.02, 1e-12), nu, 0.03, regions(1e-6))
    inside = np.abs(nu - 2000.0) <= 0.03
    gauss = np.sqrt(ln2 / np.pi) / 0.02 * np.exp(-ln2 * ((nu - 2000.0) / 0.02) ** 2)
    np.testing.assert_allclose(doppler[inside], gauss[inside], rtol=2e-6)
    lorentz = spectrum(node([2000.0], 1.0, 1e-5, 0.02), nu, 1.0, regions(1e-6))
    np.testing.assert_allclose(lorentz, 0.02 / np.pi / ((nu - 2000.0) ** 2 + 0.02**2), rtol=2e-6)


def test_symmetry_about_the_centre() -> None:
    nu = 2000.0 + np.arange(-500, 501) / 1024.0
    found = spectrum(node([2000.0], lorentz=0.01), nu, 0.4, regions(1e-3))
    assert np.array_equal(found, found[::-1])


def test_point_by_point_and_line_by_line_are_the_same_sum() -> None:
    lines = random_list(120, 1995.0, 2015.0, seed=9)
    ready = prepare(lines, partition_function="TIPS-2021", abundance="terrestrial", broadeners={"air": 1.0})
    nu = np.linspace(1990.0, 2020.0, 301)
    for pressure, plinth in ((1e-4, False), (1.0, False), (1.0, True)):
        at = ready.at(500.0, pressure)
        np.testing.assert_allclose(
            exact_at(at, nu, 4.0, plinth), exact_spectrum(at, nu, 4.0, plinth), rtol=1e-12, atol=1e-40
        )
