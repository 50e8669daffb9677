"""Files of every format version that was ever written still open, with the numbers that they were written with."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from opacity.tables.k_read import open_k_table
from opacity.tables.read import open_table

DATA = Path(__file__).with_name("data")


def test_version_1():
    """Written by version 0.1.0; sigma[i, j, k] = 2**-70 (i + 1) (j + 2) k, exact in f4."""
    with open_table(DATA / "version-1.cross-section.h5") as table:
        table.verify()
        assert table.format_version == 1
        assert (table.title, table.formula) == ("Invented, for format version 1", "CO")
        assert table.recipe == '[molecule]\nname = "π"\n'
        assert table.provenance == {"program": "opacity"}
        assert table.checks == {"tolerance": 0.001}
        np.testing.assert_array_equal(table.temperature, [100.0, 200.0, 400.0])
        np.testing.assert_array_equal(table.pressure, [0.01, 1.0])
        np.testing.assert_array_equal(table.wavenumber, np.arange(20.0) + 1000.0)
        for i in range(3):
            for j in range(2):
                np.testing.assert_array_equal(table.spectrum(i, j), 2.0**-70 * (i + 1) * (j + 2) * np.arange(20.0))
        middle = 2.0**-70 * np.sqrt(2.0 * 6.0) * np.arange(20.0)
        np.testing.assert_allclose(table.at(np.sqrt(100.0 * 200.0), 0.1), middle, rtol=1e-12)


def test_k_coefficients_of_version_1():
    """k[i, j, b, m] = 2**-70 (i + 1) (j + 2) (b + 1) (m + 1), each twice in the fine cells."""
    with open_k_table(DATA / "version-1.k-coefficient.h5") as table:
        table.verify()
        assert table.format_version == 1
        assert (table.title, table.formula) == ("Invented, for format version 1", "CO")
        assert (table.quadrature, table.profile, table.shape) == ("interval-mean", False, (3, 2, 2, 4))
        assert table.recipe == '[molecule]\nname = "π"\n'
        assert table.provenance == {"program": "opacity"}
        assert table.checks == {"tolerance": 0.001}
        np.testing.assert_array_equal(table.temperature, [100.0, 200.0, 400.0])
        np.testing.assert_array_equal(table.pressure, [0.01, 1.0])
        np.testing.assert_array_equal(table.band_bounds, [[1000.0, 1010.0], [1010.0, 1030.0]])
        np.testing.assert_array_equal(table.g, [0.125, 0.375, 0.625, 0.875])
        np.testing.assert_array_equal(table.g_weight, 0.25)
        np.testing.assert_array_equal(table.g_bounds[:, 0], [0.0, 0.25, 0.5, 0.75])
        np.testing.assert_array_equal(table.cell_bounds[:, 1], np.arange(1.0, 9.0) / 8.0)
        for i in range(3):
            for j in range(2):
                k = 2.0**-70 * (i + 1) * (j + 2) * np.outer([1.0, 2.0], [1.0, 2.0, 3.0, 4.0])
                np.testing.assert_array_equal(table.k(i, j), k)
                np.testing.assert_array_equal(table.cells(i, j), np.repeat(k, 2, axis=-1))
        np.testing.assert_array_equal(table.planck_mean, 2.0**-70 * np.arange(6.0).reshape(3, 2))
        np.testing.assert_array_equal(table.rosseland_mean, 2.0**-71 * np.arange(6.0).reshape(3, 2))
