"""Other programs read a table: netCDF-4 and, where they are installed, ncdump and h5dump; CF is kept."""

from __future__ import annotations

import shutil
import subprocess
import sys
import warnings
from pathlib import Path

import h5py
import netCDF4
import numpy as np
import pytest

from opacity.tables.read import open_table
from opacity.tables.write import write_cross_section_table

DIMENSIONS = {
    "temperature": ("temperature",),
    "pressure": ("pressure",),
    "wavenumber": ("wavenumber",),
    "cross_section": ("temperature", "pressure", "wavenumber"),
    "cross_section_sha256": ("temperature", "pressure", "block", "hex_digit"),
    "recipe": ("recipe_length",),
    "provenance": ("provenance_length",),
    "checks": ("checks_length",),
}
UNITS = {"temperature": "K", "pressure": "bar", "wavenumber": "cm-1", "cross_section": "cm2 molecule-1"}


@pytest.fixture(params=[False, True], ids=["grid", "profile"])
def table(request, make_table):
    if request.param:
        return make_table((300.0, 200.0, 250.0), (1.0, 0.1, 0.01), points=20000, profile=True)
    return make_table(points=20000)


def test_netcdf_reads_names_dimensions_and_units(table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.nc", table)
    swap = {"temperature": "node", "pressure": "node"} if table.profile else {}
    with netCDF4.Dataset(path) as file:
        assert set(file.variables) == set(DIMENSIONS)
        for name, dimensions in DIMENSIONS.items():
            assert file[name].dimensions == tuple(dict.fromkeys(swap.get(d, d) for d in dimensions))
        for name, units in UNITS.items():
            assert file[name].units == units
        assert file["temperature"].standard_name == "air_temperature"
        assert file["cross_section"].chunking()[-1] == 16384
        assert (file.title, file.formula, file.format_version) == (table.title, table.formula, 1)
        np.testing.assert_array_equal(file["wavenumber"][:], table.wavenumber)
        np.testing.assert_array_equal(file["cross_section"][...], table.cross_section.astype("f4"))
        assert not np.ma.is_masked(file["cross_section"][...])
        assert str(file["recipe"][...]) == table.recipe
        if table.profile:
            assert file["cross_section"].coordinates == "temperature pressure"


def test_netcdf_can_append(table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.nc", table)
    with netCDF4.Dataset(path, "a") as file:
        file.note = "appended"
        file.createVariable("weight", "f8", ("wavenumber",))[:] = 1.0
    with open_table(path) as read:
        read.verify()
    with netCDF4.Dataset(path) as file:
        assert file["weight"][:].sum() == 20000.0


def test_no_text_of_variable_length(table, tmp_path):
    """C and Fortran would get a pointer; the lists of dimensions are HDF5's own."""
    variable = []

    def collect(name, target):
        for key in target.attrs:
            kind = target.attrs.get_id(key).get_type()
            if isinstance(kind, h5py.h5t.TypeStringID) and kind.is_variable_str():
                variable.append((name, key))

    with h5py.File(write_cross_section_table(tmp_path / "a.h5", table), "r") as file:
        collect("/", file)
        file.visititems(collect)
        assert file["cross_section"].attrs["_FillValue"].dtype == file["cross_section"].dtype
    assert variable == []


def test_the_climate_and_forecast_conventions_are_kept(table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.nc", table)
    checker = Path(sys.executable).with_name("compliance-checker")
    command = [checker, "-t", "cf:1.11", "-s", "check_dimension_order", "-c", "strict", path]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
    assert "All tests passed!" in done.stdout


@pytest.mark.parametrize("program", [("ncdump",), ("h5dump",)])
def test_command_line_readers(table, tmp_path, program):
    if shutil.which(program[0]) is None:
        pytest.skip(f"{program[0]} is not installed")
    path = write_cross_section_table(tmp_path / "a.nc", table)
    done = subprocess.run([*program, path], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    for word in (*DIMENSIONS, *UNITS.values(), "opacity cross-section table"):
        assert word in done.stdout


def test_reading_warns_of_nothing(table, tmp_path):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        netCDF4.Dataset(write_cross_section_table(tmp_path / "a.nc", table)).close()
