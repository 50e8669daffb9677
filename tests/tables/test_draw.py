"""Figures: every kind of table gives one, no line is lost, and what is wrong is said."""

from __future__ import annotations

import io
import sys

import matplotlib.image
import numpy as np
import pytest

from opacity.errors import InputError, ResourceError
from opacity.tables import curves
from opacity.tables import draw as drawing
from opacity.tables.draw import draw_table
from opacity.tables.read import open_table
from opacity.tables.write import write_cross_section_table


def rotor_band(wavenumber, temperatures, pressures):
    """An invented band: lines of a rigid rotor with Lorentz profiles, nothing beyond 25 cm-1."""
    levels = np.arange(30)
    centres = np.concatenate([2143.0 + 3.8 * (levels + 1), 2143.0 - 3.8 * (levels + 1)])
    energy = np.tile(1.9 * levels * (levels + 1), 2)
    weight = np.tile(2.0 * levels + 1.0, 2)
    values = np.zeros((len(temperatures), len(pressures), wavenumber.size))
    for i, temperature in enumerate(temperatures):
        strength = 1e-19 * weight * np.exp(-1.44 * energy / temperature) / temperature
        for j, pressure in enumerate(pressures):
            width = 0.06 * pressure + 0.003
            for centre, area in zip(centres, strength, strict=True):
                distance = wavenumber - centre
                values[i, j] += np.where(abs(distance) <= 25.0, area * width / np.pi / (distance**2 + width**2), 0.0)
    return values


def draw(table, folder, **options):
    with open_table(write_cross_section_table(folder / "a.h5", table)) as read:
        path = draw_table(read, folder / "a.png", **options)
    image = matplotlib.image.imread(io.BytesIO(path.read_bytes()), format="png")
    assert image.shape[0] > 800
    assert image.shape[1] > 1500
    return image


@pytest.mark.parametrize("points", [2000, 30000])
def test_a_band(make_table, tmp_path, points):
    wavenumber = np.linspace(1900.0, 2400.0, points)
    temperatures, pressures = (100.0, 300.0, 1000.0), (1e-4, 1e-2, 1.0, 10.0)
    values = rotor_band(wavenumber, temperatures, pressures)
    table = make_table(temperatures, pressures, points, wavenumber=wavenumber, cross_section=values)
    image = draw(table, tmp_path)
    for colour in ("#0072b2", "#009e73", "#d55e00"):
        wanted = [int(colour[i : i + 2], 16) / 255.0 for i in (1, 3, 5)]
        assert (np.abs(image[..., :3] - wanted).max(axis=-1) < 0.02).sum() > 500
    assert sorted(p.name for p in tmp_path.iterdir()) == ["a.h5", "a.png"]


@pytest.mark.parametrize(
    "changes",
    [
        {"cross_section": np.zeros((3, 4, 400))},
        {"temperatures": (300.0,)},
        {"pressures": (1.0,)},
        {"temperatures": (300.0,), "pressures": (1.0,)},
        {"temperatures": (300.0,), "pressures": (1.0,), "points": 1},
        {"points": 2},
        {"wavenumber": np.linspace(0.0, 30000.0, 400)},
        {"wavenumber": np.linspace(1e-3, 1e-2, 400)},
        {"temperatures": np.arange(300.0, 308.0), "pressures": np.arange(1.0, 9.0), "profile": True},
        {"temperatures": (300.0,), "pressures": (1.0,), "profile": True},
        {"title": "Costs $5 or $x_", "formula": "H2O$", "checks": {"audit": 3, "tolerance": "low"}},
        {"formula": "SO2", "points": 5000},
    ],
)
def test_every_kind_of_table(make_table, tmp_path, changes):
    draw(make_table(**changes), tmp_path)


@pytest.mark.parametrize("pressures", [(1e-4, 1.0), (9.87e-5, 1.23e-3, 0.123, 12.3)])
@pytest.mark.parametrize("zoom", [(2143.0, 2147.0), (2146.79, 2146.81)])
def test_the_legend_covers_no_curve_of_the_enlarged_part(make_table, tmp_path, pressures, zoom):
    wavenumber, temperatures = np.linspace(2100.0, 2200.0, 20001), (100.0, 300.0, 1000.0)
    values = rotor_band(wavenumber, temperatures, pressures)
    table = make_table(temperatures, pressures, wavenumber.size, wavenumber=wavenumber, cross_section=values)
    with open_table(write_cross_section_table(tmp_path / "a.h5", table)) as read:
        rc_context, figure_class, canvas_class = drawing._matplotlib(tmp_path)
        with rc_context(drawing._STYLE):
            figure = figure_class(figsize=(13.0, 7.3), dpi=160, layout="constrained")
            canvas = canvas_class(figure)
            drawing._fill_figure(figure, read, curves.groups_of(read), drawing._zoom_part(read, zoom))
            canvas.draw()
    (zoomed,) = (axes for axes in figure.axes if axes.get_title().startswith("enlarged"))
    highest = max(float(np.nanmax(line.get_ydata())) for line in zoomed.get_lines())
    assert zoomed.get_legend().get_window_extent().y0 > zoomed.transData.transform((zoom[0], highest))[1]


def test_zoom(make_table, tmp_path):
    draw(make_table(), tmp_path, zoom=(2100.0, 2110.0))
    with pytest.raises(InputError, match="zoom: holds no point of the table; expected a part of 2000 to 2300 cm-1"):
        draw(make_table(), tmp_path, zoom=(1900.0, 1950.0))


def test_the_same_table_gives_the_same_figure(make_table, tmp_path):
    first, second = (draw(make_table(), tmp_path) for _ in range(2))
    np.testing.assert_array_equal(first, second)


def test_another_name_than_png(make_table, tmp_path):
    with (
        open_table(write_cross_section_table(tmp_path / "a.h5", make_table())) as read,
        pytest.raises(InputError, match=r"a\.pdf: a figure is written as PNG"),
    ):
        draw_table(read, tmp_path / "a.pdf")


def test_without_matplotlib(make_table, tmp_path, monkeypatch):
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    with pytest.raises(ResourceError, match=r"needs matplotlib; install the extra: pip install 'opacity\[plot\]'"):
        draw(make_table(), tmp_path)


def test_an_envelope_keeps_every_line():
    """One point in 50,000 stands out, wherever it is; zeros are gaps, and do not pull the lower edge down."""
    wavenumber = np.linspace(0.0, 1000.0, 50000)
    for place in (0, 17, 24999, 49998, 49999):
        values = np.full(50000, 1e-25)
        values[place] = 1e-18
        values[20000:30000] = 0.0
        band = curves.envelope(wavenumber, values)
        kept = 1e-25 if 20000 <= place < 30000 else 1e-18
        assert np.nanmax(band.highest) == kept
        assert np.nanmin(band.lowest) == 1e-25
        gap = (band.wavenumber > 401.0) & (band.wavenumber < 599.0)
        assert np.isnan(band.highest[gap]).all()
        assert not np.isnan(band.highest[~gap & (abs(band.wavenumber - 500.0) > 102.0)]).any()


@pytest.mark.parametrize(
    ("first", "last"), [(2000.0, 2300.0), (0.0, 30000.0), (500.0, 10000.0), (2000.0, 2000.5), (1e-3, 1e-2), (1.0, 50.0)]
)
def test_wavelengths_are_round_and_apart(first, last):
    ticks = curves.wavelength_ticks(first, last)
    places = 1e4 / ticks
    assert 3 <= ticks.size <= 13
    assert np.all((places >= first - 1e-9) & (places <= last * (1 + 1e-12)))
    assert np.all(np.abs(np.diff(places)) >= (last - first) / 12.0 * (1 - 1e-12))


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (300.0, "300"),
        (0.01, "0.01"),
        (1e-6, "$10^{-6}$"),
        (3.16e-5, r"$3.16 \times 10^{-5}$"),
        (2e5, r"$2 \times 10^{5}$"),
    ],
)
def test_numbers_in_a_figure(value, text):
    assert curves.quantity(value) == text
