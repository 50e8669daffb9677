import numpy as np
import pytest

from opacity.errors import InputError
from opacity.k_coefficient.collapse import CELL_WIDTHS, N_CELLS, fine_cells
from opacity.k_coefficient.optimise import (
    choose_g_points,
    joined,
    optimise_weights,
    rows_by_band,
    rows_of,
    training_nodes,
)
from opacity.k_coefficient.quadrature import g_points
from opacity.k_coefficient.transmission import BLACK, COLUMN_A_BAR, THINNEST, columns_of, transmission

PRESSURE = np.geomspace(1e-4, 10.0, 6)


@pytest.fixture(scope="module")
def cells() -> np.ndarray:
    """Elsasser combs of two bands at six pressures, strengths 1e-22 and 1e-20, (6, 2, N_CELLS)."""
    nu = np.linspace(1000.0, 1001.0, 20_001)
    widths = 0.05 * PRESSURE**0.4
    sigma = [np.sinh(2 * np.pi * y) / (np.cosh(2 * np.pi * y) - np.cos(2 * np.pi * nu)) for y in widths]
    one = fine_cells(np.array(sigma), nu, np.array([1000.0, 1001.0]))[:, 0]
    two = fine_cells(np.array(sigma) ** 1.7, nu, np.array([1000.0, 1001.0]))[:, 0]
    return np.stack([1e-22 * one, 1e-20 * two], axis=1)


def test_columns_go_from_thin_to_black(cells: np.ndarray):
    flat = cells.reshape(-1, N_CELLS)
    columns = columns_of(flat, np.full(len(flat), 1e6))
    through = transmission(flat, CELL_WIDTHS, columns)
    np.testing.assert_allclose(through[:, 0], THINNEST, atol=1e-5)
    np.testing.assert_allclose(through[:, -1], BLACK, rtol=1e-3)
    steps = np.diff(np.log(columns), axis=1)
    np.testing.assert_allclose(steps, np.repeat(steps[:, :1], 63, axis=1), rtol=1e-9)
    capped = columns_of(flat, np.full(len(flat), 1e-7))
    np.testing.assert_allclose(capped.max(), 1e-7 * COLUMN_A_BAR, rtol=1e-12)


def test_columns_of_bands_that_stay_clear():
    part = np.where(np.arange(N_CELLS) < 200, 0.0, 1e-20)
    columns = columns_of(np.array([part, np.zeros(N_CELLS)]), np.array([1e9, 1.0]))
    clear = CELL_WIDTHS[:200].sum()
    np.testing.assert_allclose(np.exp(-1e-20 * columns[0, -1]), 1e-6, rtol=1e-2)
    np.testing.assert_allclose(clear + (1 - clear) * np.exp(-1e-20 * columns[0, 0]), THINNEST, rtol=1e-5)
    assert np.all(columns[1] == 0.0)


def test_transmission_by_loops(cells: np.ndarray):
    k, weights = cells.reshape(-1, N_CELLS)[:5], CELL_WIDTHS
    columns = np.geomspace(1e18, 1e26, 9) * np.ones((5, 1))
    expected = [
        [sum(w * np.exp(-min(x * u, 745.0)) for w, x in zip(weights, row, strict=True)) for u in columns[0]]
        for row in k
    ]
    np.testing.assert_allclose(transmission(k, weights, columns), expected, rtol=1e-11, atol=1e-300)


@pytest.mark.parametrize("count", [4, 10])
def test_fitted_weights_are_better_and_the_same_each_time(cells: np.ndarray, count: int):
    rows = rows_of(cells, PRESSURE)
    fixed = np.max(np.abs(rows.errors(g_points(count))))
    found = optimise_weights(rows, count, seed=3, trials=2)
    assert found.error < 0.6 * fixed
    np.testing.assert_allclose(np.max(np.abs(rows.errors(found.points))), found.error, rtol=1e-12)
    again = optimise_weights(rows, count, seed=3, trials=2)
    np.testing.assert_array_equal(again.points.weights, found.points.weights)
    assert found.points.count == count
    np.testing.assert_allclose(found.points.weights.sum(), 1.0, rtol=1e-12)


def test_no_step_of_one_weight_is_better(cells: np.ndarray):
    # The descent ends in a minimum along each coordinate, within its norm's own flatness.
    rows = rows_of(cells, PRESSURE)
    found = optimise_weights(rows, 5, trials=1)
    from opacity.k_coefficient.quadrature import points_of_bounds

    for i in range(5):
        for factor in (0.9, 1.1):
            weights = found.points.weights.copy()
            weights[i] *= factor
            bounds = np.concatenate([[0.0], np.cumsum(weights / weights.sum())])
            bounds[-1] = 1.0
            assert np.max(np.abs(rows.errors(points_of_bounds(bounds)))) > 0.97 * found.error


def test_weights_of_each_band_and_of_several_species(cells: np.ndarray):
    shared = optimise_weights(rows_of(cells, PRESSURE), 6).error
    own = [optimise_weights(rows, 6).error for rows in rows_by_band(cells, PRESSURE)]
    assert max(own) <= 1.02 * shared
    other = rows_of(1e3 * np.sqrt(cells) * 1e-11, PRESSURE)
    both = joined([rows_of(cells, PRESSURE), other])
    assert len(both.cells) == 24
    found = optimise_weights(both, 6)
    for rows in (other, rows_of(cells, PRESSURE)):
        assert np.max(np.abs(rows.errors(found.points))) <= found.error * (1 + 1e-12)


def test_empty_bands_are_left_out(cells: np.ndarray):
    some = cells.copy()
    some[2, 1] = 0.0
    assert len(rows_of(some, PRESSURE).cells) == 11
    nothing = rows_of(np.zeros_like(cells), PRESSURE)
    assert optimise_weights(nothing, 4).error == 0.0


@pytest.mark.parametrize("target", [2e-2, 4e-3])
def test_points_chosen_for_a_target(cells: np.ndarray, target: float):
    everything, training = rows_of(cells, PRESSURE), rows_of(cells[::5], PRESSURE[::5])
    found = choose_g_points(target, training, everything)
    assert found.trained_error <= 0.6 * target
    assert found.error <= target
    np.testing.assert_allclose(np.max(np.abs(everything.errors(found.points))), found.error, rtol=1e-12)
    assert (found.rows, found.target) == (12, target)
    # With a third fewer the fixed bounds are far from it, and even fitted ones do not keep the target.
    fewer = max(1, 2 * found.points.count // 3)
    assert optimise_weights(everything, fewer).error > 0.6 * target


def test_violators_are_trained_on(cells: np.ndarray):
    # Trained on the smooth bands alone the points would not do for the others.
    everything, training = rows_of(cells, PRESSURE), rows_of(cells[-1:], PRESSURE[-1:])
    alone = optimise_weights(training, choose_g_points(1e-2, training, training).points.count)
    assert np.max(np.abs(everything.errors(alone.points))) > 1e-2
    found = choose_g_points(1e-2, training, everything)
    assert found.error <= 1e-2
    assert found.trained_rows > 2


@pytest.mark.parametrize("target", [0.0, 1.0, -1.0, np.nan])
def test_impossible_targets(cells: np.ndarray, target: float):
    rows = rows_of(cells, PRESSURE)
    with pytest.raises(InputError, match="transmission_error: impossible"):
        choose_g_points(target, rows, rows)


def test_cells_must_fit_the_pressures(cells: np.ndarray):
    with pytest.raises(InputError, match=r"cells: of another shape.*\(5, n_band, 398\)"):
        rows_of(cells, PRESSURE[:5])


def test_training_nodes_hold_the_extremes():
    temperature, pressure = np.repeat([200.0, 500.0, 900.0], 4), np.tile([1e-4, 1e-2, 1.0, 10.0], 3)
    assert training_nodes(temperature, pressure, 4, seed=0).tolist() == [0, 3, 8, 11]
    some = training_nodes(temperature, pressure, 7, seed=0)
    assert {0, 3, 8, 11} < set(some.tolist())
    assert some.size == 7
    np.testing.assert_array_equal(some, training_nodes(temperature, pressure, 7, seed=0))
    assert training_nodes(temperature, pressure, 99, seed=0).tolist() == list(range(12))
    # A profile: nodes that are no grid.
    assert {0, 2} <= set(training_nodes(np.array([200.0, 300.0, 400.0]), np.array([1.0, 0.1, 0.01]), 2, 0).tolist())
