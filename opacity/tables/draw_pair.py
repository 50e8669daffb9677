"""A figure of two spectra that are compared: both above, their ratio below."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from opacity.grids import FloatArray
from opacity.tables import curves, draw

_DECADES_SHOWN = 14.0
_WIDEST_LINEAR = 10.0
"""Ratios whose largest is up to so many times their smallest are drawn on an even scale."""


@dataclass(frozen=True)
class PairPicture:
    """What is drawn: `heading`, names of A and B, `wavenumber` (n,), cm-1, and values of both (n,), cm2/molecule.

    With `edges` (n, 2), cm-1, the values are means of bands, drawn as steps.  `caption` may be empty.
    """

    heading: str
    names: tuple[str, str]
    wavenumber: FloatArray
    a: FloatArray
    b: FloatArray
    edges: FloatArray | None = None
    caption: str = ""


def draw_pair(pair: PairPicture, path: Path) -> Path:
    """Write a PNG of two spectra to `path` and return it; errors as those of `draw.picture`."""
    return draw.picture(path, lambda figure: _fill(figure, pair))


def _fill(figure: Any, pair: PairPicture) -> None:
    grid = figure.add_gridspec(2, 1, height_ratios=(2, 1))
    above = figure.add_subplot(grid[0])
    below = figure.add_subplot(grid[1], sharex=above)
    group = curves.Group(
        pair.heading, tuple(curves.Curve(name, values, 0) for name, values in zip("AB", (pair.a, pair.b), strict=True))
    )
    above.set(yscale="log", ylim=curves.value_range([group], slice(None), _DECADES_SHOWN), ylabel=_label(pair))
    above.set_xlim(*_ends(pair))
    # B, in warm dashes, lies over A: where the two agree both are seen.
    for name, label, values, look in zip("AB", pair.names, (pair.a, pair.b), (0, 2), strict=True):
        _curve(above, pair, values, look, f"{name}: {_plain(label)}")
    above.legend(loc="upper right", ncols=2, handlelength=3.0)
    above.tick_params(which="both", right=True, labelbottom=False)
    draw.add_wavelengths(above)
    _fill_ratio(below, pair)
    figure.suptitle(_plain(pair.heading), fontsize=13)
    words = [pair.caption] if pair.caption else []
    if pair.edges is None and pair.wavenumber.size > curves.MOST_POINTS:
        words.append("lines: largest value of each bin, shading: down to the smallest")
    if words:
        figure.supxlabel(_plain("; ".join(words)), fontsize=9, color="0.3", x=0.99, ha="right")


def _fill_ratio(axes: Any, pair: PairPicture) -> None:
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.where((pair.a > 0.0) & (pair.b > 0.0), pair.a / pair.b, np.nan)
    there = ratio[np.isfinite(ratio)]
    axes.axhline(1.0, color="0.5", linewidth=0.8, zorder=0)
    _ratio_curve(axes, pair, ratio)
    lowest, highest = (float(there.min()), float(there.max())) if there.size else (1.0, 1.0)
    if highest > _WIDEST_LINEAR * lowest:
        axes.set_yscale("log")
    else:
        axes.ticklabel_format(axis="y", useOffset=False)
        lowest, highest = min(lowest, 1.0), max(highest, 1.0)
        margin = max(0.08 * (highest - lowest), 1e-7)
        axes.set_ylim(lowest - margin, highest + margin)
    axes.set(xlabel=draw.X_LABEL, ylabel="A / B")
    axes.ticklabel_format(axis="x", useOffset=False, style="plain")
    axes.tick_params(which="both", right=True)


def _ratio_curve(axes: Any, pair: PairPicture, ratio: FloatArray) -> None:
    """A ratio in black; of many points the smallest and the largest in each bin, and shading in between."""
    black = draw.COLOURS[4]
    if pair.edges is not None or pair.wavenumber.size <= curves.MOST_POINTS:
        _curve(axes, pair, np.nan_to_num(ratio, nan=0.0), 4, None)  # zeros are gaps
        return
    band = curves.envelope(pair.wavenumber, np.nan_to_num(ratio, nan=0.0))
    axes.fill_between(band.wavenumber, band.lowest, band.highest, color=black, alpha=0.25, linewidth=0)
    for edge in (band.lowest, band.highest):
        axes.plot(band.wavenumber, edge, color=black, linewidth=0.7)


def _curve(axes: Any, pair: PairPicture, values: FloatArray, look: int, label: str | None) -> None:
    style = {"color": draw.COLOURS[look], "linestyle": draw.DASHES[look], "label": label}
    if pair.edges is None:
        draw.draw_curve(axes, pair.wavenumber, values, style)
        return
    shown = np.where(values > 0.0, values, np.nan)
    axes.plot(pair.edges.ravel(), np.repeat(shown, 2), linewidth=1.3, **style)


def _ends(pair: PairPicture) -> tuple[float, float]:
    if pair.edges is not None:
        return float(pair.edges[0, 0]), float(pair.edges[-1, 1])
    return float(pair.wavenumber[0]), float(pair.wavenumber[-1])


def _label(pair: PairPicture) -> str:
    return draw.Y_LABEL if pair.edges is None else r"mean of the band (cm$^2$ molecule$^{-1}$)"


def _plain(text: str) -> str:
    """Names of files are the user's own text: a dollar sign in it must not start mathematics."""
    return text.replace("$", r"\$")
