"""The public functions as a user calls them."""

from __future__ import annotations

import warnings
from dataclasses import replace

import numpy as np
import pytest

import opacity
from opacity.errors import InputError, MoleculeError

# The sample list gives no pressure shifts; that this is told has its own test.
pytestmark = pytest.mark.filterwarnings("ignore::opacity.AssumptionWarning")

NU = np.linspace(2146.9, 2147.3, 101)
ARGUMENTS = {
    "wavenumber": NU,
    "temperature": [296.0, 480.0],
    "pressure": [0.01, 1.0],
    "broadeners": {"air": 1.0},
    "cutoff": 25.0,
    "abundance": "pure",
}


def cutoff_of(*steps):
    return {"cutoff": opacity.Cutoff(tuple(opacity.CutoffStep(*one) for one in steps))}


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
    rule = opacity.Cutoff((opacity.CutoffStep(0.05, 0.1), opacity.CutoffStep(25.0)))
    sigma = opacity.cross_section(lines, **{**ARGUMENTS, "cutoff": rule})
    np.testing.assert_array_equal(sigma[:, 1], opacity.cross_section(lines, **ARGUMENTS)[:, 1])
    np.testing.assert_array_equal(sigma[:, 0], opacity.cross_section(lines, **{**ARGUMENTS, "cutoff": 0.05})[:, 0])
    assert np.any(sigma[:, 0] == 0.0)


def test_default_widths_serve_where_the_list_has_none(lines):
    widths = {"H2": opacity.DefaultWidth(0.07, 0.5, "from memory")}
    sigma = opacity.cross_section(lines, **{**ARGUMENTS, "broadeners": {"H2": 1.0}}, default_widths=widths)
    assert np.all(sigma > 0.0)
    with pytest.raises(
        MoleculeError, match=r"broadeners: 202 of 202 lines have no half-width by H2; .* default_widths="
    ):
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
        ({"pressure": 1e-20}, "pressure: out of range; expected 1e-12 to 100000 bar"),
        ({"pressure": [1.0, 1e9]}, "pressure: out of range"),
        ({"cutoff": 0.0}, "cutoff: impossible; expected a number above 0 cm-1, found 0"),
        ({"cutoff": np.inf}, "cutoff: impossible"),
        ({"tolerance": 1e-7}, "tolerance: cannot be met; expected 1e-06 to 0.1"),
        ({"broadeners": {"air": 0.5}}, "broadeners: not mole fractions"),
        ({"broadeners": {}}, "broadeners: not mole fractions"),
        ({"abundance": "solar"}, "abundance: unknown"),
        ({"partition_function": "TIPS-1999"}, "partition_function: unknown source"),
        ({"chi": "any"}, 'chi: no such set of chi factors; expected None or "Tonkov-1996"'),
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


@pytest.mark.parametrize(
    "changes, message",
    [
        ({"cutoff": "25"}, "cutoff: not a number; expected a number above 0 cm-1, found '25'"),
        ({"cutoff": True}, "cutoff: not a number; expected a number above 0 cm-1, found True"),
        ({"cutoff": [25.0]}, "cutoff: not a number; expected a number above 0 cm-1, found [25.0]"),
        ({"cutoff": 10**400}, "cutoff: impossible; expected a number above 0 cm-1, found 1000"),
        ({"cutoff": opacity.Cutoff(())}, "cutoff.steps: not steps of a cut-off; expected steps such as Cutoff("),
        ({"cutoff": opacity.Cutoff(25.0)}, "cutoff.steps: not steps of a cut-off; "),
        ({"cutoff": opacity.Cutoff((25.0,))}, "cutoff.steps: not steps of a cut-off; "),
        (cutoff_of((-5.0,)), "cutoff.steps[0].cutoff: impossible; expected a number above 0 cm-1, found -5.0"),
        (cutoff_of((None,)), "cutoff.steps[0].cutoff: not a number; expected a number above 0 cm-1, found None"),
        (cutoff_of((5.0, 1.0)), "cutoff.steps[0].to_pressure: out of place; expected to_pressure in every step but"),
        (cutoff_of((5.0,), (9.0,)), "cutoff.steps[0].to_pressure: out of place; expected to_pressure in every step"),
        (cutoff_of((5.0, -1.0), (9.0,)), "cutoff.steps[0].to_pressure: impossible; expected a number above 0 bar"),
        (cutoff_of((5.0, "1"), (9.0,)), "cutoff.steps[0].to_pressure: not a number; expected a number above 0 bar"),
        (
            cutoff_of((5.0, 1.0), (6.0, 1.0), (9.0,)),
            "cutoff.steps[1].to_pressure: not in rising order; expected above 1 bar, found 1",
        ),
        ({"tolerance": "x"}, "tolerance: not a number; expected a number, found 'x'"),
        ({"tolerance": None}, "tolerance: not a number; expected a number, found None"),
        ({"temperature": "abc"}, "temperature: not numbers; expected numbers in K, found 'abc'"),
        ({"temperature": ["296"]}, "temperature: not numbers; expected numbers in K, found ['296']"),
        ({"temperature": None}, "temperature: not numbers; expected numbers in K, found None"),
        ({"temperature": [[1.0], [2.0, 3.0]]}, "temperature: not numbers; expected numbers in K, found [[1.0], ["),
        ({"temperature": 296j}, "temperature: not numbers; expected numbers in K, found 296j"),
        ({"pressure": True}, "pressure: not numbers; expected numbers in bar, found True"),
        ({"wavenumber": "a"}, "wavenumber: not numbers; expected numbers in cm-1, found 'a'"),
        ({"broadeners": None}, "broadeners: not a dict with names as keys; expected mole fractions such as {"),
        ({"broadeners": {1: 1.0}}, "broadeners: not a dict with names as keys; expected mole fractions such as {"),
        ({"broadeners": {"air": "1"}}, "broadeners['air']: not a number; expected a number, found '1'"),
        ({"broadeners": {"air": np.nan}}, "broadeners['air']: impossible; expected a number, found nan"),
        ({"abundance": None}, 'abundance: not a dict with names as keys; expected "terrestrial", "pure" or'),
        ({"abundance": {"1": "x"}}, "abundance['1']: not a number; expected a number, found 'x'"),
        (
            {"default_widths": {"H2": (0.07, 0.5, "x")}},
            "default_widths['H2']: not a DefaultWidth; expected a dict such",
        ),
        ({"default_widths": [1]}, "default_widths: not a dict with names as keys; expected a dict such as {"),
        ({"default_widths": {"H2": opacity.DefaultWidth("x", 0.5, "s")}}, "default_widths['H2'].gamma: not a number;"),
        ({"default_widths": {"H2": opacity.DefaultWidth(0.0, 0.5, "s")}}, "default_widths['H2'].gamma: impossible;"),
        ({"default_widths": {"H2": opacity.DefaultWidth(0.1, None, "s")}}, "default_widths['H2'].exponent: not a num"),
        ({"plinth": "no"}, "plinth: not a boolean; expected True or False, found 'no'"),
        ({"partition_function": None}, "partition_function: unknown source; expected"),
        ({"partition_function": ["TIPS-2021"]}, "partition_function: unknown source; expected"),
        ({"workers": True}, "workers: impossible; expected a whole number of threads, 1 or more, found True"),
    ],
    ids=str,
)
def test_arguments_of_another_kind_are_one_line(lines, changes, message):
    for function in (opacity.cross_section, opacity.exact_cross_section):
        if function is opacity.exact_cross_section and {"tolerance", "workers"} & set(changes):
            continue  # taken so that the calls can be exchanged, and not looked at
        with pytest.raises(InputError) as caught:
            function(lines, **{**ARGUMENTS, **changes})
        assert str(caught.value).startswith(message)
        assert len(str(caught.value).splitlines()) == 1


def test_what_is_no_line_list_is_said_so():
    with pytest.raises(InputError, match=r"^lines: not a line list; expected a LineList, such as .*, found 'CO\.par'$"):
        opacity.cross_section("CO.par", **ARGUMENTS)


@pytest.mark.filterwarnings("default::opacity.AssumptionWarning")
@pytest.mark.parametrize("function", [opacity.cross_section, opacity.exact_cross_section])
def test_what_is_assumed_is_told_once_a_call(lines, function):
    widths = {"H2": opacity.DefaultWidth(0.07, 0.5, "from memory")}
    with pytest.warns(opacity.AssumptionWarning) as told:
        function(lines, **{**ARGUMENTS, "broadeners": {"air": 0.5, "H2": 0.5}}, default_widths=widths)
    (only,) = told
    assert issubclass(only.category, UserWarning)
    assert only.filename == __file__
    assert str(only.message) == (
        "assumed for 202 of 202 lines: no pressure shift by air given: taken as 0; for 202 of 202 lines: H2 width from"
        " the default 0.07 cm-1/bar, exponent 0.5 (from memory); for 202 of 202 lines: no pressure shift by H2 given:"
        " taken as 0"
    )


def test_nothing_assumed_nothing_told(lines):
    columns = lines.broadeners["air"]
    shifted = replace(lines, broadeners={"air": replace(columns, shift=np.zeros(len(lines)))})
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        opacity.cross_section(shifted, **ARGUMENTS)


def test_lists_and_tables_show_what_they_are(lines, write_recipe, tmp_path):
    assert repr(lines) == (
        "<LineList: 202 lines of CO, 1886.46 to 2289.72 cm-1; isotopologues (12C)(16O); widths by air, self>"
    )
    nothing = lines.select(np.zeros(202, dtype=bool))
    assert repr(nothing) == "<LineList: 0 lines of no molecule; isotopologues none; widths by air, self>"
    recipe = opacity.load_recipe(write_recipe(wavenumber="{ start = 2146.9, stop = 2147.3, step = 0.004 }"))
    (path,) = opacity.build(recipe, tmp_path, workers=1)
    with opacity.open_table(path) as table:
        assert isinstance(table, opacity.Table)
        assert repr(table) == f"<Table {path}: CO, 2 x 2 nodes, 101 points 2146.9 to 2147.3 cm-1>"


def test_the_names_are_there_and_no_others():
    for name in opacity.__all__:
        assert getattr(opacity, name) is not None
    assert dir(opacity) == sorted(opacity.__all__)
    with pytest.raises(AttributeError, match="module 'opacity' has no attribute 'cross_sektion'"):
        _ = opacity.cross_sektion
