"""Columns of numbers: what is read, and what is refused and where."""

from __future__ import annotations

import gzip
import os
from pathlib import Path

import numpy as np
import pytest

from opacity.check.number_columns import read_number_columns
from opacity.errors import InputError, LineListError, TableError

NODE = (296.0, 1.0)


def read(tmp_path: Path, text: str | bytes, columns=(1, 2), axis="cm-1"):
    path = tmp_path / "b.txt"
    path.write_bytes(text if isinstance(text, bytes) else text.encode("utf-8"))
    return read_number_columns(path, NODE, columns, axis)


@pytest.mark.parametrize(
    "text",
    [
        "100 1e-20\n101 2e-20\n102.5 0\n",
        "100 1e-20\n101 2e-20\n102.5 0\n# the end\n# of it\n",
        "# written by hand\nnu sigma\n\n100\t1D-20\n101 2d-20  # a remark\n102.5 0.0",
        "wavenumber (cm-1), cross-section\r\n100, 1e-20\r\n101,2e-20\r\n102.5,0\r\n",
        "\ufeffnu;sigma\n102.5;0\n101;2e-20\n100;1e-20\n",
    ],
)
def test_what_is_written_is_read(tmp_path: Path, text: str):
    found = read(tmp_path, text)
    np.testing.assert_array_equal(found.wavenumber, [100.0, 101.0, 102.5])
    np.testing.assert_array_equal(found.at(*NODE), [1e-20, 2e-20, 0.0])
    assert (found.temperature.tolist(), found.pressure.tolist()) == ([296.0], [1.0])


@pytest.mark.parametrize(
    "row, words",
    [
        ("{0} {1} # remark", None),
        ("{0}\t{1:.6E}", None),
        ("{0} {1} 7 8", None),
        ("{0},  {1}", None),
        ("{0} 1.5D-20", None),
        ("{0} nan", "cross-section is impossible"),
        ("{0}", "too few columns"),
        ("{0} 1e-20x", "cross-section is impossible"),
        ("-{0} 1e-20", "axis is impossible"),
        ("# all of it", None),
    ],
)
def test_one_odd_row_among_many_is_read_or_named(tmp_path: Path, row: str, words: str | None):
    """Most rows are read at once by numpy, which must not hide what looking at each would find."""
    rows = [f"{100.0 + k} {1e-20 * (k % 7 + 1)}" for k in range(300)]
    odd = 200
    rows[odd] = row.format(100.0 + odd, 1e-20 * (odd % 7 + 1))
    text = "nu sigma\n" + "\n".join(rows) + "\n"
    if words is not None:
        with pytest.raises(TableError, match=rf"b\.txt:{odd + 2}: {words}"):
            read(tmp_path, text)
        return
    found = read(tmp_path, text)
    expected = [1.5e-20 if k == odd and "D" in row else 1e-20 * (k % 7 + 1) for k in range(300)]
    kept = [k for k in range(300) if k != odd or not row.startswith("#")]
    np.testing.assert_array_equal(found.wavenumber, [100.0 + k for k in kept])
    np.testing.assert_allclose(found.sigma, [expected[k] for k in kept], rtol=1e-6)


def test_wavelengths_and_other_columns(tmp_path: Path):
    found = read(tmp_path, "1 7 2.0\n2 7 2.5\n3 7 4.0\n", columns=(3, 1), axis="um")
    np.testing.assert_array_equal(found.wavenumber, [2500.0, 4000.0, 5000.0])
    np.testing.assert_array_equal(found.sigma, [3.0, 2.0, 1.0])
    found = read(tmp_path, "2000 1\n2500 2\n", axis="nm")
    np.testing.assert_array_equal(found.wavenumber, [4000.0, 5000.0])


def test_compressed(tmp_path: Path):
    path = tmp_path / "b.txt.gz"
    path.write_bytes(gzip.compress(b"1 2\n3 4\n"))
    assert read_number_columns(path, NODE, (1, 2), "cm-1").sigma.tolist() == [2.0, 4.0]
    path.write_bytes(gzip.compress(b"1 2\n3 4\n" * 1000)[:-12])
    with pytest.raises(LineListError, match="damaged or cut"):
        read_number_columns(path, NODE, (1, 2), "cm-1")


@pytest.mark.parametrize(
    "text, words",
    [
        ("", "fewer than two rows of numbers"),
        ("# only a remark\n", "fewer than two rows"),
        ("1 1\n# only a remark\n# and another\n", "fewer than two rows"),
        ("100 1e-20\n", "fewer than two rows"),
        ("100 1e-20\n101 nan\n", r"b\.txt:2: cross-section is impossible; .* found \"101 nan\""),
        ("100 1e-20\n101 inf\n", r"b\.txt:2: cross-section is impossible"),
        ("100 1e-20\n101 -1e-20\n", r"b\.txt:2: cross-section is impossible"),
        ("100 1e-20\n101 1_0\n", r"b\.txt:2: cross-section is impossible"),
        ("0 1e-20\n101 1\n", r"b\.txt:1: axis is impossible"),
        ("100 1e-20\nabc def\n", r"b\.txt:2: axis is impossible"),
        ("nu sigma\ncm-1 cm2\n1 2\n", r"b\.txt:2: axis is impossible"),
        ("100 1e-20\n\n101\n", r"b\.txt:3: too few columns; expected 2 columns, of which 1 and 2 are read"),
        ("100 1\n102 1\n101 1\n", r"b\.txt:3: out of order; .* found 101 after 102"),
        ("102 1\n101 1\n101 1\n", r"b\.txt:3: out of order"),
    ],
)
def test_what_cannot_be_right_is_named(tmp_path: Path, text: str, words: str):
    with pytest.raises(TableError, match=words) as caught:
        read(tmp_path, text)
    assert "\n" not in str(caught.value)


def test_a_pipe_a_folder_and_nothing_at_all(tmp_path: Path):
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "folder").mkdir()
    for name in ("pipe", "folder"):
        with pytest.raises(TableError, match="not a file"):
            read_number_columns(tmp_path / name, NODE, (1, 2), "cm-1")
    with pytest.raises(LineListError, match="cannot be read"):
        read_number_columns(tmp_path / "missing", NODE, (1, 2), "cm-1")
    with pytest.raises(InputError, match="unknown unit of a spectral axis"):
        read(tmp_path, "1 2\n2 3\n", axis="angstrom")
