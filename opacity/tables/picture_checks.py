"""Pictures for a page of numbers about a table: maps over temperature and pressure, rows of marks, curves."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from opacity.grids import FloatArray
from opacity.tables.svg import LEFT, RIGHT, WIDTH, Axes, Picture, Scale, decades, number, widened

_SHADES = 5
_NARROWEST = 46.0
"""A cell of a map narrower than this has no room for its number."""
_ROW = 30.0


@dataclass(frozen=True)
class Cells:
    """Sizes at temperatures (n_t,), K, and pressures (n_p,), bar: `values` (n_t, n_p), NaN where there is none.

    `limits` is what they may be, one for all or (n_t, n_p); NaN or infinite where nothing is judged.
    """

    temperature: FloatArray
    pressure: FloatArray
    values: FloatArray
    limits: FloatArray


def error_map(name: str, title: str, cells: Cells, words: str) -> Picture:
    """Sizes over temperature (up) and pressure (across), darker where larger, written in the cells if there is room;
    a cell beyond its limit is crossed out.
    """
    values = np.abs(cells.values)
    low, high = _ends(values)
    rows, columns = values.shape
    height = min(34.0, max(7.0, 420.0 / rows))
    top = 34.0
    bottom = top + rows * height
    picture = Picture(name, title, _said(cells, words), bottom + 46.0)
    width = (WIDTH - LEFT - RIGHT) / columns
    judged = bool(np.any(np.isfinite(cells.limits)))
    _shade_legend(picture, low, high, "smaller to larger" + ("; crossed out: beyond its limit" if judged else ""))
    for i in range(rows):
        y = bottom - (i + 1) * height
        if i % max(1, int(18.0 / height)) == 0:
            picture.text(LEFT - 7.0, y + 0.5 * height + 4.5, f"{cells.temperature[i]:.5g}", "end")
        for j in range(columns):
            if np.isfinite(values[i, j]):
                beyond = bool(values[i, j] > np.broadcast_to(cells.limits, values.shape)[i, j])
                _cell(picture, (LEFT + j * width, y, width, height), float(values[i, j]), (low, high), beyond)
    every = max(1, int(62.0 / width + 0.999))
    for j in range(0, columns, every):
        picture.text(LEFT + (j + 0.5) * width, bottom + 17.0, number(float(cells.pressure[j])), "mid")
    picture.text(0.5 * (LEFT + WIDTH - RIGHT), bottom + 38.0, "pressure (bar)", "mid")
    picture.text(14.0, 0.5 * (top + bottom), "temperature (K)" if rows > 3 else "T (K)", "mid", turned=True)
    picture.parts.append(f'<path d="M{LEFT} {top}H{WIDTH - RIGHT}V{bottom}H{LEFT}z" class="axis"/>')
    return picture


def _ends(values: FloatArray) -> tuple[float, float]:
    """Whole powers of ten around all sizes above 0, six at most."""
    positive = values[np.isfinite(values) & (values > 0.0)]
    if not positive.size:
        return 1e-16, 1e-15
    high = 10.0 ** np.ceil(np.log10(positive.max()))
    low = 10.0 ** np.floor(np.log10(positive.min()))
    return float(max(min(low, 0.1 * high), 1e-6 * high)), float(high)


def _shade(value: float, ends: tuple[float, float]) -> float:
    """How dark a cell is, 0.06 to 0.85."""
    low, high = ends
    part = np.log(max(value, low) / low) / np.log(high / low)
    return float(0.06 + 0.79 * min(max(part, 0.0), 1.0))


def _cell(
    picture: Picture, box: tuple[float, float, float, float], value: float, ends: tuple[float, float], beyond: bool
) -> None:
    x, y, width, height = box
    shade = _shade(value, ends)
    size = f'x="{x:.1f}" y="{y:.1f}" width="{width:.1f}" height="{height:.1f}"'
    picture.parts.append(f'<rect {size} style="fill:var(--look0);fill-opacity:{shade:.2f};stroke:var(--paper)"/>')
    if width >= _NARROWEST and height >= 17.0:
        # On dark paper the letters of a bright cell are dark.
        ink = "small mid onshade" if shade > 0.68 else "small mid"
        picture.text(x + 0.5 * width, y + 0.5 * height + 4.0, f"{value:.1e}" if value else "0", ink)
    if beyond:
        picture.line(x + 2.0, y + 2.0, x + width - 2.0, y + height - 2.0, "axis")
        picture.line(x + 2.0, y + height - 2.0, x + width - 2.0, y + 2.0, "axis")


def _shade_legend(picture: Picture, low: float, high: float, words: str) -> None:
    width = 62.0
    for place, value in enumerate(np.geomspace(low, high, _SHADES)):
        x = LEFT + place * width
        shade = _shade(float(value), (low, high))
        size = f'x="{x:.1f}" y="4" width="{width:.1f}" height="20"'
        picture.parts.append(f'<rect {size} style="fill:var(--look0);fill-opacity:{shade:.2f};stroke:var(--paper)"/>')
        ink = "small mid onshade" if shade > 0.68 else "small mid"
        picture.text(x + 0.5 * width, 18.0, f"{value:.0e}", ink)
    picture.text(LEFT + _SHADES * width + 12.0, 18.5, words)


def _said(cells: Cells, words: str) -> str:
    values = np.abs(cells.values)
    there = np.isfinite(values)
    if not np.any(there):
        return f"{words} No value is known."
    i, j = np.unravel_index(int(np.argmax(np.where(there, values, -1.0))), values.shape)
    counted = f"{int(there.sum())} value{'' if there.sum() == 1 else 's'}"
    beyond = int(np.sum(there & (values > np.broadcast_to(cells.limits, values.shape))))
    return (
        f"{words} {counted}, median {number(float(np.median(values[there])), 2)}, largest"
        f" {number(float(values[i, j]), 2)} at {cells.temperature[i]:.6g} K, {number(float(cells.pressure[j]))} bar"
        + (f"; {beyond} beyond their limit." if np.any(np.isfinite(cells.limits)) else ".")
    )


@dataclass(frozen=True)
class Mark:
    """A mark on a row: its `value`, None for no mark, and the number of its look; `hollow` lets one beneath show."""

    value: float | None
    look: int = 0
    hollow: bool = False


@dataclass(frozen=True)
class Row:
    """A row of marks: its label, its marks, what is said at its end, and bars from one value to another about 0."""

    label: str
    marks: tuple[Mark, ...]
    words: str = ""
    narrow: tuple[float, float] | None = None
    wide: tuple[float, float] | None = None


def mark_rows(
    name: str, title: str, description: str, rows: Sequence[Row], label: str, legend: Sequence[str], log: bool = False
) -> Picture:
    """Rows of marks on one scale across; where bars are given they are the published uncertainty, once and twice."""
    left, right = 208.0, WIDTH - (176.0 if any(row.words for row in rows) else RIGHT)
    picture = Picture(name, title, description)
    top = (
        picture.legend(
            [(words, look) for look, words in enumerate(legend)],
            4.0,
            True,
            any(m.hollow for r in rows for m in r.marks),
        )
        + 10.0
    )
    bottom = top + _ROW * len(rows) + 8.0
    picture.height = bottom + 44.0
    values = [mark.value for row in rows for mark in row.marks if mark.value is not None]
    spans = [end for row in rows for bar in (row.narrow, row.wide) if bar for end in bar]
    ends = decades([np.array(values)]) if log else widened(min([*values, *spans, 0.0]), max([*values, *spans, 0.0]))
    scale = Scale(*ends, left, right, log)
    Axes(picture, scale, Scale(0.0, float(len(rows)), bottom, top)).frame(label, rows=False, most=5)
    for place, row in enumerate(rows):
        _mark_row(picture, scale, row, top + _ROW * (place + 0.5) + 4.0)
    return picture


def _mark_row(picture: Picture, scale: Scale, row: Row, y: float) -> None:
    picture.text(scale.start - 9.0, y + 4.5, _shortened(row.label, 29), "end")
    picture.text(scale.end + 9.0, y + 4.0, _shortened(row.words, 26), "small")
    for bar, style in ((row.wide, "stroke-width:1.2"), (row.narrow, "stroke-width:4;stroke-opacity:.55")):
        if bar is not None:
            low, high = (float(scale(end)) for end in bar)
            picture.line(low, y, high, y, "axis", style)
            for end in (low, high):
                picture.line(end, y - 6.0, end, y + 6.0, "axis", "stroke-width:1.2")
    for mark in row.marks:
        if mark.value is not None and np.isfinite(scale(mark.value)):
            picture.mark(float(scale(mark.value)), y, mark.look, mark.hollow)


def _shortened(words: str, most: int) -> str:
    return words if len(words) <= most else words[: most - 1] + "…"


@dataclass(frozen=True)
class Line:
    """A curve of a picture: `x` and `y` (n,), NaN where there is none."""

    label: str
    x: FloatArray
    y: FloatArray


def line_picture(
    name: str,
    title: str,
    description: str,
    lines: Sequence[Line],
    labels: tuple[str, str],
    log: bool = False,
) -> Picture:
    """Curves in one box; `labels` of x and y; `log` is of y; a single point becomes a mark."""
    picture = Picture(name, title, description)
    top = picture.legend([(line.label, look) for look, line in enumerate(lines)], 4.0) + 10.0
    picture.height = top + 240.0
    x = np.concatenate([line.x for line in lines])
    y = np.concatenate([line.y for line in lines])
    y = y[np.isfinite(y)]
    across = (float(x.min()), float(x.max())) if x.max() > x.min() else widened(float(x[0]), float(x[0]))
    up = decades([y]) if log else widened(float(y.min()), float(y.max()))
    scales = Scale(*across, LEFT, WIDTH - RIGHT), Scale(*up, picture.height - 44.0, top, log)
    axes = Axes(picture, *scales).frame(*labels)
    for look, line in enumerate(lines):
        axes.curve(line.x, line.y, look)
        if line.x.size <= 12:
            for a, b in zip(scales[0](line.x), scales[1](line.y), strict=True):
                if np.isfinite(a) and np.isfinite(b):
                    picture.mark(float(a), float(b), look)
    return picture
