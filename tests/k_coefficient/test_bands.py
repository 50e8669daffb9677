import numpy as np
import pytest

from opacity.errors import InputError
from opacity.k_coefficient.bands import (
    as_band_edges,
    band_points,
    edges_of_resolving_power,
    edges_of_wavelengths,
    edges_of_width,
)

from .slow import point_weights

GRIDS = {
    "even": np.linspace(100.0, 110.0, 401),
    "even in log": np.geomspace(100.0, 110.0, 377),
    "uneven": np.concatenate([[100.0], 100.0 + 10.0 * np.sort(np.random.default_rng(3).uniform(size=300)), [110.0]]),
}


def test_bands_of_a_resolving_power_fill_the_range():
    edges = edges_of_resolving_power(1000.0, 5000.0, 100.0)
    assert edges[0] == 1000.0
    assert edges[-1] == 5000.0
    ratios = edges[1:] / edges[:-1]
    np.testing.assert_allclose(ratios, ratios[0], rtol=1e-12)
    middles = 0.5 * (edges[1:] + edges[:-1])
    assert np.all(middles / np.diff(edges) >= 100.0)
    # One band less would be too few.
    assert 1.0 / np.log(5000.0 / 1000.0) * (edges.size - 2) < 100.0


def test_bands_of_a_width():
    np.testing.assert_allclose(edges_of_width(10.0, 40.0, 10.0), [10.0, 20.0, 30.0, 40.0])
    with pytest.raises(InputError, match="not a whole number of steps"):
        edges_of_width(10.0, 45.0, 10.0)


@pytest.mark.parametrize("wavelengths", [[1.0, 2.0, 5.0], [5.0, 2.0, 1.0]])
def test_wavelengths_in_micrometres(wavelengths: list[float]):
    # A wavelength of 1 micrometre is 10,000 cm-1 by definition.
    np.testing.assert_allclose(edges_of_wavelengths(wavelengths), [2000.0, 5000.0, 10000.0])


@pytest.mark.parametrize("wavelengths", [[1.0, 3.0, 2.0], [0.0, 1.0], ["a", "b"]])
def test_impossible_wavelengths(wavelengths: list):
    with pytest.raises(InputError, match=r"^wavelength: "):
        edges_of_wavelengths(wavelengths)


@pytest.mark.parametrize(
    "edges, expected",
    [
        ([5.0], "band_edges: no band"),
        ([5.0, 4.0], "band_edges: not in rising order"),
        ([1.0, np.nan], "band_edges: impossible value"),
        ("abc", "band_edges: not numbers"),
        ([[1.0, 2.0]], "band_edges: no band"),
        ([-1.0, 2.0], "band_edges: impossible value"),
    ],
)
def test_impossible_edges(edges: object, expected: str):
    with pytest.raises(InputError, match=expected):
        as_band_edges(edges)


def test_the_first_edge_may_be_zero():
    np.testing.assert_array_equal(as_band_edges([0.0, 2.0]), [0.0, 2.0])


@pytest.mark.parametrize("name", GRIDS)
def test_each_point_counts_as_far_as_its_cell_lies_inside(name: str):
    nu = GRIDS[name]
    # Between points, on a point, on a border of cells, and two edges within one cell.
    border = 0.5 * (nu[200] + nu[201])
    edges = np.array([100.0, 100.003, nu[100], border, border + 1e-4, border + 2e-4, 109.9999, 110.0])
    points = band_points(nu, edges)
    for band in range(edges.size - 1):
        expected = point_weights(nu, edges[band], edges[band + 1])
        inside = slice(points.first[band], points.last[band])
        np.testing.assert_allclose(points.weights(band), expected[inside], rtol=0, atol=1e-13)
        assert np.sum(expected) - np.sum(expected[inside]) < 1e-13
        np.testing.assert_allclose(points.weights(band).sum(), edges[band + 1] - edges[band], rtol=0, atol=1e-12)


@pytest.mark.parametrize("edges", [[99.9, 105.0], [105.0, 110.1]])
def test_bands_beyond_the_grid_are_refused(edges: list[float]):
    with pytest.raises(InputError, match=r"band_edges: beyond the spectrum.*edges from 100 to 110 cm-1"):
        band_points(GRIDS["even"], np.array(edges))


def test_an_edge_that_differs_from_the_end_by_rounding_is_the_end():
    points = band_points(GRIDS["even"], np.array([100.0 - 1e-12, 110.0 + 1e-12]))
    assert (points.first[0], points.last[0]) == (0, 401)
    assert points.edges.tolist() == [100.0, 110.0]
