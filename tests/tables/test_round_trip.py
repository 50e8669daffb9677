"""What is written is read again, bit by bit, and only what may be stored is written."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import threading
from pathlib import Path

import h5py
import numpy as np
import pytest

from opacity.errors import InputError, ResourceError, TableError
from opacity.tables import structure
from opacity.tables.read import open_table
from opacity.tables.write import write_cross_section_table


@pytest.mark.parametrize(
    ("scale", "dtype"), [(1e-20, "<f4"), (1.01e-37, "<f4"), (0.9e-37, "<f8"), (1e-300, "<f8"), (1e38, "<f8")]
)
def test_grid_round_trip(make_table, tmp_path, scale, dtype):
    table = make_table(points=20000, scale=scale)
    path = write_cross_section_table(tmp_path / "a.h5", table)
    with open_table(path) as read:
        assert read.dtype == np.dtype(dtype)
        assert read.shape == (3, 4, 20000)
        for name in ("title", "formula", "recipe", "provenance", "checks", "profile"):
            assert getattr(read, name) == getattr(table, name)
        for name in ("temperature", "pressure", "wavenumber"):
            np.testing.assert_array_equal(getattr(read, name), getattr(table, name))
        for i in range(3):
            for j in range(4):
                spectrum = read.spectrum(i, j)
                assert spectrum.dtype == np.float64
                np.testing.assert_array_equal(spectrum, table.cross_section[i, j].astype(dtype))
                np.testing.assert_array_equal(spectrum == 0.0, table.cross_section[i, j] == 0.0)
        assert read.format_version == 1
        read.verify()


def test_profile_round_trip(make_table, tmp_path):
    table = make_table(temperatures=(900.0, 300.0, 500.0), pressures=(1.0, 1e-3, 1e-5), profile=True)
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:
        assert read.profile
        assert read.shape == (3, 400)
        np.testing.assert_array_equal(read.temperature, [900.0, 300.0, 500.0])
        np.testing.assert_array_equal(read.spectrum(1), table.cross_section[1].astype("f4"))
        np.testing.assert_array_equal(read.at(500.0, 1e-5), read.spectrum(2))
        with pytest.raises(TableError, match="own nodes only"):
            read.at(500.0, 1e-3)


@pytest.mark.parametrize("points", [1, 2, 16383, 16384, 16385, 32768])
def test_edges_of_blocks(make_table, tmp_path, points):
    table = make_table(temperatures=(300.0,), pressures=(1.0,), points=points)
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:
        read.verify()
        np.testing.assert_array_equal(read.spectrum(0, 0), table.cross_section[0, 0].astype("f4"))


def test_a_table_of_zeros_and_a_negative_zero(make_table, tmp_path):
    zeros = np.zeros((3, 4, 400))
    zeros[0, 0, 0] = -0.0
    with open_table(write_cross_section_table(tmp_path / "a.h5", make_table(cross_section=zeros))) as read:
        assert read.dtype == np.dtype("<f4")
        assert not np.signbit(read.spectrum(0, 0)).any()
        np.testing.assert_array_equal(read.at(450.0, 0.1), 0.0)


def test_long_and_empty_texts(make_table, tmp_path):
    table = make_table(recipe="# π\n" * 50000, provenance={"long": ["ž" * 1000] * 200}, checks={})
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:
        assert (read.recipe, read.provenance, read.checks) == (table.recipe, table.provenance, {})
    with open_table(write_cross_section_table(tmp_path / "b.h5", make_table(recipe=""))) as read:
        assert read.recipe == ""


def test_title_beyond_ascii(make_table, tmp_path):
    with open_table(write_cross_section_table(tmp_path / "a.h5", make_table(title="Žluťoučký CO₂"))) as read:
        assert read.title == "Žluťoučký CO₂"


def test_the_same_table_gives_the_same_bytes(make_table, tmp_path):
    """In another process, more than a second later, under another name, with another hash seed."""
    first = write_cross_section_table(tmp_path / "a.h5", make_table())
    program = (
        "import sys, time, importlib.util as u; from pathlib import Path; time.sleep(1.1)\n"
        "spec = u.spec_from_file_location('c', sys.argv[1]); c = u.module_from_spec(spec); spec.loader.exec_module(c)\n"
        "from opacity.tables.write import write_cross_section_table as w; w(Path(sys.argv[2]), c.invented_table())\n"
    )
    second = tmp_path / "another name.h5"
    conftest = Path(__file__).with_name("conftest.py")
    environment = {**os.environ, "PYTHONHASHSEED": "77", "PYTHONPATH": str(Path(__file__).parents[2])}
    subprocess.run([sys.executable, "-c", program, conftest, second], check=True, env=environment)
    assert first.read_bytes() == second.read_bytes()


def test_stored_hashes_are_those_of_the_values(make_table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.h5", make_table(points=20000))
    with h5py.File(path, "r") as file:
        values, hashes = file["cross_section"][1, 2], file["cross_section_sha256"][1, 2]
        assert file["cross_section"].chunks == (1, 1, 16384)
        assert np.isnan(file["cross_section"].fillvalue)
        digest = hashlib.sha256(file["temperature"][()].tobytes()).hexdigest()
        assert file["temperature"].attrs["sha256"] == digest.encode()
    for number, block in enumerate((values[:16384], values[16384:])):
        assert hashes[number].tobytes().decode() == hashlib.sha256(block.astype("<f4").tobytes()).hexdigest()


@pytest.mark.parametrize("bad", [np.nan, np.inf, -1e-30])
def test_impossible_values_are_refused(make_table, tmp_path, bad):
    table = make_table()
    table.cross_section[1, 2, 5] = bad
    with pytest.raises(TableError, match=r"impossible cross_section at 700 K, 1 bar, 2003\.75\d* cm-1"):
        write_cross_section_table(tmp_path / "a.h5", table)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"temperature": np.array([300.0, 300.0, 400.0])}, "temperature: not in rising order"),
        ({"temperature": np.array([300.0, 400.0])}, "does not fit its axes; expected"),
        ({"pressure": np.array([-1.0, 1.0, 2.0, 3.0])}, "pressure: impossible value"),
        ({"wavenumber": np.append(np.arange(1.0, 400.0), np.inf)}, "wavenumber: impossible value"),
        ({"provenance": {"x": np.nan}}, "a text that cannot be stored"),
        ({"checks": {"x": {1, 2}}}, "a text that cannot be stored"),
        ({"recipe": "a\0b"}, "NUL"),
        ({"recipe": "\ud800"}, "a text that cannot be stored"),
        ({"title": "two\nlines"}, "unusable title"),
        ({"formula": ""}, "unusable formula"),
        ({"title": "x" * 1001}, "unusable title; expected one line of 1 to 1000 characters"),
    ],
)
def test_impossible_tables_are_refused(make_table, tmp_path, changes, message):
    with pytest.raises(TableError, match=message) as caught:
        write_cross_section_table(tmp_path / "a.h5", make_table(**changes))
    assert "\n" not in str(caught.value)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("temperatures", "pressures", "message"),
    [((300.0, 400.0), (1.0, np.nan), "pressure: impossible"), ((300.0, 400.0), (1.0,), "one pressure a temperature")],
)
def test_impossible_profiles_are_refused(make_table, tmp_path, temperatures, pressures, message):
    with pytest.raises(TableError, match=message):
        write_cross_section_table(
            tmp_path / "a.h5", make_table(temperatures=temperatures, pressures=pressures, profile=True)
        )


def test_a_closed_table_says_so(make_table, tmp_path):
    with open_table(write_cross_section_table(tmp_path / "a.h5", make_table())) as read:
        pass
    assert read.title == "Invented molecule"
    with pytest.raises(TableError, match="the table is closed"):
        read.spectrum(0, 0)


@pytest.mark.parametrize("node", [(), (0,), (3, 0), (0, -1), (0, 0, 0), (0.5, 0), ("a", 0)])
def test_nodes_that_do_not_exist(make_table, tmp_path, node):
    with (
        open_table(write_cross_section_table(tmp_path / "a.h5", make_table())) as read,
        pytest.raises(InputError, match="no such node; expected indices from 0 to below 3, 4"),
    ):
        read.spectrum(*node)


def test_file_systems_without_locks(make_table, tmp_path, monkeypatch):
    path = write_cross_section_table(tmp_path / "a.h5", make_table())
    real, calls = h5py.File, []

    def without_locks(name, mode, **options):
        calls.append(options.get("locking"))
        if options.get("locking") is not False:
            raise OSError("Unable to open file (unable to lock file, errno = 37, error message = 'No locks available')")
        return real(name, mode, **options)

    monkeypatch.setattr(structure.h5py, "File", without_locks)
    with open_table(path) as read:
        read.verify()
    assert calls == [None, False]


def test_reading_from_several_threads(make_table, tmp_path):
    table = make_table(points=40000)
    expected = table.cross_section.astype("f4")
    wrong = []
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:

        def work(start):
            for step in range(12):
                i, j = divmod((start + step) % 12, 4)
                if not np.array_equal(read.spectrum(i, j), expected[i, j]):
                    wrong.append((i, j))

        threads = [threading.Thread(target=work, args=(start,)) for start in range(6)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
    assert wrong == []


def test_only_the_spectra_needed_are_read(make_table, tmp_path):
    table = make_table(temperatures=(300, 400, 500, 600, 700, 800.0), pressures=(1e-3, 1e-2, 0.1, 1, 10.0))
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:
        read.at(400.0, 0.05)
        np.testing.assert_array_equal(np.argwhere(read._proved[..., 0]), [[1, j] for j in range(4)])


def test_reading_loads_nothing_heavy(make_table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.h5", make_table())
    program = (
        "import sys; from opacity.tables.read import open_table; open_table(sys.argv[1]).at(450.0, 0.1)\n"
        "print([m for m in ('numba', 'hapi', 'matplotlib', 'scipy') if m in sys.modules])"
    )
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])}
    done = subprocess.run(
        [sys.executable, "-c", program, path], check=True, env=environment, capture_output=True, text=True
    )
    assert done.stdout.strip() == "[]"


@pytest.mark.parametrize("error", [MemoryError(), OSError("unable to allocate memory block")])
def test_memory_that_does_not_suffice(make_table, tmp_path, monkeypatch, error):
    def no_memory(*_):
        raise error

    monkeypatch.setattr("opacity.tables.write.table_image", no_memory)
    with pytest.raises(ResourceError, match=r"in memory \((no more|unable to).*use fewer nodes"):
        write_cross_section_table(tmp_path / "a.h5", make_table())
