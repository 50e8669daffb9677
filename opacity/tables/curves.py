"""What of a table is drawn: which nodes, which stretch around a strong line, how many points."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from opacity.grids import FloatArray
from opacity.tables.read import Table

MOST_POINTS = 4000
"""Above this number of points a curve is drawn as the envelope of its bins, so that no line is lost."""

_BINS = 1000


@dataclass(frozen=True)
class Curve:
    """One spectrum: its label, its cross-section (cm2/molecule), (n_nu,), and the number of its look."""

    label: str
    values: FloatArray
    look: int


@dataclass(frozen=True)
class Group:
    """Curves that share a panel, with what they have in common."""

    heading: str
    curves: tuple[Curve, ...]


@dataclass(frozen=True)
class Envelope:
    """Smallest and largest value above 0 of each bin of wavenumbers (cm-1), (n_bin,); NaN where all are 0."""

    wavenumber: FloatArray
    lowest: FloatArray
    highest: FloatArray


def spread(count: int, most: int) -> list[int]:
    """Up to `most` indices from 0 to `count` - 1, both ends included, as even as can be."""
    return sorted({round(x) for x in np.linspace(0, count - 1, min(count, most))})


def groups_of(table: Table, words: Callable[[float], str] | None = None) -> list[Group]:
    """Temperatures at a middle pressure and pressures at a middle temperature, or the nodes of a profile.

    `words` makes a pressure's words; by default they are mathematical text (`quantity`).
    """
    said = quantity if words is None else words
    if table.profile:
        picked = spread(table.temperature.size, 5)
        return [_group("nodes of the profile", [(_node_label(table, i, said), table.spectrum(i)) for i in picked])]
    middle_t, middle_p = table.temperature.size // 2, table.pressure.size // 2
    warm = spread(table.temperature.size, 3)
    at_pressure = _group(
        f"at {said(float(table.pressure[middle_p]))} bar",
        [(f"{table.temperature[i]:.4g} K", table.spectrum(i, middle_p)) for i in warm],
    )
    dense = spread(table.pressure.size, 4)
    at_temperature = _group(
        f"at {table.temperature[middle_t]:.4g} K",
        [(f"{said(float(table.pressure[j]))} bar", table.spectrum(middle_t, j)) for j in dense],
    )
    if len(dense) == 1:
        return [at_pressure]
    # The hottest spectrum reaches furthest, so it is drawn first, behind the others.
    hot_first = Group(at_pressure.heading, at_pressure.curves[::-1])
    return [at_temperature] if len(warm) == 1 else [hot_first, at_temperature]


def _group(heading: str, spectra: list[tuple[str, FloatArray]]) -> Group:
    return Group(heading, tuple(Curve(label, values, look) for look, (label, values) in enumerate(spectra)))


def _node_label(table: Table, node: int, said: Callable[[float], str]) -> str:
    return f"{table.temperature[node]:.4g} K, {said(float(table.pressure[node]))} bar"


def quantity(value: float) -> str:
    """A number in three figures, as mathematical text where it needs a power of ten."""
    if 1e-2 <= value < 1e4:
        return f"{value:.3g}"
    mantissa, exponent = f"{value:.2e}".split("e")
    mantissa = mantissa.rstrip("0").rstrip(".")
    factor = "" if mantissa == "1" else rf"{mantissa} \times "
    return rf"${factor}10^{{{int(exponent)}}}$"


def envelope(wavenumber: FloatArray, values: FloatArray) -> Envelope:
    """The envelope of a spectrum (n_nu,) in up to 1000 bins of equal width."""
    span = wavenumber[-1] - wavenumber[0]
    column = np.minimum((wavenumber - wavenumber[0]) / span * _BINS, _BINS - 1).astype(np.int64)
    starts = np.flatnonzero(np.diff(column, prepend=-1))
    positive = values > 0.0
    lowest = np.minimum.reduceat(np.where(positive, values, np.inf), starts)
    highest = np.maximum.reduceat(values, starts)
    empty = highest <= 0.0
    ends = np.append(starts[1:], wavenumber.size) - 1
    centres = 0.5 * (wavenumber[starts] + wavenumber[ends])
    return Envelope(centres, np.where(empty, np.nan, lowest), np.where(empty, np.nan, highest))


def strong_stretch(table: Table, group: Group) -> slice:
    """Indices of a few cm-1 around the strongest point of the middle curve of `group`."""
    wavenumber = table.wavenumber
    peak = int(np.argmax(group.curves[len(group.curves) // 2].values))
    step = np.diff(wavenumber[max(peak - 1, 0) : peak + 2]).max(initial=0.0)
    return within(wavenumber, wavenumber[peak], max(1.5, 40.0 * step))


def within(wavenumber: FloatArray, centre: float, half_width: float) -> slice:
    """Indices of the points no further than `half_width` from `centre` (cm-1)."""
    first, last = np.searchsorted(wavenumber, [centre - half_width, centre + half_width])
    return slice(int(first), max(int(last), int(first) + 1))


def value_range(groups: list[Group], part: slice, decades: float = 14.0, above: float = 0.13) -> tuple[float, float]:
    """Limits of an axis that holds all values above 0, or the uppermost `decades` of them, and a legend above.

    The share `above` of the axis, or a little more, lies above all values.
    """
    lowest, highest = math.inf, 0.0
    for curve in (curve for group in groups for curve in group.curves):
        positive = curve.values[part][curve.values[part] > 0.0]
        if positive.size:
            lowest, highest = min(lowest, float(positive.min())), max(highest, float(positive.max()))
    if highest == 0.0:
        return 1e-30, 1e-16
    bottom = max(lowest / 2.0, highest * 10.0**-decades)
    return bottom, 2.0 * highest * (highest / bottom) ** (above / (1.0 - above))


def wavelength_ticks(first: float, last: float) -> FloatArray:
    """Round wavelengths (um) for an axis from `first` to `last` (cm-1), none closer than a twelfth of it."""
    shortest, longest = 1e4 / last, 1e4 / max(first, last * 1e-3)
    rough = (longest - shortest) / 10.0 if longest < 2.0 * shortest else 0.0
    if rough > 0.0:
        unit = 10.0 ** math.floor(math.log10(rough))
        step = unit * next(factor for factor in (1, 2, 5, 10) if factor * unit >= rough)
        ticks = step * np.arange(math.ceil(shortest / step), math.floor(longest / step) + 1)
    else:
        decades = np.array([10.0**power for power in range(-2, 8)])
        ticks = np.outer(decades, (1.0, 1.2, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0)).ravel()
        ticks = ticks[(ticks >= shortest) & (ticks <= longest)]
    return _well_apart(np.asarray(ticks, dtype=np.float64), (last - first) / 12.0)


def _well_apart(ticks: FloatArray, distance: float) -> FloatArray:
    kept: list[float] = []
    for tick in ticks:
        if not kept or abs(1e4 / tick - 1e4 / kept[-1]) >= distance:
            kept.append(float(tick))
    return np.array(kept)


def caption(table: Table) -> str:
    """One line on how good the table is, from what its checks hold, and on how it is drawn; may be empty."""
    audit = table.checks.get("audit")
    found = audit if isinstance(audit, dict) else {}
    numbers = [
        ("tolerance", table.checks.get("tolerance")),
        ("largest error found by the audit", found.get("largest_error")),
        ("99th percentile", found.get("p99_error")),
    ]
    said = ", ".join(f"{name} {quantity(value)}" for name, value in numbers if isinstance(value, float) and value > 0.0)
    if table.wavenumber.size <= MOST_POINTS:
        return said
    width = (table.wavenumber[-1] - table.wavenumber[0]) / _BINS
    bands = f"lines: largest value, shading: down to the smallest, in bins of {width:.2g} cm$^{{-1}}$"
    return f"{said}; {bands}" if said else bands
