"""J'' out of records, and widths by J'' for lists that have none of a broadener."""

from __future__ import annotations

import os
import re
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.line_list.exomol.broadening import read_broadening
from opacity.line_list.hitran import hitran_parser
from opacity.line_list.lower_j import read_j
from opacity.line_list.read import read_lines
from opacity.line_list.records import ReadOptions
from opacity.line_list.text import read_chunks

SAMPLE = Path(__file__).parents[2] / "data-samples" / "carbon-monoxide.par"
REAL = os.environ.get("OPACITY_REAL_LINES", "")


def broad(tmp_path: Path, text: str):
    path = tmp_path / "co__H2.broad"
    path.write_text(text, encoding="ascii")
    return {"H2": read_broadening(path)}


def lower_j_of(path: Path, molecule: int) -> tuple[np.ndarray, np.ndarray]:
    (chunk,) = read_chunks(path)
    return read_j(path, chunk, hitran_parser(path)(chunk).whole, molecule)


def test_widths_by_lower_j_serve_lists_without_columns(tmp_path: Path) -> None:
    tables = broad(tmp_path, "".join(f"a0 {0.08 - 0.001 * j:.4f} {0.7 - 0.01 * j:.3f} {j}\n" for j in range(31)))
    lines = read_lines(SAMPLE, options=ReadOptions(widths=tables))
    j = np.minimum((lines.lower_weight - 1.0) / 2.0, 30.0)  # g'' = 2J'' + 1 for CO
    np.testing.assert_allclose(lines.broadeners["h2"].gamma, 0.08 - 0.001 * j, rtol=1e-12)
    np.testing.assert_allclose(lines.broadeners["h2"].exponent, 0.7 - 0.01 * j, rtol=1e-12)
    assert np.all(np.isnan(lines.broadeners["h2"].shift))


def test_columns_of_the_list_come_first(tmp_path: Path) -> None:
    plain = read_lines(SAMPLE.with_suffix(".data"))
    lines = read_lines(SAMPLE.with_suffix(".data"), options=ReadOptions(widths=broad(tmp_path, "a0 0.5 0.5 0\n")))
    assert np.array_equal(lines.broadeners["h2"].gamma, plain.broadeners["h2"].gamma)


def test_the_branch_tells_upper_j() -> None:
    lower, upper = lower_j_of(SAMPLE, 5)
    lines = read_lines(SAMPLE)
    assert np.array_equal(np.sort(lower), np.sort((lines.lower_weight - 1.0) / 2.0))
    assert set(np.unique(upper - lower)) == {-1.0, 1.0}


def test_a_molecule_of_unknown_quanta_is_refused(tmp_path: Path) -> None:
    with pytest.raises(
        LineListError, match=rf"^{re.escape(str(SAMPLE))}: J'' is not read from records of molecule 8, "
    ):
        lower_j_of(SAMPLE, 8)


# J' 7, J'' of P, Q, R lines, in the columns of asymmetric tops: J I3, Ka I3, Kc I3, F A5, Sym A1, of J' and then J''.
WATER = [f"{'0 0 1':>15}{'0 0 0':>15}{7:3d}  1  7      {low:3d}  0  8      " for low in (8, 7, 6)]


def test_upper_j_of_asymmetric_tops_stands_in_the_record(tmp_path: Path, record, write_par) -> None:
    quanta = [*WATER, WATER[0][:30] + "  x" + WATER[0][33:]]
    path = write_par([record(molecule=1, wavenumber=1500.0 + n, quanta=text) for n, text in enumerate(quanta)])
    lower, upper = lower_j_of(path, 1)
    assert lower.tolist() == [8.0, 7.0, 6.0, 8.0]
    assert upper.tolist() == [7.0, 7.0, 7.0, 8.0]
    tables = broad(tmp_path, "a1 0.01 0.1 6 7\na1 0.02 0.2 7 7\na1 0.03 0.3 8 7\na1 0.04 0.4 8 8\n")
    lines = read_lines(path, options=ReadOptions(widths=tables))
    np.testing.assert_allclose(lines.broadeners["h2"].gamma, [0.03, 0.02, 0.01, 0.04], rtol=1e-12)
    assert dict(lines.ledger.notes) == {"H2 width by J'' from co__H2.broad": 4}


@pytest.mark.parametrize(("molecule", "blanks"), [(6, 2), (24, 0)])
def test_upper_j_of_spherical_and_symmetric_tops(record, write_par, molecule: int, blanks: int) -> None:
    quanta = f"{'':30}{'':{blanks}}{11:3d}".ljust(45) + f"{'':{blanks}}{10:3d}"
    path = write_par([record(molecule=molecule, quanta=quanta)])
    assert [j.tolist() for j in lower_j_of(path, molecule)] == [[10.0], [11.0]]


@pytest.mark.parametrize(("letter", "change"), [("O", -2.0), ("P", -1.0), ("Q", 0.0), ("R", 1.0), ("S", 2.0)])
def test_branches_of_linear_molecules(record, write_par, letter: str, change: float) -> None:
    path = write_par([record(quanta=f"{'':50}{letter}{9:3d}")])
    lower, upper = lower_j_of(path, 5)
    assert (lower[0], upper[0] - lower[0]) == (9.0, change)


def test_lines_served_are_counted_by_kind(tmp_path: Path, record, write_par) -> None:
    path = write_par([record(wavenumber=2000.0 + j, quanta=f"{'':50}P{j:3d}") for j in (1, 2, 3, 4, 9)])
    lines = read_lines(path, options=ReadOptions(widths=broad(tmp_path, "a0 0.07 0.7 1\na0 0.05 0.5 4\n")))
    assert dict(lines.ledger.notes) == {
        "H2 width by J'' from co__H2.broad": 5,
        "H2 width by J'' from co__H2.broad, beyond its last J'': last row taken": 1,
        "H2 width by J'' from co__H2.broad, between its rows: a neighbour taken": 2,
    }


@pytest.mark.real_lines
@pytest.mark.skipif(not REAL, reason="OPACITY_REAL_LINES names no folder of real lists")
@pytest.mark.parametrize(("name", "molecule"), [("CO.par", 5), ("H2O.par", 1)])
def test_lower_j_of_real_records(name: str, molecule: int) -> None:
    """CO: g'' = 2J'' + 1.  H2O: J' and J'' differ by at most 1, for every record (selection rule of a dipole)."""
    (chunk,) = read_chunks(Path(REAL) / name)
    columns = hitran_parser(Path(REAL) / name)(chunk)
    lower, upper = read_j(Path(REAL) / name, chunk, columns.whole, molecule)
    if name == "CO.par":
        assert np.array_equal(columns.numbers["lower_weight"], 2.0 * lower + 1.0)
    else:
        assert np.all(np.abs(upper - lower) <= 1.0)
        assert lower.max() > 15.0
