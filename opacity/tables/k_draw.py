"""A figure of a k-coefficient table: k against g of a few bands at a few nodes, and the error of each band."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np

from opacity.grids import FloatArray
from opacity.tables import draw
from opacity.tables.curves import quantity, spread
from opacity.tables.k_read import KCoefficientTable

_DECADES = 14.0


def draw_k_table(table: KCoefficientTable, path: Path) -> Path:
    """Write a PNG of `table` to `path` and return it.

    Raises InputError for a path that does not end in .png, ResourceError where matplotlib is missing or the file
    can't be written, TableError for damage.
    """
    return draw.picture(path, lambda figure: _fill(figure, table))


def _fill(figure: Any, table: KCoefficientTable) -> None:
    bands, errors = spread(table.band.size, 3), band_errors(table)
    grid = figure.add_gridspec(2 if errors else 1, len(bands), height_ratios=(2, 1) if errors else (1,))
    nodes = some_nodes(table)
    values = [table.k(*node) for node in nodes]
    limits = _limits([k[band] for k in values for band in bands])
    for column, band in enumerate(bands):
        axes = figure.add_subplot(grid[0, column])
        for look, (node, k) in enumerate(zip(nodes, values, strict=True)):
            style = {"color": draw.COLOURS[look], "linestyle": draw.DASHES[look], "label": _label(table, node)}
            _draw_steps(axes, table, band, k[band], style)
        axes.set(yscale="log", ylim=limits, xlim=(0.0, 1.0), xlabel="g")
        lower, upper = table.band_bounds[band]
        axes.set_title(f"{lower:.7g} to {upper:.7g} cm$^{{-1}}$")
        axes.tick_params(which="both", right=True)
        if column == 0:
            axes.set_ylabel(r"k (cm$^2$ molecule$^{-1}$)")
            axes.legend(loc="upper left", handlelength=3.0)
    if errors:
        _draw_errors(figure.add_subplot(grid[1, :]), table, errors)
    draw.add_title(figure, table)
    figure.supxlabel(f"{table.quadrature}, {table.g.size} g points", fontsize=9, color="0.3", x=0.99, ha="right")


def _draw_steps(axes: Any, table: KCoefficientTable, band: int, k: FloatArray, style: dict[str, Any]) -> None:
    """A step for each interval of g, as wide as its weight, and a dot at its point; zeros are gaps."""
    bounds = table.g_bounds[band] if table.g_bounds.ndim == 3 else table.g_bounds
    shown = np.where(k > 0.0, k, np.nan)
    axes.plot(bounds.ravel(), np.repeat(shown, 2), linewidth=1.3, **style)
    points = table.g if table.g_bounds.ndim == 2 else bounds.mean(axis=-1)
    axes.plot(points, shown, linestyle="none", marker=".", markersize=4, color=style["color"])


def _draw_errors(axes: Any, table: KCoefficientTable, errors: dict[str, FloatArray]) -> None:
    axes.set_yscale("log")
    for look, (name, values) in enumerate(errors.items()):
        shown = np.where(values > 0.0, values, np.nan)
        style = {"color": draw.COLOURS[look], "linestyle": draw.DASHES[look], "label": name}
        axes.plot(table.band_bounds.ravel(), np.repeat(shown, 2), linewidth=1.3, **style)
    axes.set_xlim(table.band_bounds[0, 0], table.band_bounds[-1, 1])
    axes.set(xlabel=r"wavenumber (cm$^{-1}$)", ylabel="error of\ntransmission")
    axes.ticklabel_format(axis="x", useOffset=False, style="plain")
    axes.tick_params(which="both", right=True)
    low, high = axes.get_ylim()
    axes.set_ylim(10.0 ** math.floor(math.log10(low)), high * (high / low) ** 0.5)
    axes.legend(loc="upper left", handlelength=3.0, ncols=len(errors))


def band_errors(table: KCoefficientTable) -> dict[str, FloatArray]:
    """What the certificate says of every band, (n_band,) each; nothing where it holds no error for every band."""
    certificate = table.checks.get("certificate")
    if not isinstance(certificate, dict):
        return {}
    words = {"largest": "largest of all nodes", "p99": "99 % of nodes and columns"}
    sampled = {"middle": "between nodes, sampled", "two_layers": "two layers, sampled"}
    found = {}
    try:
        for name, label in words.items():
            found[label] = np.abs(np.array([float(one[name]) for one in certificate["bands"]]))
        for name, label in sampled.items():
            values = {int(one["band"]): one[name] for one in certificate.get("sampled", [])}
            rows = [values.get(band) for band in range(table.band.size)]
            if any(one is not None for one in rows):
                found[label] = np.array([math.nan if one is None else float(one) for one in rows])
    except (KeyError, TypeError, ValueError):
        return {}
    fits = all(values.shape == table.band.shape for values in found.values())
    return found if fits and any(np.any(values > 0.0) for values in found.values()) else {}


def some_nodes(table: KCoefficientTable) -> list[tuple[int, ...]]:
    """Up to five nodes: along a profile, or the corners and the middle of a grid."""
    if table.profile:
        return [(i,) for i in spread(table.temperature.size, 5)]
    t, p = table.temperature.size - 1, table.pressure.size - 1
    return sorted({(0, 0), (0, p), ((t + 1) // 2, (p + 1) // 2), (t, 0), (t, p)})


def _label(table: KCoefficientTable, node: tuple[int, ...]) -> str:
    return f"{table.temperature[node[0]]:.4g} K, {quantity(table.pressure[node[-1]])} bar"


def _limits(rows: list[FloatArray]) -> tuple[float, float]:
    """An axis that holds all values above 0, or the uppermost decades of them, and the legend above."""
    positive = np.concatenate([row[row > 0.0] for row in rows])
    if positive.size == 0:
        return 1e-30, 1e-16
    highest = float(positive.max())
    bottom = max(float(positive.min()) / 2.0, highest * 10.0**-_DECADES)
    return bottom, 2.0 * highest * math.pow(highest / bottom, 0.35)
