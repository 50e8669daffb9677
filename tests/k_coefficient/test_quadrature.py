import numpy as np
import pytest

from opacity.errors import InputError
from opacity.k_coefficient.collapse import CELL_BOUNDS, CELL_WIDTHS, N_CELLS
from opacity.k_coefficient.quadrature import (
    QUADRATURES,
    g_points,
    k_from_cells,
    points_of_bounds,
    points_of_weights,
)

from . import slow


def rows() -> np.ndarray:
    """Rising cells of all kinds, (n_row, N_CELLS)."""
    random = np.random.default_rng(5)
    g = np.cumsum(CELL_WIDTHS)
    return np.array(
        [
            1e-22 * g,
            np.sort(10.0 ** random.uniform(-30.0, -18.0, N_CELLS)),
            np.where(g < 0.6, 0.0, 1e-20 * g**8),
            np.full(N_CELLS, 2e-21),
            np.where(np.arange(N_CELLS) == N_CELLS - 1, 1e-16, 0.0),
            np.where(g < 0.3, 1e-40, 1e-20),
            np.zeros(N_CELLS),
        ]
    )


@pytest.mark.nojit
@pytest.mark.parametrize("count", [1, 2, 8, 16, 20])
def test_matched_intervals_are_those_of_the_slow_twin(count: int):
    points = g_points(count)
    k = k_from_cells(rows(), points)
    for row, found in zip(rows(), k, strict=True):
        expected = slow.matched(row, CELL_WIDTHS, points.bounds, points.depth)
        np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-13 * row.max())


@pytest.mark.nojit
@pytest.mark.parametrize("part", [5e-4, 1e-9, 1e-14, 0.0])
def test_bounds_that_leave_a_trace_of_a_cell(part: float):
    # What is left of cell 99 counts; unless it is rounding the interval above must not be counted from its value.
    bounds = np.array([0.0, CELL_BOUNDS[100] - part * CELL_WIDTHS[99], CELL_BOUNDS[300], 1.0])
    k = k_from_cells(rows(), points_of_bounds(bounds))
    for row, found in zip(rows(), k, strict=True):
        expected = slow.matched(row, CELL_WIDTHS, bounds, 1.5)
        np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-13 * row.max())


@pytest.mark.nojit
def test_bounds_of_each_band():
    cells = np.stack([rows()[:2], rows()[1:3]])
    bounds = np.array([[0.0, 0.3, 0.95, 1.0], [0.0, 0.123, 0.6, 1.0]])
    k = k_from_cells(cells, points_of_bounds(bounds))
    for node in range(2):
        for band in range(2):
            expected = k_from_cells(cells[node, band], points_of_bounds(bounds[band]))
            np.testing.assert_array_equal(k[node, band], expected)
    with pytest.raises(InputError, match="cells: of another shape"):
        k_from_cells(cells[:, :1], points_of_bounds(bounds))


@pytest.mark.parametrize("quadrature", ["matched", "interval-mean"])
@pytest.mark.parametrize("count", [1, 3, 16, 63])
def test_the_mean_is_exact(quadrature: str, count: int):
    points = g_points(count, quadrature)
    k = k_from_cells(rows(), points)
    np.testing.assert_allclose(k @ points.weights, rows() @ CELL_WIDTHS, rtol=1e-12)


@pytest.mark.nojit
@pytest.mark.parametrize("quadrature", QUADRATURES)
def test_k_rises_and_empty_stays_empty(quadrature: str):
    for count in (2, 5, 16):
        points = g_points(count, quadrature)
        k = k_from_cells(rows(), points)
        assert np.all(np.diff(k, axis=-1) >= 0.0)
        assert np.all(np.isfinite(k))
        assert np.all(k[-1] == 0.0)
        np.testing.assert_allclose(points.weights.sum(), 1.0, rtol=1e-12)
        np.testing.assert_allclose(np.diff(points.bounds), points.weights, atol=1e-12)
        np.testing.assert_allclose(k[3], 2e-21, rtol=1e-12)


def test_intervals_without_opacity_are_zero():
    # 60 % of the band are empty.
    k = k_from_cells(rows(), g_points(16))[2]
    assert np.all(k[g_points(16).bounds[1:] < 0.59] == 0.0)
    assert np.all(k[g_points(16).bounds[:-1] > 0.6] > 0.0)


@pytest.mark.nojit
def test_interval_means():
    points = points_of_bounds([0.0, 0.31, 0.77, 1.0], "interval-mean")
    found = k_from_cells(rows(), points)
    for row, k in zip(rows(), found, strict=True):
        steps = slow.steps_of(row, CELL_WIDTHS)
        expected = [slow.mean_over(steps, *pair) for pair in ((0.0, 0.31), (0.31, 0.77), (0.77, 1.0))]
        np.testing.assert_allclose(k, expected, rtol=1e-11)


def test_gauss_legendre_integrates_what_it_must():
    # Exact for polynomials up to degree 2n - 1 (Abramowitz & Stegun 25.4.29).
    for name, count in (("gauss-legendre", 5), ("split", 10)):
        points = g_points(count, name)
        for power in range(10):
            np.testing.assert_allclose(points.weights @ points.g**power, 1.0 / (power + 1), rtol=1e-12)
    assert np.sum(g_points(16, "split").g > 0.95) == 8


def test_points_lie_on_the_distribution():
    g = np.cumsum(CELL_WIDTHS) - 0.5 * CELL_WIDTHS
    points = g_points(12, "gauss-legendre")
    np.testing.assert_allclose(
        k_from_cells(np.exp(-50.0 + 9.0 * g), points), np.exp(-50.0 + 9.0 * points.g), rtol=1e-10
    )


@pytest.mark.parametrize(
    "count, quadrature, expected",
    [
        (0, "matched", "g_points: impossible.*from 1 to 200"),
        (True, "matched", "g_points: impossible"),
        (2.5, "matched", "g_points: impossible"),
        (1, "split", "g_points: impossible.*from 2 to 200"),
        (16, "legendre", 'quadrature: unknown.*"gauss-legendre"'),
        (16, None, "quadrature: unknown"),
    ],
)
def test_impossible_quadratures(count: object, quadrature: object, expected: str):
    with pytest.raises(InputError, match=expected):
        g_points(count, quadrature)


@pytest.mark.parametrize("bounds", [[0.0], [0.1, 1.0], [0.0, 0.9], [0.0, 0.5, 0.5, 1.0], [0.0, np.nan, 1.0], "x"])
def test_impossible_bounds(bounds: object):
    with pytest.raises(InputError, match="g_points: "):
        points_of_bounds(bounds)


def test_bounds_do_not_fit_points():
    with pytest.raises(InputError, match="bounds do not fit the quadrature"):
        points_of_bounds([0.0, 1.0], "split")


@pytest.mark.parametrize("quadrature", QUADRATURES)
def test_a_quadrature_is_known_by_its_weights(quadrature: str):
    made = g_points(16, quadrature)
    again = points_of_weights(made.weights, quadrature)
    np.testing.assert_allclose(again.bounds, made.bounds, atol=1e-12)
    np.testing.assert_allclose(again.g, made.g, atol=1e-12)


@pytest.mark.parametrize(
    "weights, quadrature, expected",
    [
        ([0.5, 0.4], "matched", "weights: impossible"),
        ([1.5, -0.5], "matched", "weights: impossible"),
        ([[1.0]], "matched", "weights: impossible"),
        ([0.5, 0.25, 0.25], "gauss-legendre", "weights: of another quadrature"),
    ],
)
def test_impossible_weights(weights: list, quadrature: str, expected: str):
    with pytest.raises(InputError, match=expected):
        points_of_weights(weights, quadrature)
