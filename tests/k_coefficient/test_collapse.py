from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pytest

from opacity.errors import InputError
from opacity.k_coefficient.bands import band_points
from opacity.k_coefficient.collapse import CELL_BOUNDS, CELL_WIDTHS, N_CELLS, fine_cells, merge_cells
from opacity.k_coefficient.transmission import transmission

from . import slow


def spectra(n: int) -> dict[str, np.ndarray]:
    """Spectra of all kinds, (n,) each."""
    random = np.random.default_rng(7)
    smooth = 1e-22 * np.exp(3.0 * np.sin(np.arange(n) / 7.0))
    gaps = np.where(random.uniform(size=n) < 0.4, 0.0, smooth)
    return {
        "smooth": smooth,
        "with gaps": gaps,
        "200 decades": 10.0 ** random.uniform(-220.0, -20.0, n),
        "constant": np.full(n, 3.7e-21),
        "equal to 1e-9": 1e-20 * (1.0 + 1e-9 * random.uniform(size=n)),
        "one line": np.where(np.arange(n) == n // 2, 1e-18, 0.0),
        "few values": random.choice([1e-25, 2e-25, 5e-21], n),
        "empty": np.zeros(n),
    }


@pytest.mark.nojit
@pytest.mark.parametrize("name", spectra(2))
@pytest.mark.parametrize("n", [7, 900])
def test_cells_are_those_of_the_slow_twin(name: str, n: int):
    sigma = spectra(n)[name]
    for nu in (np.linspace(1000.0, 1010.0, n), np.geomspace(1000.0, 1010.0, n)):
        edges = np.array([1000.0, 1002.0013, 1007.77, 1010.0])
        found = fine_cells(sigma, nu, edges)
        for band, cells in enumerate(found):
            expected = slow.cells(nu, sigma, edges[band], edges[band + 1], CELL_BOUNDS)
            # The order is that of 23 bits; within those values are equal.  What a cell holds of a neighbour's by
            # rounding of g is below 1e-11 of the largest.
            np.testing.assert_allclose(cells, expected, rtol=3e-7, atol=1e-9 * sigma.max())
            np.testing.assert_array_equal(cells[expected == 0.0], 0.0)


@pytest.mark.nojit
@pytest.mark.parametrize("name", spectra(2))
def test_the_mean_is_exact_and_cells_rise(name: str):
    nu, edges = np.linspace(1000.0, 1010.0, 1001), np.array([1000.001, 1003.3333, 1010.0])
    sigma = spectra(nu.size)[name]
    points, cells = band_points(nu, edges), fine_cells(sigma, nu, edges)
    for band in range(2):
        inside = sigma[points.first[band] : points.last[band]]
        weights = points.weights(band)
        mean = inside @ weights / weights.sum()
        np.testing.assert_allclose(cells[band] @ CELL_WIDTHS, mean, rtol=1e-12)
    assert np.all(np.diff(cells, axis=1) >= 0.0)
    assert np.all(cells >= 0.0)


def test_a_constant_spectrum_has_constant_cells():
    nu = np.linspace(1000.0, 1010.0, 12345)
    cells = fine_cells(np.full(nu.size, 3.7e-21), nu, np.array([1000.0, 1004.0, 1010.0]))
    np.testing.assert_allclose(cells, 3.7e-21, rtol=1e-9)


def test_zero_opacity_stays_zero():
    nu = np.linspace(0.0, 10.0, 10001)
    sigma = np.where(nu < 7.5, 0.0, 1e-20)
    cells = fine_cells(sigma, nu, np.array([0.0, 10.0]))[0]
    share = (nu.size - np.count_nonzero(sigma) - 0.5) * 1e-3 / 10.0
    assert np.all(cells[CELL_BOUNDS[1:] < share - 1e-9] == 0.0)
    assert np.all(cells[CELL_BOUNDS[:-1] > share + 1e-9] > 0.9e-20)


def test_smaller_values_than_any_key_tells_apart_are_not_taken_for_zero():
    nu = np.linspace(0.0, 1.0, 1001)
    sigma = np.concatenate([np.full(500, 1e-300), np.zeros(300), np.full(201, 1.0)])
    cells = fine_cells(sigma, nu, np.array([0.0, 1.0]))[0]
    assert np.all(cells[CELL_BOUNDS[1:] < 0.299] == 0.0)
    between = cells[(CELL_BOUNDS[:-1] > 0.301) & (CELL_BOUNDS[1:] < 0.79)]
    np.testing.assert_allclose(between, 1e-300, rtol=1e-12)


def test_any_number_of_workers_gives_the_same_bits():
    nu = np.linspace(1000.0, 1400.0, 400_001)
    sigma = np.random.default_rng(1).lognormal(size=(3, nu.size)) * 1e-22
    edges = np.linspace(1000.0, 1400.0, 31)
    one = fine_cells(sigma, nu, edges)
    with ThreadPoolExecutor(3) as executor:
        np.testing.assert_array_equal(fine_cells(sigma, nu, edges, executor), one)
    assert one.shape == (3, 30, N_CELLS)
    np.testing.assert_array_equal(fine_cells(sigma[1], nu, edges), one[1])


@pytest.mark.parametrize("bad", [np.nan, np.inf, -1e-30])
def test_impossible_spectra_are_refused(bad: float):
    nu = np.linspace(1.0, 2.0, 11)
    sigma = np.ones((2, 11))
    sigma[1, 3] = bad
    with pytest.raises(InputError, match=r"sigma: impossible value.*at 1\.3 cm-1 \(spectrum 1\)"):
        fine_cells(sigma, nu, np.array([1.0, 2.0]))


def test_a_negative_zero_is_zero():
    nu = np.linspace(1.0, 2.0, 11)
    assert np.all(fine_cells(np.full(11, -0.0), nu, np.array([1.0, 2.0])) == 0.0)


def test_a_spectrum_of_another_length_is_refused():
    with pytest.raises(InputError, match=r"sigma: does not fit the wavenumbers.*last axis of 11"):
        fine_cells(np.ones(10), np.linspace(1.0, 2.0, 11), np.array([1.0, 2.0]))


def test_parts_of_a_band_are_merged():
    # An Elsasser comb whose strength grows along the band, so that its parts differ.
    nu = np.linspace(1000.0, 1100.0, 200_001)
    sigma = np.exp((nu - 1000.0) / 20.0) / (np.cosh(0.2) - np.cos(2.0 * np.pi * nu))
    whole = fine_cells(sigma, nu, np.array([1000.0, 1100.0]))[0]
    parts = fine_cells(sigma, nu, np.array([1000.0, 1017.0, 1060.0, 1100.0]))
    merged = merge_cells(list(parts), [17.0, 43.0, 40.0])
    np.testing.assert_allclose(merged @ CELL_WIDTHS, whole @ CELL_WIDTHS, rtol=1e-12)
    columns = np.geomspace(1e-3, 1e3, 40)[None] / (whole @ CELL_WIDTHS)
    errors = np.abs(transmission(merged[None], CELL_WIDTHS, columns) - transmission(whole[None], CELL_WIDTHS, columns))
    assert errors.max() < 2e-5
    np.testing.assert_allclose(merge_cells([parts], [1.0]), parts, rtol=1e-14)


def test_parts_without_widths_are_refused():
    with pytest.raises(InputError, match="widths: impossible"):
        merge_cells([np.ones(N_CELLS)], [0.0])
