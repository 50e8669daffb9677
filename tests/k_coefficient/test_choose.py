from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from opacity.k_coefficient.choose import Training, Wanted, choose
from opacity.k_coefficient.collapse import fine_cells
from opacity.k_coefficient.optimise import rows_of
from opacity.k_coefficient.quadrature import GPoints, g_points, points_of_bounds

PRESSURE = np.geomspace(1e-4, 10.0, 6)


@pytest.fixture(scope="module")
def cells() -> np.ndarray:
    """Elsasser combs of two bands at six pressures, and a band without lines, (6, 3, N_CELLS)."""
    nu = np.linspace(1000.0, 1001.0, 20_001)
    combs = [np.sinh(2 * np.pi * y) / (np.cosh(2 * np.pi * y) - np.cos(2 * np.pi * nu)) for y in 0.05 * PRESSURE**0.4]
    one = fine_cells(np.array(combs), nu, np.array([1000.0, 1001.0]))[:, 0]
    return np.stack([1e-22 * one, 1e-20 * one**1.7, 0.0 * one], axis=1)


def largest(points: GPoints, cells: np.ndarray) -> float:
    """Largest error of transmission at all nodes."""
    return float(np.max(np.abs(rows_of(cells, PRESSURE).errors(points))))


def some(cells: np.ndarray) -> list[Training]:
    """Half of the nodes, the smoother ones."""
    return [Training(cells[3:], PRESSURE[3:])]


def test_points_found_before_are_started_from(cells: np.ndarray):
    everything, wanted = [Training(cells, PRESSURE)], Wanted(6, 0.0, "matched", "optimised")
    before, _ = choose(wanted, some(cells), 1)
    anew, _ = choose(wanted, everything, 1)
    after, how = choose(wanted, everything, 1, before)
    assert largest(before, cells) > 1.2 * largest(after, cells)
    assert largest(after, cells) < 1.05 * largest(anew, cells)
    np.testing.assert_allclose(largest(after, cells), how["trained_error"], rtol=1e-12)
    again, _ = choose(wanted, everything, 1, before)
    np.testing.assert_array_equal(again.bounds, after.bounds)


def test_a_target_is_met_with_no_fewer_than_before(cells: np.ndarray):
    wanted = Wanted(None, 4e-3, "matched", "optimised")
    before, _ = choose(wanted, some(cells), 1)
    after, how = choose(wanted, [Training(cells, PRESSURE)], 1, before)
    assert after.count > before.count
    assert largest(after, cells) <= how["target"] == 4e-3
    same, _ = choose(wanted, some(cells), 1, after)
    assert same.count == after.count


@pytest.mark.parametrize("count", [6, None])
def test_bands_of_their_own_side_by_side(cells: np.ndarray, count: int | None):
    wanted, everything = Wanted(count, 4e-3, "matched", "optimised-per-band"), [Training(cells, PRESSURE)]
    before, _ = choose(wanted, some(cells), 1)
    after, how = choose(wanted, everything, 1, before)
    assert after.bounds.shape == (3, after.count + 1)
    np.testing.assert_array_equal(after.bounds[2], g_points(after.count).bounds)
    assert largest_of_bands(after, cells) <= how["trained_error"] * (1 + 1e-12)
    with ThreadPoolExecutor(3) as executor:
        threads, _ = choose(wanted, everything, 1, before, executor)
    np.testing.assert_array_equal(threads.bounds, after.bounds)


def largest_of_bands(points: GPoints, cells: np.ndarray) -> float:
    """The largest error of all bands, each with its own points."""
    bands = range(2)
    return max(largest(points_of_bounds(points.bounds[band]), cells[:, band : band + 1]) for band in bands)
