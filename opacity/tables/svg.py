"""Pictures as SVG for a page: axes, curves, marks and maps, each with a title and a text that says what is to be seen.

Colours and dashes are those of `draw`; the page that holds the pictures gives each look its colour (`STYLE`), so that
they are to be read on light and on dark paper.  Nothing here needs matplotlib.
"""

from __future__ import annotations

import html
import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from opacity.errors import printable
from opacity.grids import FloatArray
from opacity.tables.draw import COLOURS, DASHES

WIDTH = 720.0
LEFT, RIGHT = 78.0, 26.0
LETTER, ROW = 7.4, 20.0
"""Width of a wide letter, and height of a row of a legend."""
MARKS = ("circle", "square", "diamond", "triangle", "cross")

# On dark paper the lighter ones of the same set of colours (Okabe & Ito 2008), so that curves stand out as much.
_ON_DARK = ("#56b4e9", "#2fbf93", "#ee7733", "#dd9dbf", "#f2f2f2")


def _colours(colours: Sequence[str]) -> str:
    return "".join(f"--look{number}:{colour};" for number, colour in enumerate(colours))


STYLE = (
    f":root{{{_colours(COLOURS)}}}"
    f"@media screen and (prefers-color-scheme:dark){{:root{{{_colours(_ON_DARK)}}}}}"
    "svg[role=img]{display:block;width:100%;height:auto;min-width:560px;fill:currentColor}"
    "svg text{font:13px system-ui,sans-serif}"
    "@media screen and (prefers-color-scheme:dark){svg .onshade{fill:var(--paper)}}"
    "svg .axis{stroke:currentColor;fill:none;stroke-width:1}"
    "svg .grid{stroke:currentColor;stroke-opacity:.13;fill:none}"
    "svg .curve{fill:none;stroke-width:1.6;stroke-linejoin:round}"
    "svg .small{font-size:11px}"
    "svg .end{text-anchor:end}svg .mid{text-anchor:middle}"
)

_MINUS = "\u2212"
_RAISED = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")


def number(value: float, digits: int = 3) -> str:
    """A number for a label: plain between 0.01 and 10,000, otherwise with its power of ten."""
    if value == 0.0 or not math.isfinite(value):
        return "0" if value == 0.0 else "not a number"
    if 1e-2 <= abs(value) < 1e4:
        return f"{value:.{digits}g}".replace("-", _MINUS)
    mantissa, exponent = f"{value:.{digits - 1}e}".split("e")
    mantissa = (mantissa.rstrip("0").rstrip(".") if "." in mantissa else mantissa).replace("-", _MINUS)
    power = f"10{str(int(exponent)).translate(_RAISED)}"
    return power if mantissa == "1" else f"{_MINUS}{power}" if mantissa == f"{_MINUS}1" else f"{mantissa}\u00d7{power}"


def escaped(text: object) -> str:
    """A text that may stand anywhere in a page, also in an attribute; what does not print is written as an escape."""
    return html.escape(printable(str(text)), quote=True)


@dataclass(frozen=True)
class Scale:
    """From values to places on the page; logarithmic ones need positive values."""

    low: float
    high: float
    start: float
    end: float
    log: bool = False

    def __call__(self, values: Any) -> FloatArray:
        """Places of values, NaN where a logarithm has none; far beyond the ends they stay at arm's length."""
        values = np.asarray(values, dtype=np.float64)
        with np.errstate(divide="ignore", invalid="ignore"):
            if self.log:
                values = np.where(values > 0.0, np.log(values / self.low), np.nan) / math.log(self.high / self.low)
            else:
                values = (values - self.low) / (self.high - self.low)
        return np.asarray(self.start + np.clip(values, -1.0, 2.0) * (self.end - self.start))

    def ticks(self, most: int = 7) -> list[float]:
        """Round values from end to end, or whole powers of ten."""
        if self.log:
            first, last = math.ceil(math.log10(self.low) - 1e-9), math.floor(math.log10(self.high) + 1e-9)
            if last - first >= 1:
                every = max(1, math.ceil((last - first + 1) / most))
                return [10.0**power for power in range(first, last + 1) if (power - last) % every == 0]
            found = [f * 10.0**p for p in range(first - 1, last + 1) for f in (1.0, 2.0, 5.0)]
            found = [one for one in found if self.low <= one <= self.high]
            return found if len(found) > 1 else _round_values(self.low, self.high, 4)
        return _round_values(self.low, self.high, most)


def _round_values(low: float, high: float, most: int) -> list[float]:
    rough = (high - low) / most
    unit = 10.0 ** math.floor(math.log10(rough))
    step = unit * next(factor for factor in (1, 2, 5, 10) if factor * unit >= rough * (1.0 - 1e-9))
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [0.0 if place == 0 else place * step for place in range(first, last + 1)]


def tick_text(value: float, log: bool) -> str:
    """The words of a tick."""
    return number(value) if log else f"{value:.7g}".replace("-", _MINUS)


@dataclass
class Picture:
    """One picture.  `name` makes its ids, unique on a page where names are.

    `title` and `description` are its text; `caption`, where given, is a shorter one to stand below it.
    """

    name: str
    title: str
    description: str
    height: float = 330.0
    caption: str = ""
    parts: list[str] = field(default_factory=list)
    _clips: int = 0

    def svg(self) -> str:
        """The picture as an element of a page."""
        name = escaped(self.name)
        return (
            f'<svg role="img" viewBox="0 0 {WIDTH:g} {self.height:g}" aria-labelledby="{name}-title {name}-desc">'
            f'<title id="{name}-title">{escaped(self.title)}</title>'
            f'<desc id="{name}-desc">{escaped(self.description)}</desc>{"".join(self.parts)}</svg>'
        )

    def text(self, x: float, y: float, words: str, kind: str = "", turned: bool = False) -> None:
        """Words at a place; `kind` is of the style: end, mid, small."""
        turn = f' transform="rotate(-90 {x:.1f} {y:.1f})"' if turned else ""
        self.parts.append(f'<text x="{x:.1f}" y="{y:.1f}" class="{kind}"{turn}>{escaped(words)}</text>')

    def line(self, x1: float, y1: float, x2: float, y2: float, kind: str, style: str = "") -> None:
        """A straight line."""
        style = f' style="{style}"' if style else ""
        self.parts.append(f'<path d="M{x1:.1f} {y1:.1f}L{x2:.1f} {y2:.1f}" class="{kind}"{style}/>')

    def clip(self, box: tuple[float, float, float, float]) -> str:
        """A new id of a clipping to a box of left, top, right and bottom."""
        self._clips += 1
        name = f"{escaped(self.name)}-clip{self._clips}"
        left, top, right, bottom = box
        size = f'x="{left:.1f}" y="{top:.1f}" width="{right - left:.1f}" height="{bottom - top:.1f}"'
        self.parts.append(f'<clipPath id="{name}"><rect {size}/></clipPath>')
        return name

    def mark(self, x: float, y: float, look: int, hollow: bool = False) -> None:
        """A mark whose shape and colour are those of its look."""
        shape = {
            "circle": f"M{x - 5:.1f} {y:.1f}a5 5 0 1 0 10 0a5 5 0 1 0 -10 0z",
            "square": f"M{x - 4.5:.1f} {y - 4.5:.1f}h9v9h-9z",
            "diamond": f"M{x:.1f} {y - 6.5:.1f}l6.5 6.5l-6.5 6.5l-6.5 -6.5z",
            "triangle": f"M{x:.1f} {y - 6:.1f}l6 11h-12z",
            "cross": f"M{x - 5:.1f} {y - 5:.1f}l10 10m0 -10l-10 10",
        }[MARKS[look % len(MARKS)]]
        colour = f"var(--look{look % len(COLOURS)})"
        fill = "none" if hollow or MARKS[look % len(MARKS)] == "cross" else colour
        self.parts.append(f'<path d="{shape}" style="fill:{fill};stroke:{colour};stroke-width:1.8"/>')

    def legend(self, labels: Sequence[tuple[str, int]], top: float, marks: bool = False, hollow: bool = False) -> float:
        """A legend in rows from `top` on; where it ends.  `hollow` is for marks of all looks but the first."""
        x, y = LEFT, top
        for label, look in labels:
            width = 46.0 + LETTER * len(label)
            if x + width > WIDTH and x > LEFT:
                x, y = LEFT, y + ROW
            if marks:
                self.mark(x + 12.0, y + 10.0, look, hollow and look > 0)
            else:
                self.line(x, y + 10.0, x + 28.0, y + 10.0, "curve", curve_style(look))
            self.text(x + (24.0 if marks else 34.0), y + 14.5, label)
            x += width
        return y + ROW if labels else top


def curve_style(look: int) -> str:
    """Colour and dashes of a curve."""
    dashes = DASHES[look % len(DASHES)]
    pattern = "" if isinstance(dashes, str) else f";stroke-dasharray:{' '.join(f'{2.0 * one:g}' for one in dashes[1])}"
    width = ";stroke-width:1" if look % len(DASHES) == len(DASHES) - 1 else ""
    return f"stroke:var(--look{look % len(COLOURS)}){pattern}{width}"


@dataclass
class Axes:
    """A framed box of a picture with two scales; curves in it are clipped to the box."""

    picture: Picture
    x: Scale
    y: Scale
    _clip: str = ""

    @property
    def box(self) -> tuple[float, float, float, float]:
        """Left, top, right and bottom."""
        return self.x.start, self.y.end, self.x.end, self.y.start

    def frame(self, x_label: str, y_label: str = "", y_words: bool = True, rows: bool = True, most: int = 7) -> Axes:
        """Frame, grid (with `rows` across), ticks and their words."""
        left, top, right, bottom = self.box
        picture = self.picture
        for value in self.x.ticks(most):
            x = float(self.x(value))
            picture.line(x, top, x, bottom, "grid")
            picture.text(x, bottom + 17.0, tick_text(value, self.x.log), "mid")
        for value in self.y.ticks() if rows else ():
            y = float(self.y(value))
            picture.line(left, y, right, y, "grid")
            if y_words:
                picture.text(left - 7.0, y + 4.5, tick_text(value, self.y.log), "end")
        picture.parts.append(f'<path d="M{left:.1f} {top:.1f}H{right:.1f}V{bottom:.1f}H{left:.1f}z" class="axis"/>')
        picture.text(0.5 * (left + right), bottom + 36.0, x_label, "mid")
        if y_label:
            picture.text(14.0, 0.5 * (top + bottom), y_label, "mid", turned=True)
        self._clip = picture.clip(self.box)
        return self

    def curve(self, x: Any, y: Any, look: int) -> None:
        """A curve, with gaps where a value has no place."""
        path = _path(self.x(x), self.y(y))
        if path:
            self._add(f'<path d="{path}" class="curve" style="{curve_style(look)}"/>')

    def band(self, x: Any, low: Any, high: Any, look: int) -> None:
        """The area between two curves, lightly shaded."""
        xs, lows, highs = self.x(x), self.y(low), self.y(high)
        there = np.isfinite(xs) & np.isfinite(lows) & np.isfinite(highs)
        ends = np.flatnonzero(np.diff(np.concatenate([[0], there.astype(int), [0]])))
        for start, stop in zip(ends[::2], ends[1::2], strict=True):
            way = np.concatenate([xs[start:stop], xs[start:stop][::-1]])
            edge = np.concatenate([highs[start:stop], lows[start:stop][::-1]])
            style = f"fill:var(--look{look % len(COLOURS)});fill-opacity:.2"
            self._add(f'<path d="{_path(way, edge)}z" style="{style}"/>')

    def _add(self, element: str) -> None:
        self.picture.parts.append(f'<g clip-path="url(#{self._clip})">{element}</g>')


def _path(x: FloatArray, y: FloatArray) -> str:
    """Straight lines through places; a new start after each that is not there."""
    there = np.isfinite(x) & np.isfinite(y)
    words, pen = [], "M"
    for a, b, known in zip(x.tolist(), y.tolist(), there.tolist(), strict=True):
        if known:
            words.append(f"{pen}{a:.1f} {b:.1f}")
        pen = "L" if known else "M"
    return "".join(words)


def widened(low: float, high: float, share: float = 0.05) -> tuple[float, float]:
    """Ends of an even scale with room at both; of one value, some room about it."""
    room = share * (high - low) or 0.1 * abs(high) or 1.0
    return low - room, high + room


def decades(values: Sequence[FloatArray], most: float = 14.0) -> tuple[float, float]:
    """Ends of a logarithmic scale that holds all values above 0, or the uppermost decades of them."""
    positive = np.concatenate([one[np.isfinite(one) & (one > 0.0)] for one in values]) if len(values) else np.zeros(0)
    if positive.size == 0:
        return 1e-30, 1e-16
    high = float(positive.max()) * 2.0
    return max(float(positive.min()) / 2.0, high * 10.0**-most), high
