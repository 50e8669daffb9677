"""k-coefficients of real lines of CO (an extract of HITRAN, Gordon et al. 2022, JQSRT 277, 107949)."""

import os
from pathlib import Path

import numpy as np
import pytest

import opacity
from opacity.k_coefficient.bands import band_points, edges_of_resolving_power
from opacity.k_coefficient.certificate import certify
from opacity.k_coefficient.collapse import fine_cells
from opacity.k_coefficient.optimise import optimise_weights, rows_of
from opacity.k_coefficient.quadrature import g_points, k_from_cells

FOLDER = os.environ.get("OPACITY_REAL_LINES", "")
pytestmark = [
    pytest.mark.real_lines,
    pytest.mark.skipif(not FOLDER, reason="OPACITY_REAL_LINES names no folder of real lines"),
]

TEMPERATURES, PRESSURES = [200.0, 1000.0, 2500.0], [1e-5, 1e-2, 10.0]
NU = np.linspace(2050.0, 2130.0, 80_001)
EDGES = edges_of_resolving_power(2050.0, 2130.0, 100.0)


@pytest.fixture(scope="module")
def sigma() -> np.ndarray:
    """Spectra at nine nodes, resolved to the narrowest line, (9, n_nu)."""
    lines = opacity.read_lines(Path(FOLDER) / "CO.par")
    axes = {"wavenumber": NU, "temperature": TEMPERATURES, "pressure": PRESSURES}
    return opacity.cross_section(lines, **axes, broadeners={"air": 1.0}, cutoff=25.0).reshape(9, NU.size)


def test_errors_of_16_points_are_those_measured(sigma: np.ndarray):
    cells, pressure = fine_cells(sigma, NU, EDGES), np.tile(PRESSURES, 3)
    fixed = g_points(16)
    found = certify(k_from_cells(cells, fixed), fixed.weights, cells, pressure, sigma, band_points(NU, EDGES), pairs=4)
    # Fixed bounds: 9.1e-3 over more nodes and bands; the fine cells' own error 3e-5.
    assert found.largest < 1e-2
    assert max(found.fine_cells) < 1e-4
    assert max(abs(band.mean) for band in found.bands) < 1e-12
    fitted = optimise_weights(rows_of(cells, pressure), 16)
    assert fitted.error < 3e-3
    assert certify(k_from_cells(cells, fitted.points), fitted.points.weights, cells, pressure).largest == pytest.approx(
        fitted.error
    )


def test_means_of_bands_are_integrals_of_lines(sigma: np.ndarray):
    k, weights = opacity.k_coefficients(sigma, wavenumber=NU, band_edges=EDGES, g_points=8)
    whole = np.trapezoid(sigma, NU, axis=1)
    np.testing.assert_allclose((k @ weights) @ np.diff(EDGES), whole, rtol=1e-9)
