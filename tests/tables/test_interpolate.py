"""Interpolation: exact where the interpolant is, and the conventions on zeros, ends, and short axes."""

from __future__ import annotations

import numpy as np
import pytest

from opacity.errors import InputError, TableError
from opacity.tables.interpolate import interpolate
from opacity.tables.read import open_table
from opacity.tables.write import write_cross_section_table

TEMPERATURES = np.array([100.0, 180.0, 300.0, 420.0, 800.0, 1500.0, 2900.0])
PRESSURES = np.array([1e-6, 1e-4, 3e-3, 0.1, 1.0, 50.0])
POINTS = 30


def polynomial(temperature, pressure, degree):
    """exp of a polynomial of `degree` in ln T and in ln P, another one at each of `POINTS` wavenumbers."""
    rng = np.random.default_rng(3)
    x = np.log(np.asarray(temperature) / 500.0)[..., np.newaxis]
    y = np.log(np.asarray(pressure) / 1e-2)[..., np.newaxis] / 5.0
    total = np.full(np.broadcast_shapes(x.shape, (POINTS,)), -46.0)
    for i in range(degree + 1):
        for j in range(degree + 1):
            total = total + rng.normal(size=POINTS) * x**i * y**j / (1 + i + j)
    return np.exp(total)


def on_grid(temperatures, pressures, degree):
    return polynomial(*np.meshgrid(temperatures, pressures, indexing="ij"), degree)


@pytest.mark.parametrize(("method", "degree"), [("cubic", 0), ("cubic", 1), ("cubic", 2), ("cubic", 3), ("linear", 1)])
def test_polynomials_are_reproduced_in_every_cell(method, degree):
    values = on_grid(TEMPERATURES, PRESSURES, degree)
    rng = np.random.default_rng(1)
    for i in range(TEMPERATURES.size - 1):
        for j in range(PRESSURES.size - 1):
            temperature, pressure = (
                rng.uniform(TEMPERATURES[i], TEMPERATURES[i + 1]),
                np.exp(rng.uniform(*np.log(PRESSURES[j : j + 2]))),
            )
            found = interpolate(values, TEMPERATURES, PRESSURES, temperature, pressure, method=method)
            np.testing.assert_allclose(found, polynomial(temperature, pressure, degree), rtol=1e-12)


def test_a_quartic_is_not_reproduced():
    """The polynomials above would not show a stencil wider than it should be."""
    values = on_grid(TEMPERATURES, PRESSURES, 4)
    found = interpolate(values, TEMPERATURES, PRESSURES, 350.0, 0.02)
    assert np.max(np.abs(found / polynomial(350.0, 0.02, 4) - 1.0)) > 1e-6


@pytest.mark.parametrize("temperature", [120.0, 350.0, 2000.0])
@pytest.mark.parametrize("pressure", [1e-5, 1e-2, 10.0])
def test_only_four_nodes_an_axis_count(temperature, pressure):
    """One-sided in the end cells: the 4 nodes around or next to the cell, and no other."""
    values = on_grid(TEMPERATURES, PRESSURES, 3)
    expected = interpolate(values, TEMPERATURES, PRESSURES, temperature, pressure)
    first_t = {120.0: 0, 350.0: 1, 2000.0: 3}[temperature]
    first_p = {1e-5: 0, 1e-2: 1, 10.0: 2}[pressure]
    used = np.zeros(values.shape[:2], dtype=bool)
    used[first_t : first_t + 4, first_p : first_p + 4] = True
    for i, j in np.ndindex(used.shape):
        changed = values.copy()
        changed[i, j] *= 2.0
        same = np.array_equal(interpolate(changed, TEMPERATURES, PRESSURES, temperature, pressure), expected)
        assert same != used[i, j]


@pytest.mark.parametrize("method", ["cubic", "linear"])
def test_nodes_are_returned_as_stored(method):
    values = on_grid(TEMPERATURES, PRESSURES, 4).astype("f4")
    values[2, 3, 4] = 0.0
    for i, j in np.ndindex(values.shape[:2]):
        found = interpolate(values, TEMPERATURES, PRESSURES, TEMPERATURES[i], PRESSURES[j], method=method)
        np.testing.assert_array_equal(found, values[i, j])
        rounded = interpolate(
            values, TEMPERATURES, PRESSURES, TEMPERATURES[i] * (1 + 4e-16), PRESSURES[j] * (1 - 4e-16)
        )
        np.testing.assert_array_equal(rounded, values[i, j])


@pytest.mark.parametrize("count", [2, 3])
def test_linear_on_short_axes(count):
    values = on_grid(TEMPERATURES[:count], PRESSURES, 3)
    cubic = interpolate(values, TEMPERATURES[:count], PRESSURES, 150.0, 3e-3)
    weight = np.log(150.0 / 100.0) / np.log(180.0 / 100.0)
    np.testing.assert_allclose(cubic, values[0, 2] ** (1 - weight) * values[1, 2] ** weight, rtol=1e-13)


def test_an_axis_of_one_node_has_one_value():
    values = on_grid(TEMPERATURES[:1], PRESSURES, 3)
    found = interpolate(values, TEMPERATURES[:1], PRESSURES, 100.0, 0.01)
    assert np.all((found > values[0].min(axis=0)) & (found < values[0].max(axis=0) * 2.0))
    with pytest.raises(TableError, match=r"temperature: outside the table; expected 100 K, the only node, found 101 K"):
        interpolate(values, TEMPERATURES[:1], PRESSURES, 101.0, 0.01)
    np.testing.assert_array_equal(interpolate(values, TEMPERATURES[:1], PRESSURES, 101.0, 0.01, clamp=True), found)


@pytest.mark.parametrize("method", ["cubic", "linear"])
def test_zero_where_all_nodes_are_zero(method):
    values = on_grid(TEMPERATURES, PRESSURES, 2)
    values[..., 7] = 0.0
    found = interpolate(values, TEMPERATURES, PRESSURES, 350.0, 0.02, method=method)
    assert found[7] == 0.0
    assert np.all(found[np.arange(POINTS) != 7] > 0.0)


@pytest.mark.parametrize("node", [(1, 1), (2, 2), (4, 4), (3, 2)])
def test_linear_in_value_where_some_nodes_are_zero(node):
    """Over the enclosing cell, (2, 2) to (3, 3), also where the zero lies outside that cell."""
    values = on_grid(TEMPERATURES, PRESSURES, 2)
    untouched = interpolate(values, TEMPERATURES, PRESSURES, 350.0, 0.02)
    values[(*node, 5)] = 0.0
    found = interpolate(values, TEMPERATURES, PRESSURES, 350.0, 0.02)
    t = np.log(350.0 / 300.0) / np.log(420.0 / 300.0)
    p = np.log(0.02 / 3e-3) / np.log(0.1 / 3e-3)
    cell = values[2:4, 2:4, 5]
    expected = (1 - t) * ((1 - p) * cell[0, 0] + p * cell[0, 1]) + t * ((1 - p) * cell[1, 0] + p * cell[1, 1])
    np.testing.assert_allclose(found[5], expected, rtol=1e-13)
    np.testing.assert_array_equal(np.delete(found, 5), np.delete(untouched, 5))


def test_nodes_beside_a_value_on_a_row_do_not_count():
    """At a temperature of the grid only that row is used, so a zero elsewhere changes nothing."""
    values = on_grid(TEMPERATURES, PRESSURES, 2)
    expected = interpolate(values, TEMPERATURES, PRESSURES, 420.0, 0.02)
    values[2, :, 5] = 0.0
    np.testing.assert_array_equal(interpolate(values, TEMPERATURES, PRESSURES, 420.0, 0.02), expected)


def test_only_zeros_in_the_cell_and_values_around_it():
    values = on_grid(TEMPERATURES, PRESSURES, 2)
    values[2:4, 2:4, 5] = 0.0
    assert interpolate(values, TEMPERATURES, PRESSURES, 350.0, 0.02)[5] == 0.0


@pytest.mark.parametrize(
    ("temperature", "pressure", "message", "inside"),
    [
        (99.9, 0.1, r"temperature: outside the table; expected 100 to 2900 K, found 99.9 K; clamp=True", (100.0, 0.1)),
        (3000.0, 0.1, r"temperature: outside", (2900.0, 0.1)),
        (300.0, 1e-7, r"pressure: outside the table; expected 1e-06 to 50 bar, found 1e-07 bar", (300.0, 1e-6)),
        (300.0, 51.0, r"pressure: outside", (300.0, 50.0)),
    ],
)
def test_outside_is_refused_or_clamped(temperature, pressure, message, inside):
    values = on_grid(TEMPERATURES, PRESSURES, 2)
    with pytest.raises(TableError, match=message):
        interpolate(values, TEMPERATURES, PRESSURES, temperature, pressure)
    clamped = interpolate(values, TEMPERATURES, PRESSURES, temperature, pressure, clamp=True)
    np.testing.assert_array_equal(clamped, interpolate(values, TEMPERATURES, PRESSURES, *inside))


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf, -1.0, 0.0, "warm", None, [1.0, 2.0], 1j])
@pytest.mark.parametrize("profile", [False, True])
def test_impossible_arguments(make_table, tmp_path, bad, profile):
    table = make_table(temperatures=(300.0, 400.0), pressures=(0.1, 1.0), profile=profile)
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:
        with pytest.raises(InputError, match="temperature: impossible value"):
            read.at(bad, 0.1, clamp=True)
        with pytest.raises(InputError, match="pressure: impossible value"):
            read.at(300.0, bad, clamp=True)


def test_unknown_method():
    with pytest.raises(InputError, match="method: unknown; expected cubic or linear, found 'spline'"):
        interpolate(on_grid(TEMPERATURES, PRESSURES, 1), TEMPERATURES, PRESSURES, 300.0, 0.1, method="spline")


@pytest.mark.parametrize("method", ["cubic", "linear"])
@pytest.mark.parametrize(("temperature", "pressure"), [(350.0, 0.02), (100.0, 49.0), (2899.0, 1e-6), (300.0, 0.1)])
def test_a_table_on_disk_gives_the_same(make_table, tmp_path, method, temperature, pressure):
    values = on_grid(TEMPERATURES, PRESSURES, 3)
    values[1:3, :4, 3:9] = 0.0
    table = make_table(TEMPERATURES, PRESSURES, POINTS, cross_section=values)
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:
        found = read.at(temperature, pressure, method=method)
        stored = values.astype(read.dtype)
    assert found.dtype == np.float64
    expected = interpolate(stored, TEMPERATURES, PRESSURES, temperature, pressure, method=method)
    np.testing.assert_array_equal(found, expected)


def test_outside_a_table_names_the_file(make_table, tmp_path):
    path = write_cross_section_table(tmp_path / "a.h5", make_table())
    with open_table(path) as read:
        with pytest.raises(TableError, match=r"a\.h5: temperature: outside the table; expected 300 to 1200 K"):
            read.at(250.0, 0.1)
        np.testing.assert_array_equal(read.at(250.0, 1e-9, clamp=True), read.spectrum(0, 0))
