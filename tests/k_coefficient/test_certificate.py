import json

import numpy as np
import pytest

from opacity.k_coefficient.bands import band_points
from opacity.k_coefficient.certificate import band_errors, certify, fine_cell_errors, random_pairs, two_layer_error
from opacity.k_coefficient.collapse import CELL_WIDTHS, N_CELLS, fine_cells
from opacity.k_coefficient.quadrature import g_points, k_from_cells
from opacity.k_coefficient.transmission import columns_of

NU = np.linspace(1000.0, 1003.0, 60_001)
EDGES = np.array([1000.0, 1001.0, 1003.0])
PRESSURE = np.array([1e-3, 0.1, 5.0])


@pytest.fixture(scope="module")
def spectra() -> np.ndarray:
    """Elsasser combs whose lines widen with pressure, (3, n_nu)."""
    combs = [np.sinh(2 * np.pi * y) / (np.cosh(2 * np.pi * y) - np.cos(2 * np.pi * NU)) for y in (0.02, 0.05, 0.2)]
    return 1e-22 * np.array(combs)


@pytest.fixture(scope="module")
def cells(spectra: np.ndarray) -> np.ndarray:
    return fine_cells(spectra, NU, EDGES)


def test_errors_are_those_of_transmissions_taken_one_by_one(cells: np.ndarray):
    points = g_points(6)
    k = k_from_cells(cells, points)
    for band, found in enumerate(band_errors(k, points.weights, cells, PRESSURE)):
        columns = columns_of(cells[:, band], PRESSURE)
        errors = np.array(
            [
                [
                    np.exp(-k[n, band] * u) @ points.weights - np.exp(-cells[n, band] * u) @ CELL_WIDTHS
                    for u in columns[n]
                ]
                for n in range(3)
            ]
        )
        worst = np.unravel_index(np.argmax(np.abs(errors)), errors.shape)
        np.testing.assert_allclose(found.largest, errors[worst], rtol=1e-9)
        assert found.node == worst[0]
        np.testing.assert_allclose(found.column, columns[worst])
        np.testing.assert_allclose(found.p99, np.percentile(np.abs(errors), 99.0, method="inverted_cdf"), rtol=0.04)
        assert abs(found.mean) < 1e-12


def test_a_planted_fault_is_found(cells: np.ndarray):
    points = g_points(16)
    k = k_from_cells(cells, points)
    k[1, 1] *= 1.05
    healthy, faulty = band_errors(k, points.weights, cells, PRESSURE)
    assert faulty.node == 1
    # More opacity transmits less.
    assert faulty.largest < -5e-3
    np.testing.assert_allclose(faulty.mean, 0.05, rtol=1e-9)
    assert abs(healthy.largest) < abs(faulty.largest)
    assert abs(healthy.mean) < 1e-12


def test_fine_cells_against_spectra(cells: np.ndarray, spectra: np.ndarray):
    points = band_points(NU, EDGES)
    assert max(fine_cell_errors(cells, spectra, points, PRESSURE)) < 2e-5
    wrong = np.sort(np.roll(cells, 1, axis=0), axis=-1)
    assert min(fine_cell_errors(wrong, spectra, points, PRESSURE)) > 1e-2


def test_two_layers_of_one_node_are_one_layer(cells: np.ndarray, spectra: np.ndarray):
    points, g = band_points(NU, EDGES), g_points(16)
    k = k_from_cells(cells, g)
    same = two_layer_error(k, g.weights, cells, spectra, points, PRESSURE, [(0, 0), (2, 2)])
    alone = max(abs(band.largest) for band in band_errors(k, g.weights, cells, PRESSURE))
    assert same.largest < 2.0 * alone
    assert same.pairs == ((0, 0), (2, 2))


def test_layers_whose_lines_lie_apart_are_not_correlated(cells: np.ndarray, spectra: np.ndarray):
    # The same distributions, the lines of one layer moved into the gaps of the other.
    points, g = band_points(NU, EDGES), g_points(16)
    moved = spectra.copy()
    moved[1, :-1] = np.roll(spectra[1, :-1], 10_000)
    k = k_from_cells(cells, g)
    together = two_layer_error(k, g.weights, cells, spectra, points, PRESSURE, [(0, 1)])
    apart = two_layer_error(k, g.weights, cells, moved, points, PRESSURE, [(0, 1)])
    assert apart.largest > 0.1
    assert together.largest < 0.1 * apart.largest


def test_pairs_are_drawn_by_seed():
    pairs = random_pairs(10, 30, seed=5)
    assert pairs == random_pairs(10, 30, seed=5)
    assert pairs != random_pairs(10, 30, seed=6)
    assert all(a != b and min(a, b) >= 0 and max(a, b) < 10 for a, b in pairs)
    assert random_pairs(1, 30, seed=5) == ()


def test_a_certificate_goes_into_json(cells: np.ndarray, spectra: np.ndarray):
    g = g_points(8)
    k = k_from_cells(cells, g)
    found = certify(k, g.weights, cells, PRESSURE, spectra, band_points(NU, EDGES), 4, 1, np.array([0, 2]))
    plain = json.loads(json.dumps(found.as_dict()))
    assert plain["bands"][1]["largest"] == found.bands[1].largest
    assert found.largest == max(abs(band.largest) for band in found.bands)
    assert len(plain["fine_cells"]) == 2
    assert len(plain["two_layers"]["pairs"]) == 4
    assert plain["trained_nodes"] == [0, 2]
    assert plain["column_a_bar"] == 2.6e28
    without = certify(k, g.weights, cells, PRESSURE)
    assert without.fine_cells is None
    assert without.two_layers is None
    assert without.bands == found.bands


def test_empty_bands_have_no_error():
    k, cells = np.zeros((3, 1, 8)), np.zeros((3, 1, N_CELLS))
    (found,) = certify(k, g_points(8).weights, cells, PRESSURE).bands
    assert (found.largest, found.p99, found.mean) == (0.0, 0.0, 0.0)
