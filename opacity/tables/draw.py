"""A figure of a table: cross-section against wavenumber, by temperature and by pressure, and one strong line."""

from __future__ import annotations

import io
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

from opacity.errors import InputError, ResourceError, problem
from opacity.tables import curves
from opacity.tables.atomic import write_atomically
from opacity.tables.opened import OpenedTable
from opacity.tables.read import Table

# Colours that the colour-blind tell apart (Okabe & Ito 2008, "Color Universal Design"; as in matplotlib's
# "okabe_ito"), dark ones first; curves differ by their dashes too.
COLOURS = ("#0072b2", "#009e73", "#d55e00", "#cc79a7", "#000000")
DASHES = ("-", (0, (5, 1.2)), (0, (1.2, 1.0)), (0, (6, 1.2, 1.2, 1.2)), "-")

_STYLE = {
    "font.size": 11.0,
    "axes.titlesize": 11.0,
    "axes.linewidth": 0.8,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "legend.frameon": False,
    "path.simplify": False,
}
_LEGEND_ROW = 0.042
"""Height of a row of the legend, as a share of the enlarged panel's."""
Y_LABEL = r"cross-section (cm$^2$ molecule$^{-1}$)"
X_LABEL = r"wavenumber (cm$^{-1}$)"


def draw_table(table: Table, path: Path, *, zoom: tuple[float, float] | None = None) -> Path:
    """Write a PNG of `table` to `path` and return it.

    `zoom` is the range (cm-1) shown enlarged; the surroundings of the strongest line by default.
    Raises InputError for a zoom that holds no point of the table or a path that does not end in .png,
    ResourceError where matplotlib is missing or the file can't be written, TableError for damage.
    """
    groups = curves.groups_of(table)
    part = curves.strong_stretch(table, groups[-1]) if zoom is None else _zoom_part(table, zoom)
    return picture(path, lambda figure: _fill_figure(figure, table, groups, part))


def picture(path: Path, fill: Callable[[Any], None]) -> Path:
    """Write what `fill` draws into a figure to `path` as PNG; errors as those of `draw_table`."""
    path = Path(path)
    if path.suffix.lower() != ".png":
        raise InputError(problem(path, "a figure is written as PNG", expected="a name that ends in .png"))
    rc_context, figure_class, canvas_class = _matplotlib(path)
    with rc_context(_STYLE):
        figure = figure_class(figsize=(13.0, 7.3), dpi=160, layout="constrained")
        canvas = canvas_class(figure)
        fill(figure)
        stream = io.BytesIO()
        # The name and version of the software would make files differ that look the same.
        canvas.print_png(stream, metadata={"Software": None})
    return write_atomically(path, stream.getvalue())


def _matplotlib(path: Path) -> tuple[Any, Any, Any]:
    """What draws, without a display and without touching the state of a program that plots by itself."""
    try:
        from matplotlib import rc_context
        from matplotlib.backends.backend_agg import FigureCanvasAgg
        from matplotlib.figure import Figure
    except ImportError as error:
        message = problem(path, "drawing needs matplotlib", remedy="install the extra: pip install 'opacity[plot]'")
        raise ResourceError(message) from error
    return rc_context, Figure, FigureCanvasAgg


def _zoom_part(table: Table, zoom: tuple[float, float]) -> slice:
    first, last = np.searchsorted(table.wavenumber, zoom[0]), np.searchsorted(table.wavenumber, zoom[1], side="right")
    if not last > first:
        found = f"{zoom[0]:g} to {zoom[1]:g} cm-1"
        expected = f"a part of {table.wavenumber[0]:.10g} to {table.wavenumber[-1]:.10g} cm-1"
        raise InputError(problem("zoom", "holds no point of the table", expected=expected, found=found))
    return slice(int(first), int(last))


def _fill_figure(figure: Any, table: Table, groups: list[curves.Group], part: slice) -> None:
    grid = figure.add_gridspec(len(groups), 2, width_ratios=(2.1, 1.0))
    everything = slice(0, table.wavenumber.size)
    limits = curves.value_range(groups, everything)
    wide: list[Any] = []
    for row, group in enumerate(groups):
        axes = figure.add_subplot(grid[row, 0], sharex=wide[0] if wide else None)
        _draw_group(axes, table, group, everything, limits)
        axes.set_ylabel(Y_LABEL)
        axes.text(0.012, 0.94, group.heading, transform=axes.transAxes, va="top")
        columns = len(group.curves) if len(group.curves) <= 4 else 3
        axes.legend(loc="upper right", ncols=columns, handlelength=3.0, columnspacing=1.5)
        wide.append(axes)
        axes.axvspan(*_ends(table, part), color="0.85", zorder=0)
    wide[-1].set_xlabel(X_LABEL)
    for axes in wide[:-1]:
        axes.tick_params(labelbottom=False)
    add_wavelengths(wide[0])
    zoomed = figure.add_subplot(grid[:, 1])
    # Its legend stands above the curves: a line's peak may lie anywhere below it.
    above = _LEGEND_ROW * (len(groups[-1].curves) + 1.5) if len(groups) > 1 else 0.05
    _draw_group(zoomed, table, groups[-1], part, curves.value_range(groups[-1:], part, above=above))
    if len(groups) > 1:
        zoomed.legend(title=groups[-1].heading, loc="upper right", handlelength=3.0)
    zoomed.locator_params(axis="x", nbins=4)
    zoomed.set_xlabel(X_LABEL)
    zoomed.set_title("enlarged: the stretch shaded on the left", color="0.3")
    _add_words(figure, table)


def _add_words(figure: Any, table: Table) -> None:
    add_title(figure, table)
    words = curves.caption(table)
    if words:
        figure.supxlabel(words, fontsize=9, color="0.3", x=0.99, ha="right")


def add_title(figure: Any, table: OpenedTable) -> None:
    """The table's title, with its formula where that is not in it."""
    # The title is the user's own text: a dollar sign in it must not start mathematics.
    title = table.title.replace("$", r"\$")
    figure.suptitle(title if table.formula in table.title else f"{title}  ({_formula(table.formula)})", fontsize=15)


def _formula(formula: str) -> str:
    """A sum formula with its digits lowered."""
    if not re.fullmatch(r"[A-Za-z0-9]+", formula):
        return formula.replace("$", r"\$")
    return r"$\mathrm{" + re.sub(r"(\d+)", r"_{\1}", formula) + "}$"


def _ends(table: Table, part: slice) -> tuple[float, float]:
    return float(table.wavenumber[part.start]), float(table.wavenumber[part.stop - 1])


def _draw_group(axes: Any, table: Table, group: curves.Group, part: slice, limits: tuple[float, float]) -> None:
    axes.set_yscale("log")
    axes.set_ylim(*limits)
    first, last = _ends(table, part)
    if last > first:
        axes.set_xlim(first, last)
    for curve in group.curves:
        look = {"color": COLOURS[curve.look], "linestyle": DASHES[curve.look], "label": curve.label}
        draw_curve(axes, table.wavenumber[part], curve.values[part], look)
    axes.tick_params(which="both", right=True)
    axes.ticklabel_format(axis="x", useOffset=False, style="plain")


def draw_curve(axes: Any, wavenumber: Any, values: Any, look: dict[str, Any]) -> None:
    """Zeros are gaps; a curve of many points is the band between its bins' smallest and largest values."""
    if wavenumber.size <= curves.MOST_POINTS:
        marker = "." if wavenumber.size == 1 else None
        axes.plot(wavenumber, np.where(values > 0.0, values, np.nan), linewidth=1.3, marker=marker, **look)
        return
    band = curves.envelope(wavenumber, values)
    axes.fill_between(band.wavenumber, band.lowest, band.highest, color=look["color"], alpha=0.25, linewidth=0)
    axes.plot(band.wavenumber, band.highest, linewidth=1.0, **look)


def add_wavelengths(axes: Any) -> None:
    """A scale of wavelengths (um) along the top."""
    first, last = axes.get_xlim()
    top = axes.secondary_xaxis("top")
    ticks = curves.wavelength_ticks(first, last)
    top.set_xticks(1e4 / ticks, [f"{tick:.5g}" for tick in ticks])
    top.minorticks_off()
    top.set_xlabel("wavelength (µm)")
