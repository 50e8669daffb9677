"""The public functions as a user calls them."""

from __future__ import annotations

import numpy as np
import pytest

import opacity
from opacity.errors import InputError, MoleculeError

NU = np.linspace(2146.9, 2147.3, 101)
ARGUMENTS = {
    "wavenumber": NU,
    "temperature": [296.0, 480.0],
    "pressure": [0.01, 1.0],
    "broadeners": {"air": 1.0},
    "cutoff": 25.0,
    "abundance": "pure",
}


@pytest.fixture(scope="module")
def lines(samples):
    return opacity.read_lines(samples / "carbon-monoxide.par")


def test_the_sum_is_within_the_tolerance_of_the_exact_one(lines):
    exact = opacity.exact_cross_section(lines, **ARGUMENTS)
    assert exact.shape == (2, 2, 101)
    assert exact.dtype == np.float64
    for tolerance in (1e-2, 1e-3, 1e-6):
        sigma = opacity.cross_section(lines, **ARGUMENTS, tolerance=tolerance)
        assert np.all(np.abs(sigma - exact) <= tolerance * exact)


def test_one_call_can_be_exchanged_for_the_other(lines):
    options = {"tolerance": 1e-4, "workers": 2, "plinth": True, "partition_function": "TIPS-2025"}
    sigma = opacity.cross_section(lines, **ARGUMENTS, **options)
    np.testing.assert_allclose(sigma, opacity.exact_cross_section(lines, **ARGUMENTS, **options), rtol=1e-4)


def test_workers_change_no_bit(lines):
    arguments = {**ARGUMENTS, "wavenumber": np.linspace(2140.0, 2150.0, 20001), "temperature": 296.0, "pressure": 0.1}
    one = opacity.cross_section(lines, **arguments)
    for workers in (2, 5):
        np.testing.assert_array_equal(opacity.cross_section(lines, **arguments, workers=workers), one)


def test_numbers_stand_for_axes_of_one(lines):
    sigma = opacity.cross_section(lines, **{**ARGUMENTS, "temperature": 296, "pressure": 1})
    np.testing.assert_array_equal(sigma, opacity.cross_section(lines, **ARGUMENTS)[:1, 1:])


def test_a_table_holds_what_the_call_gives(lines, write_recipe, tmp_path):
    recipe = opacity.load_recipe(write_recipe(wavenumber="{ start = 2146.9, stop = 2147.3, step = 0.004 }"))
    plan = opacity.plan(recipe, tmp_path)
    (path,) = opacity.build(recipe, tmp_path, workers=1)
    assert str(path) == plan.table
    sigma = opacity.cross_section(lines, **{**ARGUMENTS, "wavenumber": recipe.grid.wavenumber})
    with opacity.open_table(path) as table:
        for i, temperature in enumerate((296.0, 480.0)):
            for j, pressure in enumerate((0.01, 1.0)):
                np.testing.assert_array_equal(table.at(temperature, pressure), sigma[i, j].astype(np.float32))


def test_a_cutoff_by_pressure(lines):
    from opacity.recipe.model import Cutoff, CutoffStep

    rule = Cutoff((CutoffStep(0.05, 0.1), CutoffStep(25.0)))
    sigma = opacity.cross_section(lines, **{**ARGUMENTS, "cutoff": rule})
    np.testing.assert_array_equal(sigma[:, 1], opacity.cross_section(lines, **ARGUMENTS)[:, 1])
    np.testing.assert_array_equal(sigma[:, 0], opacity.cross_section(lines, **{**ARGUMENTS, "cutoff": 0.05})[:, 0])
    assert np.any(sigma[:, 0] == 0.0)


def test_default_widths_serve_where_the_list_has_none(lines):
    widths = {"H2": opacity.DefaultWidth(0.07, 0.5, "from memory")}
    sigma = opacity.cross_section(lines, **{**ARGUMENTS, "broadeners": {"H2": 1.0}}, default_widths=widths)
    assert np.all(sigma > 0.0)
    with pytest.raises(MoleculeError, match=r"broadening by H2: 202 of 202 lines have no half-width"):
        opacity.cross_section(lines, **{**ARGUMENTS, "broadeners": {"H2": 1.0}})


@pytest.mark.parametrize(
    "changes, message",
    [
        ({"wavenumber": [2147.0, 2146.0]}, "wavenumber: not in rising order"),
        ({"wavenumber": []}, "wavenumber: not an axis"),
        ({"wavenumber": [[2146.0], [2147.0]]}, "wavenumber: not an axis"),
        ({"wavenumber": [-1.0, 2.0]}, "wavenumber: impossible value"),
        ({"temperature": [480.0, 296.0]}, "temperature: not in rising order"),
        ({"temperature": np.nan}, "temperature: impossible value"),
        ({"temperature": 0.0}, "temperature: impossible value"),
        ({"pressure": -1.0}, "pressure: impossible value"),
        ({"pressure": 1e-20}, "pressure: out of range; expected 1e-15 to 1e.06 bar"),
        ({"pressure": [1.0, 1e9]}, "pressure: out of range"),
        ({"cutoff": 0.0}, "cutoff: impossible; expected a number above 0 cm-1, found 0"),
        ({"cutoff": np.inf}, "cutoff: impossible"),
        ({"tolerance": 1e-7}, "tolerance: cannot be met; expected 1e-06 to 0.1"),
        ({"broadeners": {"air": 0.5}}, "broadeners: not mole fractions"),
        ({"broadeners": {}}, "broadeners: not mole fractions"),
        ({"abundance": "solar"}, "abundance: unknown"),
        ({"partition_function": "TIPS-1999"}, "partition_function: unknown source"),
        ({"chi": "any"}, "chi: no set of chi factors is known to this version"),
    ],
    ids=str,
)
def test_impossible_arguments_are_named(lines, changes, message):
    with pytest.raises(InputError, match=message):
        opacity.cross_section(lines, **{**ARGUMENTS, **changes})


@pytest.mark.parametrize("workers", [0, -1, 1.5, "two"])
def test_workers_that_cannot_be_are_refused(lines, write_recipe, tmp_path, workers):
    message = r"workers: impossible; expected a whole number of threads, 1 or more"
    with pytest.raises(InputError, match=message):
        opacity.cross_section(lines, **ARGUMENTS, workers=workers)
    with pytest.raises(InputError, match=message):
        opacity.build(opacity.load_recipe(write_recipe()), tmp_path, workers=workers)


def test_temperatures_beyond_the_partition_function_are_refused(lines):
    with pytest.raises(MoleculeError, match="temperature outside its valid range"):
        opacity.cross_section(lines, **{**ARGUMENTS, "temperature": 1e5})


def test_the_names_are_there_and_no_others():
    for name in opacity.__all__:
        assert getattr(opacity, name) is not None
    assert dir(opacity) == sorted(opacity.__all__)
    with pytest.raises(AttributeError, match="module 'opacity' has no attribute 'cross_sektion'"):
        _ = opacity.cross_sektion
