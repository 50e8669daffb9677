"""Band models whose k-distribution or transmission is known: Elsasser, Ladenburg and Reiche, Malkmus.

Values of tests/reference/data/analytic_band_models.csv, which says where each formula is from and how its values were
checked; Ladenburg & Reiche 1913 and Malkmus 1967 (J. Opt. Soc. Am. 57, 323) are cited from memory.
"""

import csv
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import erfc

import opacity
from opacity.k_coefficient.collapse import CELL_BOUNDS, CELL_WIDTHS, fine_cells
from opacity.k_coefficient.quadrature import GPoints, g_points, k_from_cells
from opacity.k_coefficient.transmission import transmission

REFERENCE = Path(__file__).parents[1] / "reference" / "data" / "analytic_band_models.csv"


def values_of(model: str) -> list[tuple[dict[str, float], float]]:
    """Arguments by name and the value, of one model of the file."""
    with open(REFERENCE, encoding="utf-8") as stream:
        rows = [row for row in csv.DictReader(stream) if row["model"] == model]
    assert rows
    found = []
    for row in rows:
        pairs = (part.split("=") for part in row["arguments"].split(", "))
        found.append(({name.strip(): float(value) for name, value in pairs}, float(row["value"])))
    return found


def transmitted(cells: np.ndarray, column: float) -> float:
    return float(transmission(cells[None], CELL_WIDTHS, np.array([[column]]))[0, 0])


NU = np.linspace(1000.0, 1001.0, 200_001)
BAND = np.array([1000.0, 1001.0])


def elsasser(y: float) -> np.ndarray:
    """One line of a comb of equal Lorentz lines, spacing and S/d of 1, on NU."""
    return np.sinh(2.0 * np.pi * y) / (np.cosh(2.0 * np.pi * y) - np.cos(2.0 * np.pi * NU))


@pytest.mark.parametrize("arguments, expected", values_of("Elsasser k-distribution"))
def test_elsasser_k(arguments: dict[str, float], expected: float):
    cells = fine_cells(elsasser(arguments["y"]), NU, BAND)
    at = GPoints("gauss-legendre", np.array([arguments["g"]]), np.array([0.0, 1.0]), np.array([1.0]))
    # Linear in ln k between the middles of cells of up to 0.005, whose ends are missed by half a cell.
    np.testing.assert_allclose(k_from_cells(cells, at)[0, 0], expected, rtol=3e-4)


@pytest.mark.parametrize("y", [0.01, 0.1, 0.3, 1.0])
def test_elsasser_mean(y: float):
    k, weights = opacity.k_coefficients(elsasser(y), wavenumber=NU, band_edges=BAND, g_points=12)
    np.testing.assert_allclose(k[0] @ weights, 1.0, rtol=1e-9)


@pytest.mark.parametrize("arguments, expected", values_of("Elsasser band transmission"))
def test_elsasser_transmission(arguments: dict[str, float], expected: float):
    sigma, column = elsasser(arguments["y"]), arguments["S u/d"]
    np.testing.assert_allclose(transmitted(fine_cells(sigma, NU, BAND)[0], column), expected, rtol=0, atol=1e-5)
    k, weights = opacity.k_coefficients(sigma, wavenumber=NU, band_edges=BAND, g_points=16)
    np.testing.assert_allclose(np.exp(-k[0] * column) @ weights, expected, rtol=0, atol=3e-3)


@pytest.mark.parametrize("arguments, expected", values_of("Ladenburg-Reiche"))
def test_equivalent_width_of_a_lorentz_line(arguments: dict[str, float], expected: float):
    # Half-width 1, band of half-width `far`; W = 2 pi L(x).  Beyond the band the line is thin: S u a / (pi nu^2).
    x = arguments["x"]
    column, far = 2.0 * np.pi * x, 300.0 * max(1.0, np.sqrt(x))
    inner = np.linspace(-5.0, 5.0, 20_001)
    outer = np.geomspace(5.0, far, 60_001)[1:]
    nu = 1000.0 * far + np.concatenate([-outer[::-1], inner, outer])
    sigma = 1.0 / np.pi / (1.0 + (nu - 1000.0 * far) ** 2)
    edges = np.array([nu[0], nu[-1]])
    beyond = 2.0 * column / np.pi * np.arctan2(1.0, far)
    cells = fine_cells(sigma, nu, edges)[0]
    width = (1.0 - transmitted(cells, column)) * 2.0 * far + beyond
    # The fine cells' own error is 2e-5 of the band's width, seen where the line's is a small part of it.
    np.testing.assert_allclose(width, 2.0 * np.pi * expected, rtol=1e-3, atol=1e-5 * far)


def malkmus_g(k: np.ndarray | float, b: float) -> np.ndarray:
    """Share of the band below k (S = 1): Lacis & Oinas 1991, from memory; the file holds values to check it by."""
    first, second = np.sqrt(np.pi * b) / 2.0 / np.sqrt(k), np.sqrt(np.pi * b) / 2.0 * np.sqrt(k)
    return 0.5 * erfc(first - second) + 0.5 * np.exp(np.pi * b) * erfc(first + second)


def malkmus_spectrum(b: float, points: int = 4000) -> np.ndarray:
    """Values at the middles of even parts of g, in an order drawn at random."""
    g = (np.arange(points) + 0.5) / points
    k = [np.exp(brentq(lambda x: malkmus_g(np.exp(x), b) - one, -12.0, 6.0)) for one in g]  # noqa: B023
    return np.random.default_rng(2).permutation(k)


@pytest.fixture(scope="module", params=[0.1, 1.0, 10.0])
def malkmus(request) -> tuple[float, np.ndarray, np.ndarray]:
    """B, the spectrum with its two ends doubled (they have half a cell each), the grid."""
    spectrum = malkmus_spectrum(request.param)
    return request.param, spectrum, np.arange(spectrum.size, dtype=float) + 1.0


def test_malkmus_transmission(malkmus):
    b, spectrum, nu = malkmus
    edges = np.array([nu[0], nu[-1]])
    cells = fine_cells(spectrum, nu, edges)[0]
    k, weights = opacity.k_coefficients(spectrum, wavenumber=nu, band_edges=edges, g_points=16)
    for arguments, expected in values_of("Malkmus transmission"):
        if arguments["B"] == b:
            column = arguments["S u"]
            # 4000 samples, of which two count half, are within 1 / 4000 of the distribution.
            np.testing.assert_allclose(transmitted(cells, column), expected, rtol=0, atol=3e-4)
            np.testing.assert_allclose(np.exp(-k[0] * column) @ weights, expected, rtol=0, atol=3e-3)


def test_malkmus_distribution(malkmus):
    b, spectrum, nu = malkmus
    cells = fine_cells(spectrum, nu, np.array([nu[0], nu[-1]]))[0]
    middles = 0.5 * (CELL_BOUNDS[1:] + CELL_BOUNDS[:-1])
    for arguments, expected in values_of("Malkmus cumulative g(k)"):
        if arguments["B"] == b:
            np.testing.assert_allclose(malkmus_g(arguments["k/S"], b), expected, rtol=1e-6, atol=1e-12)
            # Half a cell of 0.005, and the samples' 1 / 4000.
            np.testing.assert_allclose(np.interp(arguments["k/S"], cells, middles), expected, rtol=0, atol=2.8e-3)


@pytest.mark.parametrize("quadrature, most", [("matched", 6e-3), ("gauss-legendre", 2e-2), ("interval-mean", 2e-2)])
def test_two_combs_mixed_transmit_their_product(quadrature: str, most: float):
    points = g_points(16, quadrature)
    narrow, wide = (fine_cells(elsasser(y), NU, BAND) for y in (0.02, 0.15))
    k = {"a": k_from_cells(narrow, points), "b": k_from_cells(wide, points)}
    columns = np.geomspace(1e-3, 1e3, 80)[None]
    for share in (0.5, 0.1, 0.9):
        mixed = opacity.mix_k(k, {"a": share, "b": 1.0 - share}, weights=points.weights, quadrature=quadrature)
        expected = transmission(share * narrow, CELL_WIDTHS, columns) * transmission(
            (1.0 - share) * wide, CELL_WIDTHS, columns
        )
        found = transmission(mixed, points.weights, columns)
        assert np.max(np.abs(found - expected)) < most
        if quadrature != "gauss-legendre":
            np.testing.assert_allclose(mixed @ points.weights, 1.0, rtol=1e-9)
