"""k-coefficient tables: what is written is read, other programs read it too, and damage or wrong content is refused."""

from __future__ import annotations

import importlib.util
import json
import re
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import h5py
import matplotlib.image
import netCDF4
import numpy as np
import pytest

import opacity
from opacity.cli.main import main
from opacity.errors import InputError, OpacityError, TableError
from opacity.tables.k_draw import draw_k_table
from opacity.tables.k_read import KCoefficientTable, open_k_table
from opacity.tables.read import Table, open_table
from opacity.tables.write import write_cross_section_table

_SPEC = importlib.util.spec_from_file_location("k_tables", Path(__file__).with_name("k_tables.py"))
_MODULE = importlib.util.module_from_spec(_SPEC)
_SPEC.loader.exec_module(_MODULE)
make_k_table, written = _MODULE.invented_k_table, _MODULE.written

ARRAYS = ("temperature", "pressure", "band", "band_bounds", "g", "g_bounds", "g_weight")
OPTIONAL = ("cell_bounds", "planck_mean", "rosseland_mean")
PROFILE = {"temperatures": (900.0, 300.0, 500.0), "pressures": (1.0, 1e-3, 1e-5), "profile": True}
KINDS = {
    "plain": {},
    "everything": {"cells": 398, "means": True},
    "per band": {"per_band": True, "cells": 20},
    "profile": {**PROFILE, "cells": 20, "means": True},
    "profile per band": {**PROFILE, "per_band": True, "means": True},
    "one of each": {"temperatures": (300.0,), "pressures": (1.0,), "bands": 1, "points": 1},
}


@pytest.fixture(params=KINDS.values(), ids=KINDS)
def table(request):
    return make_k_table(**request.param)


@pytest.mark.parametrize(("scale", "dtype"), [(1.0, "<f4"), (1e-20, "<f8")])
def test_round_trip(table, tmp_path, scale, dtype):
    values = table.k_coefficient * scale
    with open_k_table(written(tmp_path / "a.h5", replace(table, k_coefficient=values))) as read:
        read.verify()
        for name in (*ARRAYS, *OPTIONAL):
            np.testing.assert_array_equal(getattr(read, name), getattr(table, name))
        for name in ("title", "formula", "quadrature", "recipe", "provenance", "checks", "profile"):
            assert getattr(read, name) == getattr(table, name)
        positive = bool((values > 0.0).any())
        assert read.dtype == np.dtype(dtype if positive else "<f4")
        assert read.shape == table.k_coefficient.shape
        for node in np.ndindex(table.nodes):
            np.testing.assert_array_equal(read.k(*node), values[node].astype(read.dtype))
            if table.fine_cells is not None:
                np.testing.assert_array_equal(read.cells(*node), table.fine_cells[node].astype("f4"))


def test_the_same_table_gives_the_same_bytes(tmp_path):
    files = [written(tmp_path / name, make_k_table(cells=30, means=True)) for name in ("a.h5", "b.h5")]
    assert files[0].read_bytes() == files[1].read_bytes()
    assert sorted(path.name for path in tmp_path.iterdir()) == ["a.h5", "b.h5"]


def test_open_table_tells_the_kinds_apart(make_table, tmp_path):
    sigma, k = tmp_path / "a.h5", tmp_path / "b.h5"
    write_cross_section_table(sigma, make_table())
    written(k, make_k_table())
    with opacity.open_table(sigma) as one, opacity.open_table(str(k)) as other:
        assert isinstance(one, Table)
        assert isinstance(other, KCoefficientTable)
    expected = 'another kind of table than is needed here; expected "opacity cross-section table", found "opacity k-'
    with pytest.raises(TableError, match=expected):
        open_table(k)
    with pytest.raises(TableError, match='expected "opacity k-coefficient table", found "opacity cross-'):
        open_k_table(sigma)
    h5py.File(tmp_path / "c.h5", "w").close()
    with pytest.raises(TableError, match=r'not a table of this program; expected format .*section table" or'):
        opacity.open_table(tmp_path / "c.h5")


def test_nodes_are_reproduced_and_order_is_kept(tmp_path):
    """Random values at 5 x 5 nodes make the polynomials overshoot, and k fall with g without the repair."""
    table = make_k_table((200.0, 300.0, 500.0, 800.0, 1200.0), (1e-4, 1e-3, 1e-2, 0.1, 1.0), points=12)
    with open_k_table(written(tmp_path / "a.h5", table)) as read:
        np.testing.assert_array_equal(read.at(500.0, 0.1), read.k(2, 3))
        np.testing.assert_array_equal(read.at(100.0, 9.0, clamp=True), read.k(0, 4))
        for method in ("cubic", "linear"):
            between = read.at(400.0, 0.03, method=method)
            assert between.shape == (3, 12)
            assert np.all(np.diff(between, axis=-1) >= 0.0)
            np.testing.assert_array_equal(between[0, 0], 0.0)
        with pytest.raises(TableError, match=r"a\.h5: temperature: outside the table"):
            read.at(100.0, 0.1)
        with pytest.raises(InputError, match="no such node; expected indices from 0 to below 5, 5"):
            read.k(5, 0)
        with pytest.raises(TableError, match="holds no fine cells"):
            read.cells(0, 0)
    with pytest.raises(TableError, match="the table is closed"):
        read.k(0, 0)


def test_interpolation_is_exact_for_powers(tmp_path):
    temperatures, pressures = np.array([200.0, 300.0, 500.0, 800.0]), np.array([1e-3, 1e-2, 0.1, 1.0])
    power = 1e-20 * (temperatures[:, None] / 300.0) ** -1.5 * pressures**0.7
    k = power[..., None, None] * np.arange(1.0, 5.0) * np.ones((3, 1))
    with open_k_table(written(tmp_path / "a.h5", make_k_table(temperatures, pressures, k_coefficient=k))) as read:
        expected = 1e-20 * (400.0 / 300.0) ** -1.5 * 0.03**0.7 * np.arange(1.0, 5.0)
        np.testing.assert_allclose(read.at(400.0, 0.03)[1], expected, rtol=1e-6)  # stored as f4


def test_a_profile_has_its_own_nodes_only(tmp_path):
    with open_k_table(written(tmp_path / "a.h5", make_k_table(**PROFILE))) as read:
        np.testing.assert_array_equal(read.at(500.0, 1e-5), read.k(2))
        with pytest.raises(TableError, match="own nodes only"):
            read.at(500.0, 1e-3)


def _changed(name, index, value):
    def change(table):
        values = np.array(getattr(table, name))
        values[index] = value
        return {name: values}

    return change


def _with(**changes):
    return lambda table: changes


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (
            _changed("k_coefficient", (1, 2, 1, 0), np.nan),
            r"impossible k_coefficient at 700 K, 1 bar, 2150 cm-1, point 0",
        ),
        (_changed("k_coefficient", (1, 2, 1, 0), -1e-30), "impossible k_coefficient at 700 K"),
        (
            _changed("k_coefficient", (1, 2, 1, 3), 0.0),
            "k_coefficient at 700 K, 1 bar, 2150 cm-1, point 3 falls; expected",
        ),
        (_with(k_coefficient=np.zeros((3, 4, 3, 5))), "k_coefficient does not fit its axes"),
        (_changed("g_weight", 0, 0.5), "impossible sum of g_weight; expected 1"),
        (_changed("g_weight", 0, -0.1), "impossible g_weight; expected finite numbers above 0"),
        (_changed("g_bounds", (1, 0), 0.5), "impossible g_bounds; expected intervals that fill"),
        (_changed("g_bounds", (3, 1), np.nan), "impossible g_bounds; expected intervals that fill"),
        (_with(g_bounds=np.array([[0, 0.1], [0.1, 0.5], [0.5, 0.9], [0.9, 1.0]])), "as wide as the weights"),
        (_changed("g", 1, 0.99), "impossible g; expected rising"),
        (
            _changed("band_bounds", (1, 0), 2099.0),
            "impossible band 1; expected bands in rising order that do not overlap",
        ),
        (_changed("band_bounds", (0, 1), 1900.0), "impossible bounds of band 0; expected the lower one first"),
        (_changed("temperature", 1, 100.0), "temperature: not in rising order"),
        (_changed("fine_cells", (0, 1, 2, 3), np.inf), "impossible fine_cells at 300 K, 0.01 bar"),
        (_changed("planck_mean", (0, 1), -1.0), "impossible planck_mean at 300 K, 0.01 bar"),
        (_with(rosseland_mean=np.zeros(3)), "rosseland_mean does not fit its axes"),
        (_with(cell_bounds=None), "fine_cells and cell_bounds; expected both or none"),
        (_with(quadrature="two\nlines"), "unusable quadrature"),
        (_with(checks={"x": np.nan}), "a text that cannot be stored"),
    ],
)
def test_wrong_contents_are_refused(tmp_path, change, message):
    table = make_k_table(cells=5, means=True)
    with pytest.raises(TableError, match=message) as caught:
        written(tmp_path / "a.h5", replace(table, **change(table)))
    assert re.fullmatch(r".*a\.h5: [^\n]+", str(caught.value))
    assert list(tmp_path.iterdir()) == []


def _content(path):
    with open_k_table(path) as read:
        read.verify()
        labels = read.title, read.formula, read.recipe, read.provenance, read.checks, read.quadrature, read.dtype
        arrays = [getattr(read, name).tobytes() for name in (*ARRAYS, *OPTIONAL)]
        nodes = list(np.ndindex(read.shape[:2]))
        return labels, arrays, [(read.k(*node).tobytes(), read.cells(*node).tobytes()) for node in nodes]


def test_flipped_bits(tmp_path):
    """At 2000 places all over the file; most refuse, the rest are in parts that hold nothing of the table."""
    small = written(tmp_path / "a.h5", make_k_table((300.0, 500.0), (0.1, 1.0), cells=60, means=True))
    good, expected = small.read_bytes(), _content(small)
    random = np.random.default_rng(11)
    refused = 0
    for place in np.linspace(0, len(good) - 1, 2000).astype(int):
        bad = bytearray(good)
        bad[place] ^= 1 << int(random.integers(8))
        small.write_bytes(bad)
        try:
            found = _content(small)
        except OpacityError as error:
            message = str(error)
        else:
            assert found == expected
            continue
        refused += 1
        assert "\n" not in message
        assert str(small) in message
    assert 400 < refused < 2000


def test_a_damaged_node_is_named(tmp_path):
    path = written(tmp_path / "a.h5", make_k_table(cells=60))
    with h5py.File(path, "r+") as file:
        for name in ("k_coefficient", "fine_cells"):
            file[name][1, 2] = file[name][1, 1]
    with open_k_table(path) as read:
        read.k(1, 1)
        message = r"a\.h5: damaged: k_coefficient\[1, 2\] \(700 K, 1 bar\) does not match its sha256"
        for call in (read.verify, lambda: read.k(1, 2), lambda: read.at(600.0, 0.5)):
            with pytest.raises(TableError, match=message):
                call()
        with pytest.raises(TableError, match=r"fine_cells\[1, 2\] \(700 K, 1 bar\) does not match"):
            read.cells(1, 2)


@pytest.mark.parametrize(
    "name", ["band", "band_bounds", "g", "g_bounds", "g_weight", "k_coefficient", "k_coefficient_sha256", "cell_bounds"]
)
def test_missing_parts_are_named(tmp_path, name):
    path = written(tmp_path / "a.h5", make_k_table(cells=5))
    with h5py.File(path, "r+") as file:
        del file[name]
    with pytest.raises(TableError, match=f"dataset {name} is missing"):
        open_k_table(path)


def test_netcdf_reads_it(table, tmp_path):
    with netCDF4.Dataset(written(tmp_path / "a.nc", table)) as file:
        nodes = ("node",) if table.profile else ("temperature", "pressure")
        own = ("band",) if table.g_weight.ndim == 2 else ()
        assert file["k_coefficient"].dimensions == (*nodes, "band", "g")
        assert file["k_coefficient_sha256"].dimensions == (*nodes, "hex_digit")
        assert file["g_weight"].dimensions == (*own, "g")
        assert file["g_bounds"].dimensions == (*own, "g", "edge")
        assert (file["k_coefficient"].units, file["band"].units) == ("cm2 molecule-1", "cm-1")
        assert (file.format, file.format_version, file.quadrature) == ("opacity k-coefficient table", 1, "matched")
        np.testing.assert_array_equal(file["k_coefficient"][...], table.k_coefficient.astype("f4"))
        if table.fine_cells is not None:
            assert file["fine_cells"].dimensions == (*nodes, "band", "cell")
            np.testing.assert_array_equal(file["fine_cells"][...], table.fine_cells.astype("f4"))


def test_the_climate_and_forecast_conventions_are_kept(table, tmp_path):
    path = written(tmp_path / "a.nc", table)
    checker = Path(sys.executable).with_name("compliance-checker")
    command = [checker, "-t", "cf:1.11", "-s", "check_dimension_order", "-c", "strict", path]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
    assert "All tests passed!" in done.stdout


@pytest.mark.parametrize("checks", [{}, {"certificate": 3}, {"certificate": {"bands": [{"largest": "x"}]}}, None])
def test_every_kind_of_table_is_drawn_and_shown(table, tmp_path, checks, capsys):
    path = written(tmp_path / "a.h5", table if checks is None else replace(table, checks=checks))
    with open_k_table(path) as read:
        picture = draw_k_table(read, tmp_path / "a.png")
    image = matplotlib.image.imread(picture)
    wanted = np.array([0x00, 0x72, 0xB2]) / 255.0
    # A table of zeros has a legend only.
    least = 100 if table.k_coefficient.any() else 0
    assert (np.abs(image[..., :3] - wanted).max(axis=-1) < 0.02).sum() > least
    if checks in ({}, None):
        assert main(["show", str(path)]) == 0
        shown = capsys.readouterr().out
        assert re.search(rf"quadrature +matched, {table.g.size} g points", shown)
        assert ("certificate" in shown) == (checks is None)
        assert main(["show", "--json", str(path)]) == 0
        assert json.loads(capsys.readouterr().out)["g_weight"] == table.g_weight.tolist()
