"""Real lists in the folder named by OPACITY_REAL_LINES: read whole, with the values printed for them."""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest

from opacity.line_list.read import read_lines

FOLDER = os.environ.get("OPACITY_REAL_LINES")
pytestmark = [
    pytest.mark.real_lines,
    pytest.mark.skipif(not FOLDER, reason="OPACITY_REAL_LINES names no folder of real lists"),
]
ATMOSPHERE = 1.01325

# CO 1-0 at 296 K, cm-1/atm HWHM and exponents, as printed in the HITRAN records with H2 and He columns
# (CO_broadeners.data): gamma H2, He, air, self; n H2, He, air.
WIDTHS = {
    "P 20": (0.069, 0.0464, 0.0510, 0.054, 0.62, 0.55, 0.67),
    "P 10": (0.0697, 0.0469, 0.0586, 0.064, 0.64, 0.58, 0.75),
    "R  5": (0.0699, 0.0464, 0.0632, 0.069, 0.65, 0.54, 0.74),
    "R 40": (0.0669, 0.0451, 0.0395, 0.042, 0.48, 0.52, 0.67),
}


def file(name):
    path = Path(FOLDER) / name
    if not path.is_file():
        pytest.skip(f"{path} is not there")
    return path


def row_of(path, branch):
    """Line number of a line of the main isotopologue's 1-0 band, by its quanta (bytes 67 to 127)."""
    rows = [
        number
        for number, text in enumerate(path.read_text().splitlines(), start=1)
        if text[2] == "1" and text[67:97].split() == ["1", "0"] and text[97:127].strip() == branch
    ]
    assert len(rows) == 1
    return rows[0]


@pytest.mark.parametrize("branch", WIDTHS)
def test_widths_by_hydrogen_and_helium_as_printed(branch):
    path = file("CO_broadeners.data")
    lines = read_lines(path)
    (row,) = np.flatnonzero(lines.record == row_of(path, branch))
    found = [lines.broadeners[name].gamma[row] * ATMOSPHERE for name in ("h2", "he", "air", "self")]
    found += [lines.broadeners[name].exponent[row] for name in ("h2", "he", "air")]
    np.testing.assert_allclose(found, WIDTHS[branch], rtol=1e-14)


def test_both_files_of_carbon_monoxide_hold_the_same_lines():
    plain, table = read_lines(file("CO.par")), read_lines(file("CO_broadeners.data"))
    assert len(plain) == len(table) == plain.ledger.read == table.ledger.read > 200
    for name in ("wavenumber", "strength", "lower_energy", "einstein_a", "upper_weight", "lower_weight"):
        np.testing.assert_array_equal(getattr(plain, name), getattr(table, name))
    for name in ("air", "self"):
        np.testing.assert_array_equal(plain.broadeners[name].gamma, table.broadeners[name].gamma)
    assert np.isfinite(table.broadeners["h2"].gamma).all()
    assert np.isfinite(table.broadeners["he"].gamma).all()


def test_water_is_read_whole():
    lines = read_lines(file("H2O.par"))
    assert len(lines) == lines.ledger.read == lines.ledger.kept == 12351
    assert lines.molecule_formula == "H2O"
    assert np.all(np.diff(lines.wavenumber) >= 0.0)
    for column in (lines.wavenumber, lines.strength, lines.lower_energy, lines.broadeners["air"].gamma):
        assert np.isfinite(column).all()
    # Strength-weighted means printed for these 12351 lines: air 0.0868, self 0.4331 cm-1/atm, n_air 0.675.
    air, self_ = lines.broadeners["air"], lines.broadeners["self"]
    means = [np.average(one, weights=lines.strength) for one in (air.gamma, self_.gamma, air.exponent)]
    np.testing.assert_allclose(np.array(means) * [ATMOSPHERE, ATMOSPHERE, 1.0], [0.0868, 0.4331, 0.675], rtol=1e-3)
