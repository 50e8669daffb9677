"""Sums by cells against the exact sum, where they are chosen and where they would not be."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest

import opacity
from opacity.chi_factors import CHI_FACTORS
from opacity.cross_sections.compute import spectrum
from opacity.cross_sections.exact import SQRT_LN2, exact_spectrum
from opacity.cross_sections.planner import WIDEST_IN_LOG, by_cells, even_spacing, plan_tiles
from opacity.cross_sections.prepare import NodeLines
from opacity.cross_sections.tolerance import CELL_SHARE, axis_for, interpolation_error, regions
from opacity.kernels.cells import CELL, NODES, RATIO, grow_tree, interpolation_weights, roots, sums_to_points

from .lists import node

TOLERANCES = (1e-2, 3e-3, 1e-3, 3e-4, 1e-4, 3e-5, 1e-5, 3e-6, 1e-6)


def margin(found: np.ndarray, truth: np.ndarray, tolerance: float, rounding: np.ndarray | float = 0.0) -> float:
    """Largest error as a share of the tolerance; infinite where zeros differ or a value is negative."""
    if np.any(found < 0.0) or not np.all(np.isfinite(found)):
        return np.inf
    error = np.maximum(np.abs(found - truth) - rounding, 0.0)
    positive = truth > 1e-300
    if np.any(error[~positive] > 1e-300):
        return np.inf
    return float(np.max(error[positive] / truth[positive], initial=0.0) / tolerance)


def clump(rng: np.random.Generator, n: int, span: tuple[float, float], y: tuple[float, float]) -> NodeLines:
    """Lines over 20 decades of strength, in clumps and alone, some beyond the span; widths over decades."""
    place = rng.uniform(*span, n)
    place[: n // 3] = place[0] + rng.normal(0.0, 0.05, n // 3)
    place = np.sort(place)
    doppler = 10.0 ** rng.uniform(-3.5, -1.5)
    return node(
        place,
        strength=10.0 ** rng.uniform(-40.0, -20.0, n),
        doppler=doppler,
        lorentz=doppler * 10.0 ** rng.uniform(*y, n),
        centre=place + rng.normal(0.0, 0.02, n),
    )


@pytest.mark.nojit
def test_parts_of_a_cell_carry_the_same_polynomial() -> None:
    """What goes up as a polynomial of degree 7 comes down to the points to rounding, in a last cell cut short too."""
    for points in (RATIO * RATIO * CELL, 5 * RATIO * CELL + 3):
        tree = grow_tree(points, 3, 0.0, 1.0, False, 2.0)
        sums = np.zeros(tree.places.size)
        top = NODES * tree.offsets[2]
        polynomial = np.polynomial.Polynomial([3.0, 1.0, -2.0, 0.5, 1.5, -1.0, 0.25, 2.0], [0.0, 400.0])
        sums[top:] = polynomial(tree.places[top:])
        out = np.zeros(points)
        sums_to_points(sums, tree.offsets, out)
        np.testing.assert_allclose(out, polynomial(np.arange(float(points))), rtol=1e-11, atol=1e-11)


def test_error_of_interpolation_in_log_is_within_its_share() -> None:
    """Lorentz profiles in a cell even in ln nu, as wide as such cells may be, with the pole on the ellipse."""
    x = np.linspace(-1.0, 1.0, 401)
    weights = interpolation_weights(x)
    for tolerance in (1e-2, 1e-4, 1e-6):
        axis = regions(tolerance).axis_in_log
        worst = 0.0
        for angle in np.linspace(0.001, np.pi - 0.001, 200):
            pole = axis * np.cos(angle) + 1j * np.sqrt(axis * axis - 1.0) * np.sin(angle)
            z = np.exp(0.5 * WIDEST_IN_LOG * pole)
            profile = [z.imag / ((np.exp(0.5 * WIDEST_IN_LOG * at) - z.real) ** 2 + z.imag**2) for at in (roots(), x)]
            worst = max(worst, float(np.max(np.abs(profile[0] @ weights / profile[1] - 1.0))))
        print(f"tolerance {tolerance:g}: {worst / tolerance:.3f} of it by interpolation in log")
        assert worst <= CELL_SHARE * tolerance


def test_error_of_interpolation_is_as_predicted() -> None:
    """Lorentz profiles with poles on the ellipse and outside it, interpolated and compared."""
    for error in (1e-2, 1e-4, 2.5e-7):
        axis = axis_for(error)
        assert 0.97 * error < interpolation_error(axis) <= error
        x = np.linspace(-1.0, 1.0, 501)
        weights = interpolation_weights(x)
        worst = 0.0
        for wider in (1.0, 1.1, 2.0, 10.0):
            for angle in np.linspace(0.001, 0.5 * np.pi, 50):
                a = axis * wider
                re, im = a * np.cos(angle), np.sqrt(a * a - 1.0) * np.sin(angle)
                profile = [im / ((at - re) ** 2 + im**2) for at in (roots(), x)]
                worst = max(worst, float(np.max(np.abs(profile[0] @ weights / profile[1] - 1.0))))
        assert 0.9 * error < worst <= 1.001 * error


@pytest.mark.parametrize("tolerance", TOLERANCES)
def test_every_point_within_the_tolerance(tolerance: float) -> None:
    """Any width, step, cut-off, shift; grids even in wavenumber and in its logarithm; lines beyond the grid."""
    rng = np.random.default_rng(int(-1000 * np.log10(tolerance)))
    limits = regions(tolerance)
    worst = 0.0
    for case in range(60):
        step = 10.0 ** rng.uniform(-4.0, 0.0)
        size = int(rng.integers(200, 6000))
        start = rng.uniform(500.0, 5000.0)
        nu = start + step * np.arange(size)
        if case % 3 == 0:
            nu = np.exp(np.linspace(np.log(nu[0]), np.log(nu[-1]), size))
        cutoff = min(step * 10.0 ** rng.uniform(-1.0, 4.0), 500.0)
        lines = clump(rng, 30, (nu[0] - 0.7 * cutoff, nu[-1] + 0.7 * cutoff), (-10.0, 5.0))
        truth = exact_spectrum(lines, nu, cutoff)
        found = spectrum(lines, nu, cutoff, limits, cells=True)
        worst = max(worst, margin(found, truth, tolerance))
    print(f"tolerance {tolerance:g}: largest error {worst:.2f} of it")
    assert worst <= 1.0


@pytest.mark.parametrize("y", [(-10.0, -6.0), (-2.0, 0.5), (0.5, 1.2), (1.2, 3.0), (3.0, 5.0)])
def test_every_regime_of_widths(y: tuple[float, float]) -> None:
    rng = np.random.default_rng(3)
    nu = 2000.0 + 0.002 * np.arange(20000)
    for tolerance in (1e-3, 1e-6):
        for cutoff in (0.03, 1.0, 25.0, 300.0):
            lines = clump(rng, 40, (nu[0] - cutoff, nu[-1] + cutoff), y)
            found = spectrum(lines, nu, cutoff, regions(tolerance), cells=True)
            assert margin(found, exact_spectrum(lines, nu, cutoff), tolerance) <= 1.0


@pytest.mark.parametrize("tolerance", [1e-2, 1e-3, 1e-4, 1e-5, 2e-6])
def test_plinth_removal(tolerance: float) -> None:
    rng = np.random.default_rng(11)
    limits = regions(tolerance, plinth=True)
    worst = 0.0
    for case in range(40):
        step = 10.0 ** rng.uniform(-3.0, -1.0)
        nu = 1500.0 + step * np.arange(3000)
        if case % 3 == 0:
            nu = np.exp(np.linspace(np.log(nu[0]), np.log(nu[-1]), nu.size))
        cutoff = step * 10.0 ** rng.uniform(0.5, 3.5)
        lines = clump(rng, 15, (nu[0] - cutoff, nu[-1] + cutoff), (-4.0, 3.0))
        shifted = lines.wavenumber + rng.normal(0.0, 0.1, lines.wavenumber.size) * cutoff
        lines = node(lines.wavenumber, lines.strength, lines.doppler, lines.lorentz, shifted)
        truth = exact_spectrum(lines, nu, cutoff, plinth=True)
        found = spectrum(lines, nu, cutoff, limits, plinth=True, cells=True)
        worst = max(worst, margin(found, truth, tolerance, 1e-13 * exact_spectrum(lines, nu, cutoff)))
    print(f"tolerance {tolerance:g} with plinth removal: largest error {worst:.2f} of it")
    assert worst <= 1.0


@pytest.mark.parametrize("tolerance", [1e-2, 1e-3, 1e-4, 1e-5, 2e-6])
def test_plinth_removal_where_a_formula_has_just_begun_to_serve(tolerance: float) -> None:
    """A profile that is flat within its cut-off, y at the borders of the regions: what is left is a difference."""
    limits = regions(tolerance, plinth=True)
    worst = 0.0
    for border in (limits.near_radius, limits.far_radius):
        for below in (1e-2, 1e-4, 1e-6, -1e-6):
            for width in (0.005, 0.0284, 0.09, 0.5, 1.9, 2.1):
                lorentz = 0.01 * border * (1.0 - below) / SQRT_LN2
                lines = node([2000.0], doppler=0.01, lorentz=lorentz)
                cutoff = width * lorentz
                nu = 2000.0 + cutoff / 40.0 * np.arange(-60, 61)
                truth = exact_spectrum(lines, nu, cutoff, plinth=True)
                for cells in (True, False):
                    found = spectrum(lines, nu, cutoff, limits, plinth=True, cells=cells)
                    worst = max(worst, margin(found, truth, tolerance, 1e-13 * exact_spectrum(lines, nu, cutoff)))
    print(f"tolerance {tolerance:g}: largest error {worst:.2f} of it")
    assert worst <= 1.0


def test_plinth_removal_on_grids_in_log_with_lines_as_wide_as_their_wavenumber() -> None:
    for step in (1e-6, 1e-5, 1e-4):
        nu = 36.2 * np.exp(step * np.arange(4000))
        lines = node([76.2], doppler=4.0, lorentz=78.0)
        truth = exact_spectrum(lines, nu, 40.0, plinth=True)
        found = spectrum(lines, nu, 40.0, regions(1e-3, plinth=True), plinth=True, cells=True)
        assert margin(found, truth, 1e-3, 1e-13 * exact_spectrum(lines, nu, 40.0)) <= 1.0


@pytest.mark.parametrize("cells", [True, False])
@pytest.mark.parametrize("name", sorted(CHI_FACTORS))
def test_chi_factors(name: str, cells: bool) -> None:
    rng = np.random.default_rng(5)
    chi = CHI_FACTORS[name].table()
    for tolerance in (1e-2, 1e-4, 1e-6):
        for case, (step, cutoff) in enumerate([(0.05, 2.0), (0.1, 25.0), (0.2, 200.0), (1.0, 500.0)]):
            nu = 2000.0 + step * np.arange(4000)
            if case % 2:
                nu = np.exp(np.linspace(np.log(nu[0]), np.log(nu[-1]), nu.size))
            lines = clump(rng, 12, (nu[0] - cutoff, nu[-1] + cutoff), (-3.0, 3.5))
            truth = exact_spectrum(lines, nu, cutoff, chi=chi)
            assert margin(spectrum(lines, nu, cutoff, regions(tolerance), chi=chi, cells=cells), truth, tolerance) <= 1
            if tolerance > 1e-6:
                plain = exact_spectrum(lines, nu, cutoff, plinth=True, chi=chi)
                limits = regions(tolerance, plinth=True)
                found = spectrum(lines, nu, cutoff, limits, plinth=True, chi=chi, cells=cells)
                assert margin(found, plain, tolerance, 1e-13 * truth) <= 1.0


def test_published_chi_factors_are_chains_of_falling_exponentials() -> None:
    """The check that the constants got: nearly continuous where rows meet, 1 near the centre, falling outwards."""
    for one in CHI_FACTORS.values():
        table = one.table()
        assert tuple(table[0, 1:]) == (1.0, 0.0)
        assert table[-1, 0] == np.inf
        for inner, outer in pairwise(table):
            before, after = (row[1] * np.exp(-row[2] * inner[0]) for row in (inner, outer))
            assert -0.02 < after / before - 1.0 < 1e-4
        assert np.all(table[1:, 2] > 0.0)


@pytest.mark.parametrize(
    "rows",
    [
        [[np.inf, 1.0, 0.3]],
        [[3.0, 1.0, 0.0], [np.inf, 1.0, -0.05]],
        [[3.0, 1.0, 0.0], [2.0, 1.0, 0.1], [np.inf, 1.0, 0.1]],
        [[3.0, 1.0, 0.0], [10.0, 0.9, 0.1]],
        [[3.0, 0.5, 0.0], [np.inf, 0.9, 0.0]],
        [[np.inf, np.nan, 0.0]],
    ],
    ids=str,
)
def test_chi_factors_that_cannot_be_are_refused(rows: list[list[float]]) -> None:
    nu = np.linspace(1990.0, 2010.0, 401)
    with pytest.raises(opacity.InputError, match=r"^chi: impossible rows; expected distances that rise to infinity"):
        spectrum(node([2000.0]), nu, 5.0, regions(1e-3), chi=np.array(rows))


def test_nothing_leaks_beyond_a_cut_off() -> None:
    """A line 1e12 above a weak forest: just outside its cut-off only the forest counts, and beyond that nothing."""
    rng = np.random.default_rng(8)
    nu = np.linspace(1000.0, 1300.0, 30001)
    place = np.append(np.sort(rng.uniform(1060.0, 1240.0, 400)), 1150.0)
    order = np.argsort(place)
    lines = node(place[order], strength=np.append(np.full(400, 1e-32), 1e-20)[order], doppler=2e-3, lorentz=0.07)
    truth = exact_spectrum(lines, nu, 25.0)
    found = spectrum(lines, nu, 25.0, regions(1e-5), cells=True)
    assert margin(found, truth, 1e-5) <= 1.0
    assert np.array_equal(found == 0.0, truth == 0.0)
    assert np.count_nonzero(truth == 0.0) > 5000


def test_lines_on_grid_points_at_cell_edges_and_at_the_ends() -> None:
    nu = np.linspace(1000.0, 1163.83, 16384)
    step = nu[1] - nu[0]
    for index in (0, 1, 15, 16, 63, 64, 4095, 4096, 8191, 8192, 16383):
        for offset in (0.0, 0.5 * step, 1e-9):
            for cutoff in (16.0 * step, 0.64, 40.0, 1e4):
                lines = node([nu[index] + offset], doppler=1e-3, lorentz=0.03)
                found = spectrum(lines, nu, cutoff, regions(1e-6), cells=True)
                assert margin(found, exact_spectrum(lines, nu, cutoff), 1e-6) <= 1.0


def test_wavenumber_zero_and_grids_coarse_in_log() -> None:
    """Wings that reach down to 0, and a grid in log so coarse that cells span much of a line's own wavenumber."""
    rng = np.random.default_rng(9)
    for nu in (np.linspace(0.0, 500.0, 20001), np.exp(np.linspace(np.log(0.01), np.log(1e4), 3000))):
        place = np.sort(rng.uniform(0.5, 300.0, 40))
        for lorentz in (1e-3, 1.0, 50.0):
            lines = node(place, doppler=1e-6 * place, lorentz=lorentz, centre=place - 0.3)
            for cutoff in (25.0, 400.0):
                found = spectrum(lines, nu, cutoff, regions(1e-4), cells=True)
                assert margin(found, exact_spectrum(lines, nu, cutoff), 1e-4) <= 1.0


def test_the_quicker_way_is_taken() -> None:
    nu = np.linspace(1000.0, 2000.0, 100_001)
    spacing = even_spacing(nu)
    assert spacing is not None
    assert not spacing.in_log
    assert abs(spacing.step - 0.01) < 1e-12
    assert by_cells(plan_tiles(nu, spacing, 25.0), 1000, 16384)
    assert not by_cells(plan_tiles(nu, spacing, 25.0), 0, 16384)
    assert not by_cells(plan_tiles(nu, spacing, 0.5), 1000, 4096)
    assert even_spacing(np.sort(np.random.default_rng(1).uniform(1.0, 2.0, 1000))) is None
    log = even_spacing(np.geomspace(100.0, 10000.0, 5000))
    assert log is not None
    assert log.in_log


@pytest.mark.nojit
def test_a_small_sum_by_cells() -> None:
    """Every way through the kernels on a few points: even in wavenumber and in log, chi factors, plinth removal."""
    chi = CHI_FACTORS["Tonkov-1996"].table()
    nu = np.linspace(1990.0, 2010.0, 401)
    lines = node([1992.0, 2000.0, 2009.0], doppler=[0.002, 0.02, 0.002], lorentz=[1e-6, 0.5, 3.0])
    for grid in (nu, np.exp(np.linspace(np.log(1990.0), np.log(2010.0), 401))):
        for cutoff in (0.4, 5.0, 30.0):
            for factors in (None, chi):
                truth = exact_spectrum(lines, grid, cutoff, chi=factors)
                found = spectrum(lines, grid, cutoff, regions(1e-4), chi=factors, cells=True)
                assert margin(found, truth, 1e-4) <= 1.0
                plain = exact_spectrum(lines, grid, cutoff, plinth=True, chi=factors)
                found = spectrum(lines, grid, cutoff, regions(1e-4, plinth=True), True, factors, cells=True)
                assert margin(found, plain, 1e-4, 1e-13 * truth) <= 1.0
