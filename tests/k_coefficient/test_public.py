import numpy as np
import pytest

import opacity
from opacity.errors import InputError
from opacity.k_coefficient.collapse import fine_cells
from opacity.k_coefficient.quadrature import QUADRATURES, g_points, k_from_cells

NU = np.linspace(1000.0, 1010.0, 2001)
SIGMA = np.random.default_rng(0).lognormal(sigma=2.0, size=(2, 3, NU.size)) * 1e-22
EDGES = [1000.0, 1004.0, 1010.0]


@pytest.mark.parametrize("quadrature", QUADRATURES)
def test_k_and_weights_of_spectra(quadrature: str):
    k, weights = opacity.k_coefficients(SIGMA, wavenumber=NU, band_edges=EDGES, g_points=12, quadrature=quadrature)
    assert k.shape == (2, 3, 2, 12)
    assert weights.shape == (12,)
    cells = fine_cells(SIGMA[1, 2], NU, np.array(EDGES))
    np.testing.assert_array_equal(k[1, 2], k_from_cells(cells, g_points(12, quadrature)))


def test_one_spectrum_and_what_is_usual():
    k, weights = opacity.k_coefficients(SIGMA[0, 0], wavenumber=NU.tolist(), band_edges=EDGES)
    assert k.shape == (2, 16)
    np.testing.assert_allclose(weights, g_points(16, "matched").weights)
    again, _ = opacity.k_coefficients(SIGMA[0, 0], wavenumber=NU, band_edges=EDGES, workers=2)
    np.testing.assert_array_equal(again, k)


def test_bounds_of_the_callers_own():
    bounds = [0.0, 0.5, 0.9, 1.0]
    k, weights = opacity.k_coefficients(SIGMA, wavenumber=NU, band_edges=EDGES, g_points=bounds)
    assert k.shape == (2, 3, 2, 3)
    np.testing.assert_allclose(weights, [0.5, 0.4, 0.1])


@pytest.mark.parametrize(
    "changes, expected",
    [
        ({"g_points": 0}, "^g_points: impossible"),
        ({"g_points": None}, "^g_points: impossible"),
        ({"g_points": "auto"}, "^g_points: impossible"),
        ({"g_points": [[0.0, 0.5, 1.0], [0.0, 0.4, 1.0]]}, r"^g_points: impossible.*shape \(2, 3\)"),
        ({"quadrature": "simpson"}, "^quadrature: unknown"),
        ({"band_edges": [900.0, 1010.0]}, "^band_edges: beyond the spectrum"),
        ({"band_edges": 5.0}, "^band_edges: no band"),
        ({"sigma": SIGMA[..., :-1]}, "^sigma: does not fit"),
        ({"sigma": "x"}, "^sigma: not numbers"),
        ({"sigma": -SIGMA}, "^sigma: impossible value"),
        ({"wavenumber": NU[::-1]}, "^wavenumber: not in rising order"),
        ({"workers": 0}, "^workers: impossible"),
    ],
)
def test_what_cannot_be_right_is_refused_in_one_line(changes: dict, expected: str):
    arguments = {"sigma": SIGMA, "wavenumber": NU, "band_edges": EDGES} | changes
    with pytest.raises(InputError, match=expected) as caught:
        opacity.k_coefficients(arguments.pop("sigma"), **arguments)
    assert "\n" not in str(caught.value)
