"""Tables on disk compared: with each other, with columns of numbers, k-coefficients; and the lines behind it."""

from __future__ import annotations

import json
import math
import os
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

import opacity
from opacity.errors import InputError, TableError
from opacity.tables.k_model import KTable
from opacity.tables.k_write import write_k_table

WriteRecipe = Callable[..., Path]
EDGES = np.linspace(2145.0, 2149.0, 5)


@pytest.fixture
def build(tmp_path: Path, write_recipe: WriteRecipe) -> Callable[..., Path]:
    def made(name: str = "co", *replacements: tuple[str, str], **changes: str) -> Path:
        recipe = opacity.load_recipe(write_recipe(name, *replacements, **changes))
        return opacity.build(recipe, tmp_path / "tables")[0]

    return made


def k_table_of(table: Path, path: Path, edges=EDGES, points: int = 16, scale: float = 1.0, **changes) -> Path:
    """A table of k-coefficients of a table's spectra, which builds do not make yet."""
    with opacity.open_table(table) as opened:
        sigma = scale * np.array([[opened.spectrum(i, j) for j in range(2)] for i in range(2)])
        k, weights = opacity.k_coefficients(sigma, wavenumber=opened.wavenumber, band_edges=edges, g_points=points)
        bounds = np.concatenate([[0.0], np.cumsum(weights)])
        bounds[-1] = 1.0
        content = {
            "title": "CO",
            "formula": opened.formula,
            "temperature": opened.temperature,
            "pressure": opened.pressure,
            "band_bounds": np.stack([edges[:-1], edges[1:]], axis=-1),
            "g": 0.5 * (bounds[1:] + bounds[:-1]),
            "g_bounds": np.stack([bounds[:-1], bounds[1:]], axis=-1),
            "g_weight": weights,
            "k_coefficient": k,
            "quadrature": "matched",
            "recipe": opened.recipe,
            "provenance": opened.provenance,
            "checks": {},
        }
    write_k_table(path, KTable(**{**content, **changes}))
    return path


def test_a_table_is_itself(build):
    table = build()
    found = opacity.compare(table, table)
    assert found.nodes_compared == "all nodes of both"
    assert found.points_compared == "the same 1001 points"
    assert found.notes == ()
    assert len(found.nodes) == 4
    assert len(found.bands) == 10
    assert {ratio for node in found.nodes for ratio in node.ratio} == {1.0}
    assert (found.largest, found.median) == (0.0, 0.0)
    assert found.worst == ()
    assert found.explanation is None


def test_another_broadening_is_seen_and_the_lines_behind_it_are_told(build):
    a, b = build("a"), build("b", ("mixture = { air = 1.0 }", "mixture = { self = 1.0 }"))
    found = opacity.compare(a, b, lines=2)
    assert found.notes == ("made with different broadening mixture",)
    place = found.worst[0]
    with opacity.open_table(a) as one, opacity.open_table(b) as other:
        ratio = np.array([[one.spectrum(i, j) / other.spectrum(i, j) for j in range(2)] for i in range(2)])
        worst = np.unravel_index(np.argmax(np.abs(ratio - 1.0)), ratio.shape)
        assert place.wavenumber == one.wavenumber[worst[2]]
        assert (place.temperature, place.pressure) == (one.temperature[worst[0]], one.pressure[worst[1]])
        assert place.difference == ratio[worst] - 1.0
        nu = one.wavenumber
        band = (nu >= 2146.9) & (nu <= 2147.3)
        slow = [np.trapezoid(t.spectrum(1, 1)[band], nu[band]) for t in (one, other)]
    assert found.largest == place.difference
    assert found.median == pytest.approx(np.sort(np.median(np.abs(ratio - 1.0), axis=-1).ravel())[2])
    assert found.explanation is not None
    assert len(found.explanation.parts) == 2
    assert found.explanation.wavenumber == place.wavenumber
    assert found.explanation.value == place.a
    near = opacity.compare(a, b, bands=(2146.9, 2147.3), lines=0)
    assert near.nodes[3].ratio[0] == pytest.approx(slow[0] / slow[1], rel=1e-9)
    assert near.explanation is None
    assert near.beyond(abs(slow[0] / slow[1] - 1.0) * 0.99) >= 1


def test_where_the_recipe_is_not_at_hand_it_is_said(build, tmp_path: Path):
    a, b = build("a"), build("b", cutoff="24.0")
    os.remove(tmp_path / "tables" / "a.log.json")
    found = opacity.compare(a, b)
    assert found.explanation is None
    assert found.notes[1].startswith("no lines told for the worst place: no log beside it names a recipe")
    with pytest.raises(TableError, match="was not built from"):
        opacity.compare(a, b, recipe=tmp_path / "b.toml")
    assert opacity.compare(a, b, recipe=tmp_path / "a.toml").explanation is not None


def columns(table: Path, path: Path, node=(0, 1), factor: float = 1.0, wavelength: bool = False) -> Path:
    with opacity.open_table(table) as opened:
        nu, sigma = opened.wavenumber, factor * opened.spectrum(*node)
    rows = zip(1e4 / nu if wavelength else nu, sigma, strict=True)
    path.write_text("# numbers\n" + "".join(f"{x:.12g}, {y:.9e}\n" for x, y in rows))
    return path


@pytest.mark.parametrize(
    "factor, options, rounding",
    [
        (1.0, {}, 1e-9),
        (1e-4, {"unit": "m2/molecule"}, 1e-9),
        (6.02214076e23 / 30.0, {"unit": "cm2/g", "mass": 30.0}, 1e-9),
        # Of the recipe, "pure": the mass of (12C)(16O) in hapi's tables.
        (6.02214076e23 / 27.994915, {"unit": "cm2/g"}, 1e-6),
    ],
)
def test_columns_in_every_unit_are_the_table_again(build, tmp_path: Path, factor: float, options, rounding: float):
    table = build()
    path = columns(table, tmp_path / "b.csv", factor=factor)
    found = opacity.compare(table, path, at=(296.0, 1.0), **options)
    assert found.nodes_compared == "1 common node, without 3 of A"
    assert abs(found.largest) < rounding
    assert (len(found.notes) == 1) == (options == {"unit": "cm2/g"})
    assert found.beyond(rounding) == 0


def test_columns_over_wavelengths(build, tmp_path: Path):
    table = build()
    path = columns(table, tmp_path / "b.csv", wavelength=True)
    found = opacity.compare(table, path, at=(296.0, 1.0), axis="um")
    assert found.points_compared == "the same 1001 points"
    assert abs(found.largest) < 1e-8


def test_columns_between_nodes_hold_the_table_interpolated(build, tmp_path: Path):
    table = build()
    path = columns(table, tmp_path / "b.csv")
    found = opacity.compare(table, path, at=(350.0, 0.5), lines=1)
    assert found.nodes_compared == "no common node: A interpolated at 1 node of B in its range"
    with opacity.open_table(table) as opened:
        ratio = opened.at(350.0, 0.5) / opened.spectrum(0, 1)
    assert found.largest == pytest.approx(ratio[np.argmax(np.abs(ratio - 1.0))] - 1.0, rel=1e-6)
    assert found.explanation is not None
    assert not found.explanation.at_node


def test_another_grid_is_interpolated(build):
    a = build("a")
    b = build("b", wavenumber="{ start = 2146.0, stop = 2148.0, step = 0.0032 }")
    found = opacity.compare(a, b)
    assert "B is interpolated linearly" in found.points_compared
    assert found.bands[0][0] == pytest.approx(2146.0)
    assert found.bands[-1][1] == pytest.approx(2148.0)
    assert found.beyond(0.1) == 0


def test_another_molecule_is_compared_and_said(build, tmp_path: Path):
    table = build()
    own, other = (k_table_of(table, tmp_path / f"{name}.h5", formula=name) for name in ("CO", "H2O"))
    found = opacity.compare(own, other)
    assert found.notes == ("different molecules: A is of CO, B of H2O",)
    assert found.beyond(1e-12) == 0


def test_k_coefficients_with_cross_sections_by_the_means_of_bands(build, tmp_path: Path):
    table = build()
    k = k_table_of(table, tmp_path / "k.h5")
    found = opacity.compare(k, table)
    assert found.quantity == "band means"
    assert found.points_compared == ""
    with opacity.open_table(table) as spectra, opacity.open_table(k) as bands:
        for i, j in np.ndindex(2, 2):
            node = found.nodes[2 * i + j]
            nu, sigma = spectra.wavenumber, spectra.spectrum(i, j)
            for band, (lower, upper) in enumerate(found.bands):
                inside = (nu >= lower - 1e-9) & (nu <= upper + 1e-9)
                # The bands' edges are points, so that their cells count half in each.
                mean = np.trapezoid(sigma[inside], nu[inside]) / (upper - lower)
                assert node.b[band] == pytest.approx(mean, rel=1e-9)
                assert node.a[band] == pytest.approx(np.sum(bands.k(i, j)[band] * bands.g_weight), rel=1e-12)
                assert node.ratio[band] == node.a[band] / node.b[band]
                # Matched intervals keep the mean; f4 is what both are stored in.
                assert node.ratio[band] == pytest.approx(1.0, rel=1e-6)
    turned = opacity.compare(table, k)
    assert turned.nodes[0].ratio == pytest.approx([1.0 / ratio for ratio in found.nodes[0].ratio])
    assert turned.worst_transmission is None


def test_bands_beyond_the_spectra_are_left_out(build, tmp_path: Path):
    wide = build("wide", wavenumber="{ start = 2141.0, stop = 2149.0, step = 0.004 }")
    k = k_table_of(wide, tmp_path / "k.h5", np.linspace(2141.0, 2149.0, 9))
    found = opacity.compare(k, build("narrow"))
    assert found.notes[-1] == "4 of 8 bands reach beyond the spectra: left out"
    assert [lower for lower, _ in found.bands] == [2145.0, 2146.0, 2147.0, 2148.0]
    assert found.beyond(2e-3) == 0
    far = k_table_of(wide, tmp_path / "far.h5", np.array([2141.0, 2142.0, 2143.0]))
    with pytest.raises(TableError, match="no band lies within the spectra"):
        opacity.compare(far, build("narrow"))


def test_two_tables_of_k_by_transmission(build, tmp_path: Path):
    table = build()
    a, b = k_table_of(table, tmp_path / "a.h5"), k_table_of(table, tmp_path / "b.h5", points=20, scale=1.1)
    found = opacity.compare(a, b)
    place = found.worst_transmission
    assert place is not None
    with opacity.open_table(a) as one, opacity.open_table(b) as other:
        band = [lower for lower, _ in found.bands].index(place.lower)
        slow = []
        for opened in (one, other):
            k = opened.at(place.temperature, place.pressure)[band]
            means = [w * math.exp(-x * place.column) for x, w in zip(k, opened.g_weight, strict=True)]
            slow.append(sum(means))
        assert (place.a, place.b) == pytest.approx(tuple(slow), rel=1e-12)
        columns = np.geomspace(1e15, 1e26, 300)
        k, w = one.at(place.temperature, place.pressure)[band], one.g_weight
        assert 1e-3 * 0.99 <= place.a <= 0.98 * 1.01
        difference = np.abs(
            np.exp(-np.outer(columns, k)) @ w
            - np.exp(-np.outer(columns, other.at(place.temperature, place.pressure)[band])) @ other.g_weight
        )
    # Eight columns find most of what three hundred do.
    assert 0.7 * difference.max() <= abs(place.a - place.b) <= difference.max() * 1.01
    assert max(node.transmission for node in found.nodes) == abs(place.a - place.b)
    ratios = [ratio for node in found.nodes for ratio in node.ratio]
    assert ratios == pytest.approx([1.0 / 1.1] * 16, rel=1e-6)  # matched intervals keep the mean
    same = opacity.compare(a, a)
    assert same.worst_transmission.a == same.worst_transmission.b
    assert same.beyond(1e-15) == 0


def test_other_bands_are_refused(build, tmp_path: Path):
    table = build()
    a = k_table_of(table, tmp_path / "a.h5")
    b = k_table_of(table, tmp_path / "b.h5", np.linspace(2145.0, 2149.0, 4))
    with pytest.raises(TableError, match=r"their bands differ; .* found 4 bands, 2145 to 2149 cm-1; 3 bands"):
        opacity.compare(a, b)
    with pytest.raises(InputError, match="bands: those of a table of k-coefficients are its own"):
        opacity.compare(a, a, bands=10.0)
    with pytest.raises(TableError, match="columns of numbers are compared with a table of cross-sections"):
        opacity.compare(a, columns(table, tmp_path / "b.txt"), at=(296.0, 1.0))


@pytest.mark.parametrize(
    "options, words",
    [
        ({}, "at: .* is no table and does not say it"),
        ({"at": (296.0,)}, "at: not a node"),
        ({"at": (296.0, -1.0)}, r"at\[1\]: impossible"),
        ({"at": (296.0, 1.0), "unit": "barn"}, "unit: unknown unit of cross-section"),
        ({"at": (296.0, 1.0), "axis": "eV"}, "axis: unknown unit of a spectral axis"),
        ({"at": (296.0, 1.0), "columns": (1, 1)}, "columns: impossible"),
        ({"at": (296.0, 1.0), "bands": -1.0}, "bands: impossible"),
        ({"at": (296.0, 1.0), "mass": 0.0}, "mass: impossible"),
        ({"at": (296.0, 1.0), "lines": -1}, "lines: impossible"),
        ({"at": (296.0, 1.0), "plot": "p.pdf"}, "written as PNG"),
    ],
)
def test_impossible_arguments_are_refused(build, tmp_path: Path, options, words: str):
    table = build()
    path = columns(table, tmp_path / "b.txt")
    with pytest.raises(InputError, match=words):
        opacity.compare(table, path, **options)


def test_at_is_for_columns_only(build):
    table = build()
    with pytest.raises(InputError, match="is a table and has nodes of its own"):
        opacity.compare(table, table, at=(296.0, 1.0))


def test_nothing_in_common_is_refused(build, tmp_path: Path):
    table = build()
    path = columns(table, tmp_path / "b.txt")
    with pytest.raises(TableError, match="no node in common"):
        opacity.compare(table, path, at=(900.0, 1.0))
    path.write_text("100 1\n101 1\n102 1\n")
    with pytest.raises(TableError, match="no overlap of the wavenumbers"):
        opacity.compare(table, path, at=(296.0, 1.0))


def test_as_dict_is_plain(build, tmp_path: Path):
    a = build("a")
    found = opacity.compare(a, build("b", cutoff="0.5"))
    assert any(ratio == math.inf for node in found.nodes for ratio in node.ratio)
    plain = json.loads(json.dumps(found.as_dict(), allow_nan=False))
    assert plain["nodes"][0]["ratio"][0] is None or plain["nodes"][0]["ratio"][0] > 0.0
    assert plain["explanation"]["parts"]
    assert plain["largest"] == found.largest


@pytest.mark.real_lines
@pytest.mark.skipif(not os.environ.get("OPACITY_REAL_LINES"), reason="OPACITY_REAL_LINES is not set")
def test_real_lines_against_the_exact_sum(build, tmp_path: Path):
    """Real lines of CO: columns of the exact sum differ from the table by no more than its tolerance."""
    lines = os.environ["OPACITY_REAL_LINES"]
    table = build("co", ("carbon-monoxide.par", "CO.par"), ('abundance = "pure"', 'abundance = "terrestrial"'),
                  samples=lines)  # fmt: skip
    nu = np.linspace(2145.0, 2149.0, 1001)
    exact = opacity.exact_cross_section(
        opacity.read_lines(f"{lines}/CO.par"),
        wavenumber=nu,
        temperature=480.0,
        pressure=0.01,
        broadeners={"air": 1.0},
        cutoff=25.0,
    )[0, 0]
    path = tmp_path / "exact.txt"
    path.write_text("".join(f"{x:.12g} {y:.12e}\n" for x, y in zip(nu, exact, strict=True)))
    found = opacity.compare(table, path, at=(480.0, 0.01))
    assert abs(found.largest) <= 1e-3 + 1.2e-7
    assert found.beyond(1e-3) == 0
    part = found.explanation.parts[0]
    assert Path(part.file).name == "CO.par"
    record = Path(part.file).read_text().splitlines()[part.record - 1]
    assert float(record[3:15]) == part.wavenumber
