"""How uncertain a table is by what its line lists say of themselves: by band and node, weighted with line strengths.

This is no check of the numbers: it says how good the list is where the table is the list's very sum.  With S(T) of the
table's abundances, u the stated relative uncertainty of a line's intensity, in each band

- `strength_correlated` is sum S u / sum S, as if all errors went the same way,
- `strength_uncorrelated` is sqrt(sum (S u)^2) / sum S, as if none had to do with another,
- `width` is sum S u_w w / sum S, u_w the relative uncertainty of Lorentz's half-width in the mixture and w its share of
  the Voigt half-width at the node (Olivero & Longbothum 1977),
- `position` is sum S v / h / sum S, v the uncertainty of the position and h the Voigt half-width (HWHM) at the node.

Each sum is of the lines of which the list states that uncertainty; `not_stated`, `width_not_stated` and
`position_not_stated` are the shares of the band's strength of the others.  Of a mixture of gases a width is stated
where it is for every gas that widens the line.  A band has the lines whose unshifted wavenumber lies in it, ends
included.  Uncertainties of temperature exponents, pressure shifts and partition functions are not in it.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor
from itertools import pairwise
from typing import Any

import numpy as np

from opacity.constants import REFERENCE_TEMPERATURE
from opacity.cross_sections.prepare import PreparedLines
from opacity.grids import FloatArray
from opacity.kernels.uncertainty import add_profiles, add_strengths
from opacity.line_list.uncertainty import StatedUncertainty
from opacity.recipe.model import Recipe

PARTS = 10
"""Bands of a recipe that names none: equal parts of its grid."""
DIGITS = 3
ROUNDING = 1e-12
OF = "the line list's own statements, not the table's numbers"

Band = tuple[float, float]


def bands_of(recipe: Recipe) -> list[Band]:
    """Ends (cm-1) of the bands: those whose strengths the recipe gives, else ten equal parts of its grid."""
    named = list(dict.fromkeys(band.range for band in recipe.band_strengths))
    if named:
        return named
    edges = np.linspace(recipe.grid.wavenumber[0], recipe.grid.wavenumber[-1], PARTS + 1)
    return list(dict.fromkeys((float(low), float(high)) for low, high in pairwise(edges)))


class UncertaintySums:
    """Sums over the lines of each band (ends in cm-1, both included) for each node (K, bar)."""

    def __init__(self, bands: Sequence[Band], nodes: Sequence[tuple[float, float]]) -> None:
        self.bands, self.nodes = list(bands), list(nodes)
        self._strengths = {t: np.zeros((len(bands), 4)) for t, _ in nodes}
        self._profiles = [np.zeros((len(bands), 4)) for _ in nodes]

    def add(self, lines: PreparedLines, stated: StatedUncertainty, executor: Executor | None = None) -> None:
        """Add lines, sorted by wavenumber, and what is stated of them; temperatures side by side in threads."""
        nu = lines.wavenumber
        ends = np.array(
            [[np.searchsorted(nu, low, "left"), np.searchsorted(nu, high, "right")] for low, high in self.bands],
            dtype=np.int64,
        ).reshape(-1, 2)
        rows: dict[float, list[int]] = {}
        for row, (temperature, _) in enumerate(self.nodes):
            rows.setdefault(temperature, []).append(row)

        def at_temperature(temperature: float) -> None:
            columns = lines.at_temperature(temperature)
            add_strengths(ends, columns.strength, stated.strength, self._strengths[temperature])
            relative = relative_width(lines, stated, temperature)
            if np.all(np.isnan(relative)) and np.all(np.isnan(stated.position)):
                return
            widths, said = (columns.shift, columns.doppler, columns.lorentz), (relative, stated.position)
            for row in rows[temperature]:
                pressure = self.nodes[row][1]
                add_profiles(ends, columns.strength, nu, widths, said, pressure, self._profiles[row])

        list((map if executor is None else executor.map)(at_temperature, rows))

    def figures(self) -> dict[str, Any]:
        """Bands, nodes and, by band and node, each figure to three digits; None where nothing is known."""
        strengths = np.array([self._strengths[t] for t, _ in self.nodes]).transpose(1, 0, 2)
        profiles = np.array(self._profiles).transpose(1, 0, 2)
        total, stated, linear, squares = np.moveaxis(strengths, -1, 0)
        with_width, width, with_position, position = np.moveaxis(profiles, -1, 0)
        return {
            "of": OF,
            "bands": [list(band) for band in self.bands],
            "nodes": [list(node) for node in self.nodes],
            "strength_correlated": _ratio(linear, stated),
            "strength_uncorrelated": _ratio(np.sqrt(squares), stated),
            "width": _ratio(width, with_width),
            "position": _ratio(position, with_position),
            "not_stated": _rest(stated, total),
            "width_not_stated": _rest(with_width, total),
            "position_not_stated": _rest(with_position, total),
        }

    def nothing(self) -> dict[str, Any]:
        """The figures of lists that state nothing of any line, whether a band has lines or not."""
        shape = len(self.bands), len(self.nodes)
        found = self.figures()
        whole = {name: np.ones(shape).tolist() for name in found if name.endswith("not_stated")}
        return {**found, **whole}


def relative_width(lines: PreparedLines, stated: StatedUncertainty, temperature: float) -> FloatArray:
    """Relative uncertainty of each line's half-width in its mixture at a temperature (K), (n_lines,), NaN where one
    of the gases that widen it states none; those of the gases are taken to go the same way.
    """
    widening = lines.broadening
    unknown = np.full(len(lines), np.nan)
    if all(np.all(np.isnan(stated.width.get(name.lower(), unknown))) for name in widening.broadeners):
        return unknown
    parts = widening.gamma * (REFERENCE_TEMPERATURE / temperature) ** widening.exponent
    found = np.zeros(len(lines))
    for name, part in zip(widening.broadeners, parts, strict=True):
        found += np.where(part > 0.0, part * stated.width.get(name.lower(), unknown), 0.0)
    whole = np.sum(parts, axis=0)
    return np.asarray(np.divide(found, whole, out=unknown, where=whole > 0.0))


def _ratio(part: FloatArray, whole: FloatArray) -> list[list[float | None]]:
    found = np.divide(part, whole, out=np.full(part.shape, np.nan), where=whole > 0.0)
    return [[None if np.isnan(x) else float(f"{x:.{DIGITS}g}") for x in row] for row in found]


def _rest(part: FloatArray, whole: FloatArray) -> list[list[float | None]]:
    # Sums of the same terms in another order differ in their last bits.
    return _ratio(np.where(whole - part > ROUNDING * whole, whole - part, 0.0), whole)
