"""The section [k_coefficient]: bands, points in g and how they are chosen, and what is wrong with them."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from opacity.k_coefficient.bands import band_edges
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Bands, KCoefficientChoice, Recipe

Faults = Callable[..., list[str]]
WAYS = "{ resolving_power }, { width }, { edges } or { wavelength }"
GOOD = "bands = { width = 5.0 }\n"


@pytest.fixture
def load(folder: Path, full: str) -> Callable[..., Recipe]:
    """Load the full recipe with a section [k_coefficient] in the place of [cross_section], and parts replaced."""

    def read(section: str, *changes: tuple[str, str]) -> Recipe:
        text = full.replace("[cross_section]\n", f"[k_coefficient]\n{section}\n")
        for old, new in changes:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        path = folder / "co.toml"
        path.write_text(text, encoding="utf-8")
        return load_recipe(path)

    return read


def choice(**changes: object) -> KCoefficientChoice:
    values = {"bands": Bands("width", (5.0,)), "g_points": 16, "transmission_error": 5e-3, "quadrature": "matched"}
    return KCoefficientChoice(**{**values, "weights": "optimised", **changes})


@pytest.mark.parametrize(
    "section, expected",
    [
        (GOOD, choice()),
        ("bands = { resolving_power = 300 }", choice(bands=Bands("resolving_power", (300.0,)))),
        ("bands = { edges = [2000, 2004.5, 2010] }", choice(bands=Bands("edges", (2000.0, 2004.5, 2010.0)))),
        ("bands = { wavelength = [4.98, 5.0] }", choice(bands=Bands("wavelength", (4.98, 5.0)))),
        ("bands = { wavelength = [5.0, 4.98] }", choice(bands=Bands("wavelength", (5.0, 4.98)))),
        (GOOD + "g_points = 200", choice(g_points=200)),
        (GOOD + 'g_points = "auto"', choice(g_points=None)),
        (GOOD + 'g_points = "auto"\ntransmission_error = 0.1', choice(g_points=None, transmission_error=0.1)),
        (GOOD + 'quadrature = "split"', choice(quadrature="split", weights="fixed")),
        (GOOD + 'quadrature = "gauss-legendre"', choice(quadrature="gauss-legendre", weights="fixed")),
        (GOOD + 'quadrature = "interval-mean"\nweights = "fixed"', choice(quadrature="interval-mean", weights="fixed")),
        (GOOD + 'weights = "optimised-per-band"', choice(weights="optimised-per-band")),
        (GOOD + 'g_points = "auto"\nweights = "fixed"', choice(g_points=None, weights="fixed")),
    ],
)
def test_every_key(load: Callable[..., Recipe], section: str, expected: KCoefficientChoice) -> None:
    recipe = load(section)
    assert recipe.k_coefficient == expected
    assert not recipe.cross_section


@pytest.mark.parametrize(
    "section, edges",
    [
        ("bands = { width = 5.0 }", [2000.0, 2005.0, 2010.0]),
        ("bands = { resolving_power = 1 }", [2000.0, 2010.0]),
        ("bands = { edges = [2001, 2004.5, 2008] }", [2001.0, 2004.5, 2008.0]),
        ("bands = { wavelength = [4.98, 4.99, 5.0] }", [2000.0, 1e4 / 4.99, 1e4 / 4.98]),
        ("bands = { wavelength = [5.0, 4.99, 4.98] }", [2000.0, 1e4 / 4.99, 1e4 / 4.98]),
    ],
)
def test_edges_of_bands(load: Callable[..., Recipe], section: str, edges: list[float]) -> None:
    np.testing.assert_allclose(band_edges(load(section)), edges, rtol=1e-14)


def test_resolving_power_is_met(load: Callable[..., Recipe]) -> None:
    edges = band_edges(load("bands = { resolving_power = 777 }"))
    assert np.all(edges[:-1] / np.diff(edges) >= 777.0 * (1.0 - 1e-3))
    assert (edges[0], edges[-1]) == (2000.0, 2010.0)
    np.testing.assert_allclose(np.diff(np.log(edges)), np.log(2010.0 / 2000.0) / (edges.size - 1), rtol=1e-9)


def test_the_step_may_be_left_out_without_cross_sections(load: Callable[..., Recipe], faults: Faults) -> None:
    recipe = load(GOOD, (", step = 0.5", ""))
    np.testing.assert_array_equal(recipe.grid.wavenumber, [2000.0, 2010.0])
    both = ("[cross_section]", f"[cross_section]\n[k_coefficient]\n{GOOD}"), (", step = 0.5", "")
    expected = "expected a number from 1e-09 to 1e+06 cm-1"
    assert faults(*both) == [f"co.toml:43: grid.wavenumber.step: missing; {expected}"]


def test_both_tables(load: Callable[..., Recipe]) -> None:
    recipe = load(GOOD + "[cross_section]")
    assert recipe.cross_section
    assert recipe.k_coefficient == choice()


FAULTS = [
    ("", f"47: k_coefficient.bands: missing; expected {WAYS}"),
    ("bands = 5", f"48: k_coefficient.bands: not a table; expected {WAYS}, found 5"),
    ("bands = {}", f"48: k_coefficient.bands: not one way to give bands; expected {WAYS}, found an empty table"),
    (
        "bands = { width = 1, edges = [2000, 2010] }",
        f"48: k_coefficient.bands: not one way to give bands; expected {WAYS}, found a table",
    ),
    (
        "bands = { widht = 1 }",
        "48: k_coefficient.bands.widht: unknown key; expected resolving_power, width, edges or wavelength, "
        'found "widht"; did you mean width?',
    ),
    (
        "bands = { resolving_power = 0.5 }",
        "48: k_coefficient.bands.resolving_power: impossible value; expected a number from 1 to 1e+06, found 0.5",
    ),
    (
        "bands = { width = 0 }",
        "48: k_coefficient.bands.width: impossible value; expected a number from 0.001 to 1e+06 cm-1, found 0",
    ),
    (
        "bands = { width = 3 }",
        "48: k_coefficient.bands.width: does not fit the grid; expected a whole number of widths in 2000 to 2010 cm-1, "
        "found 3.33333 of 3 cm-1; choose a width that divides the range, or other ends of the grid",
    ),
    (
        "bands = { width = 50 }",
        "48: k_coefficient.bands.width: does not fit the grid; expected a whole number of widths in 2000 to 2010 cm-1, "
        "found 0.2 of 50 cm-1; choose a width that divides the range, or other ends of the grid",
    ),
    (
        "bands = { edges = [2000] }",
        "48: k_coefficient.bands.edges: no edges; expected a list of two or more numbers, found a list of 1",
    ),
    (
        'bands = { edges = [2000, "x"] }',
        '48: k_coefficient.bands.edges[1]: not a number; expected a number from 0 to 1e+06 cm-1, found "x"',
    ),
    (
        "bands.edges = [\n2000,\n2005,\n2005]",
        "51: k_coefficient.bands.edges[2]: not in order; expected edges in order, found 2005 after 2005",
    ),
    (
        "bands = { edges = [2010, 2000] }",
        "48: k_coefficient.bands.edges[1]: not in order; expected edges in order, found 2000 after 2010",
    ),
    (
        "bands = { edges = [1999.9, 2005] }",
        "48: k_coefficient.bands.edges: bands beyond the grid; expected 2000 to 2010 cm-1, found 1999.9 to 2005 cm-1",
    ),
    (
        "bands = { wavelength = [4.98, 5.001] }",
        "48: k_coefficient.bands.wavelength: bands beyond the grid; expected 2000 to 2010 cm-1, "
        "found 1999.60008 to 2008.032129 cm-1",
    ),
    (
        "bands = { wavelength = [5.0, 4.98, 4.99] }",
        "48: k_coefficient.bands.wavelength[2]: not in order; expected edges in order, found 4.99 after 4.98",
    ),
    (
        "bands = { wavelength = [nan, 5.0] }",
        "48: k_coefficient.bands.wavelength[0]: impossible value; expected a number from 0.01 to 1e+08 micrometres, "
        "found nan",
    ),
    (
        GOOD + "g_points = 0",
        "49: k_coefficient.g_points: impossible value; expected a whole number from 1 to 200, found 0",
    ),
    (
        GOOD + "g_points = 201",
        "49: k_coefficient.g_points: impossible value; expected a whole number from 1 to 200, found 201",
    ),
    (
        GOOD + 'g_points = 1\nquadrature = "split"',
        "49: k_coefficient.g_points: impossible value; expected a whole number from 2 to 200, found 1",
    ),
    (
        GOOD + 'g_points = "many"',
        '49: k_coefficient.g_points: impossible; expected "auto" or a whole number from 1 to 200, found "many"',
    ),
    (GOOD + "transmission_error = 1e-3", '49: k_coefficient.transmission_error: goes with g_points = "auto" alone'),
    (
        GOOD + 'g_points = "auto"\ntransmission_error = nan',
        "50: k_coefficient.transmission_error: impossible value; expected a number from 0.0001 to 0.1, found nan",
    ),
    (
        GOOD + 'quadrature = "simpson"',
        '49: k_coefficient.quadrature: unknown value; expected "matched", "gauss-legendre", "split" or '
        '"interval-mean", found "simpson"',
    ),
    (
        GOOD + 'quadrature = "split"\nweights = "optimised"',
        '50: k_coefficient.weights: goes with the quadrature matched alone; found "split"',
    ),
    (
        GOOD + 'quadrature = "split"\ng_points = "auto"',
        '50: k_coefficient.g_points: goes with the quadrature matched alone; found "split"',
    ),
    (
        GOOD + 'weights = "best"',
        '49: k_coefficient.weights: unknown value; expected "optimised", "optimised-per-band" or "fixed", found "best"',
    ),
    (
        GOOD + "g_point = 3",
        "49: k_coefficient.g_point: unknown key; expected bands, g_points, transmission_error, quadrature or weights, "
        'found "g_point"; did you mean g_points?',
    ),
]


@pytest.mark.parametrize("section, expected", FAULTS)
def test_one_fault_gives_one_line(faults: Faults, section: str, expected: str) -> None:
    assert faults(("[cross_section]\n", f"[k_coefficient]\n{section}\n")) == [f"co.toml:{expected}"]


@pytest.mark.parametrize(
    "axis, section, expected",
    [
        (
            "start = 2000.0, stop = 2000.0",
            GOOD,
            "48: k_coefficient.bands: no range for bands; expected a grid with start < stop, found 2000 to 2000 cm-1",
        ),
        (
            "start = 0.0, stop = 2000.0",
            "bands = { resolving_power = 10 }",
            "48: k_coefficient.bands: no range for bands; expected a grid with start above 0 cm-1, "
            "found 0 to 2000 cm-1; bands even in log have none at 0; give width or edges",
        ),
        (
            "start = 1.0, stop = 9001.0",
            "bands = { width = 1e-3 }",
            "48: k_coefficient.bands.width: too many bands; expected at most 1000000, found 9e+06",
        ),
        (
            "start = 1.0, stop = 9001.0",
            "bands = { resolving_power = 1e6 }",
            "48: k_coefficient.bands.resolving_power: too many bands; expected at most 1000000, found 9.11e+06",
        ),
        (
            "start = 2010.0, stop = 2000.0",
            GOOD,
            "43: grid.wavenumber: impossible range; expected 0 <= start <= stop, found 2010.0 to 2000.0",
        ),
    ],
)
def test_grids_without_room_for_the_bands(faults: Faults, axis: str, section: str, expected: str) -> None:
    changes = (
        ("start = 2000.0, stop = 2010.0, step = 0.5", axis),
        ("[cross_section]\n", f"[k_coefficient]\n{section}\n"),
    )
    assert faults(*changes) == [f"co.toml:{expected}"]
