"""Pictures for a page of what a table holds: spectra, k-distributions, and the certificate by band."""

from __future__ import annotations

import numpy as np

from opacity.grids import FloatArray
from opacity.tables import curves
from opacity.tables.k_draw import band_errors, some_nodes
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.read import Table
from opacity.tables.svg import LEFT, RIGHT, WIDTH, Axes, Picture, Scale, decades, number

X_LABEL = "wavenumber (cm⁻¹)"
_GAP = 24.0


def spectra(table: Table, name: str) -> list[Picture]:
    """A picture for each group of spectra (by temperature, by pressure; a profile's nodes), and a strong line enlarged.

    `name` starts the ids.  TableError for damage.
    """
    found = []
    groups = curves.groups_of(table, number)
    at = "at " if table.profile else ""
    everything = slice(0, table.wavenumber.size)
    for place, group in enumerate(groups):
        found.append(_spectra(table, group, everything, f"{name}-{place}", f"Cross-section {at}{group.heading}"))
    part = curves.strong_stretch(table, groups[-1])
    if 1 < part.stop - part.start < table.wavenumber.size:
        title = f"Its strongest line enlarged, {at}{groups[-1].heading}"
        found.append(_spectra(table, groups[-1], part, f"{name}-line", title))
    return found


def _spectra(table: Table, group: curves.Group, part: slice, name: str, title: str) -> Picture:
    nu = table.wavenumber[part]
    values = [curve.values[part] for curve in group.curves]
    first, last = float(nu[0]), float(nu[-1])
    said = [_peak(curve.label, nu, one) for curve, one in zip(group.curves, values, strict=True)]
    description = f"Cross-section in cm² per molecule from {first:.8g} to {last:.8g} cm⁻¹. {' '.join(said)}"
    if nu.size > curves.MOST_POINTS:
        description += " Each curve is the largest value of a bin; the shading reaches down to the smallest."
    picture = Picture(name, title, description)
    top = picture.legend([(curve.label, curve.look) for curve in group.curves], 4.0) + 10.0
    picture.height = top + 290.0
    ends = (first, last) if last > first else (first - 1.0, last + 1.0)
    scales = Scale(*ends, LEFT, WIDTH - RIGHT), Scale(*decades(values), picture.height - 44.0, top, True)
    axes = Axes(picture, *scales).frame(X_LABEL, "cross-section (cm² molecule⁻¹)")
    for curve, one in zip(group.curves, values, strict=True):
        if nu.size <= curves.MOST_POINTS:
            axes.curve(nu, one, curve.look)
            continue
        band = curves.envelope(nu, one)
        axes.band(band.wavenumber, np.maximum(band.lowest, scales[1].low), band.highest, curve.look)
        axes.curve(band.wavenumber, band.highest, curve.look)
    return picture


def _peak(label: str, nu: FloatArray, values: FloatArray) -> str:
    highest = int(np.argmax(values))
    if not values[highest] > 0.0:
        return f"{label}: zero everywhere."
    zeros = int(np.sum(values == 0.0))
    gaps = f", zero at {zeros} points" if zeros else ""
    return f"{label}: largest {number(float(values[highest]))} at {nu[highest]:.8g} cm⁻¹{gaps}."


def k_distributions(table: KCoefficientTable, name: str) -> Picture:
    """k against g of up to three bands side by side, each at up to five nodes.  TableError for damage."""
    bands, nodes = curves.spread(table.band.size, 3), some_nodes(table)
    values = [table.k(*node) for node in nodes]
    labels = [f"{table.temperature[node[0]]:.4g} K, {number(table.pressure[node[-1]])} bar" for node in nodes]
    low, high = decades([k[band] for k in values for band in bands])
    said = []
    for band in bands:
        lower, upper = table.band_bounds[band]
        spans = [f"{label}: {_span(k[band])}" for label, k in zip(labels, values, strict=True)]
        said.append(f"Band {lower:.7g} to {upper:.7g} cm⁻¹: {'; '.join(spans)}.")
    words = f"{len(bands)} of {table.band.size} bands at {len(nodes)} nodes; each step is as wide as its weight in g."
    picture = Picture(name, f"k against g, {table.g.size} points", f"k in cm² per molecule, {words} {' '.join(said)}")
    picture.caption = words
    top = picture.legend([(label, look) for look, label in enumerate(labels)], 4.0) + 32.0
    picture.height = top + 300.0
    width = (WIDTH - LEFT - RIGHT - _GAP * (len(bands) - 1)) / len(bands)
    for column, band in enumerate(bands):
        left = LEFT + column * (width + _GAP)
        scales = Scale(0.0, 1.0, left, left + width), Scale(low, high, picture.height - 44.0, top, True)
        first = column == 0
        axes = Axes(picture, *scales).frame("g", "k (cm² molecule⁻¹)" if first else "", first, most=4)
        lower, upper = table.band_bounds[band]
        picture.text(left + 0.5 * width, top - 9.0, f"{lower:.7g} to {upper:.7g} cm⁻¹", "mid")
        bounds = table.g_bounds[band] if table.g_bounds.ndim == 3 else table.g_bounds
        for look, k in enumerate(values):
            axes.curve(bounds.ravel(), np.repeat(k[band], 2), look)
    return picture


def _span(k: FloatArray) -> str:
    positive = k[k > 0.0]
    if not positive.size:
        return "zero"
    return f"{number(float(positive.min()))} to {number(float(positive.max()))}"


def certificate(table: KCoefficientTable, name: str) -> Picture | None:
    """What the certificate says of every band; None where the table has none."""
    errors = band_errors(table)
    if not errors:
        return None
    bounds = table.band_bounds
    said = []
    for label, values in errors.items():
        if np.any(np.isfinite(values)):
            worst = int(np.nanargmax(values))
            where = f"{bounds[worst, 0]:.7g} to {bounds[worst, 1]:.7g} cm⁻¹"
            said.append(f"{label}: at most {number(float(values[worst]))}, in the band {where}.")
    description = f"Absolute error of a band's mean transmission, {table.band.size} bands. {' '.join(said)}"
    picture = Picture(name, "Certificate: error of transmission by band", description)
    top = picture.legend([(label, look) for look, label in enumerate(errors)], 4.0) + 10.0
    picture.height = top + 240.0
    low, high = decades(list(errors.values()))
    scales = (
        Scale(float(bounds[0, 0]), float(bounds[-1, 1]), LEFT, WIDTH - RIGHT),
        Scale(low, high, picture.height - 44.0, top, True),
    )
    axes = Axes(picture, *scales).frame(X_LABEL, "error of transmission")
    for look, values in enumerate(errors.values()):
        axes.curve(bounds.ravel(), np.repeat(values, 2), look)
    return picture
