"""Which pictures a report shows of a table, made of what is known of it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from opacity.check.closure import JUDGED_BELOW
from opacity.check.list_uncertainty import ListUncertainty
from opacity.check.losses import Loss
from opacity.check.other_bands import BandDifference
from opacity.check.partition_values import PartitionValues
from opacity.check.table_report import NodeDifferences
from opacity.grids import FloatArray
from opacity.tables.picture_checks import Cells, Line, Mark, Row, error_map, line_picture, mark_rows
from opacity.tables.svg import Picture, number


def closure_picture(name: str, found: NodeDifferences, profile: bool) -> Picture | None:
    """Differences of closure over temperature and pressure, or along a profile; None where no node is judged."""
    title = "Closure at every node"
    words = "Relative difference of each spectrum's integral from the sum over its lines (blank: not judged)."
    size = np.abs(found.difference)
    if not np.any(np.isfinite(size)):
        return None
    if profile:
        return _along(name, title, words, found, size)
    return error_map(name, title, _cells(found.temperature, found.pressure, found.difference, found.limit), words)


def resolution_picture(name: str, found: NodeDifferences, profile: bool) -> Picture | None:
    """Shares of the strength that the step does not resolve; None where no node loses sight of one in a hundred."""
    if not np.any(found.unresolved > JUDGED_BELOW):
        return None
    title = "Lines narrower than the step resolves"
    words = f"Share of a node's strength in lines that the step does not resolve; the limit is {JUDGED_BELOW:g}."
    if profile:
        return _along(name, title, words, found, found.unresolved)
    limits = np.full(found.unresolved.size, JUDGED_BELOW)
    return error_map(name, title, _cells(found.temperature, found.pressure, found.unresolved, limits), words)


def _along(name: str, title: str, words: str, found: NodeDifferences, size: FloatArray) -> Picture:
    """Sizes of the nodes of a profile, one after the other."""
    worst = int(np.nanargmax(size))
    place = f"{found.temperature[worst]:g} K, {number(float(found.pressure[worst]))} bar"
    said = f"{words} {size.size} nodes along the profile, largest {number(float(size[worst]), 2)} at {place}."
    line = Line("size at each node", np.arange(1.0, size.size + 1.0), size)
    return line_picture(name, title, said, [line], ("node of the profile", "relative"), log=True)


def _cells(temperature: FloatArray, pressure: FloatArray, values: FloatArray, limits: FloatArray) -> Cells:
    """Values node by node put on a grid of the temperatures and pressures that occur."""
    rows, columns = np.unique(temperature), np.unique(pressure)
    place = np.searchsorted(rows, temperature), np.searchsorted(columns, pressure)
    placed, limit = np.full((2, rows.size, columns.size), np.nan)
    placed[place], limit[place] = values, limits
    return Cells(rows, columns, placed, limit)


def middles_picture(name: str, middles: Sequence[tuple[float, float, float]]) -> Picture:
    """Errors of interpolating at the middles of cells."""
    temperature, pressure, error = (np.array(column) for column in zip(*middles, strict=True))
    cells = _cells(temperature, pressure, error, np.full(error.size, np.inf))
    words = "Relative error of interpolating between nodes, at middles of cells of the grid: 99 % of the points of each"
    return error_map(name, "Interpolation at cell middles", cells, f"{words} are within (blank: not looked at).")


def band_pictures(name: str, bands: Sequence[BandDifference]) -> list[Picture]:
    """Band strengths against published values: those with an uncertainty, and those that find factors only."""
    found = []
    for exact, suffix, title in (
        (True, "exact", "Band strengths against published values"),
        (False, "rough", "Band strengths against values that find factors only"),
    ):
        known = [one for one in bands if one.difference is not None and math.isfinite(one.difference)]
        chosen = [one for one in known if (one.deviation is not None) is exact]
        if chosen:
            found.append(_bands(f"{name}-{suffix}", title, chosen, exact))
    return found


def _bands(name: str, title: str, bands: Sequence[BandDifference], exact: bool) -> Picture:
    rows, said = [], []
    for one in bands:
        percent = 100.0 * (one.difference or 0.0)
        low, high = (100.0 * end for end in one.accepted)
        narrow = None if one.deviation is None else (-100.0 * one.deviation, 100.0 * one.deviation)
        rows.append(
            Row(one.name, (Mark(percent, 0 if one.in_recipe else 1),), f"{percent:+.2f} %", narrow, (low, high))
        )
        said.append(f"{one.name}: {percent:+.2f} %, accepted {low:+.3g} to {high:+.3g} %.")
    bars = (
        "thick bars are one published standard deviation, thin ones two, within which a band agrees"
        if exact
        else "no uncertainty is published, or the value is from memory: bars are a factor of 1.5"
    )
    words = f"Table over published strength, less 1, in per cent; {bars}."
    text = f"{words} {' '.join(said)}"
    legend = ["named by the recipe", "other published bands in the range"]
    shown = legend if any(not one.in_recipe for one in bands) else legend[:1]
    return replace(mark_rows(name, title, text, rows, "difference (%)", shown), caption=words)


def partition_pictures(name: str, found: Sequence[PartitionValues]) -> list[Picture]:
    """Partition functions against the one that the table uses, a picture for each isotopologue."""
    pictures = []
    for place, isotopologue in enumerate(dict.fromkeys(one.isotopologue for one in found)):
        here = [one for one in found if one.isotopologue == isotopologue]
        small = all(abs(one.largest[0]) < 1e-4 for one in here)
        factor, unit = (1e6, "parts in a million") if small else (100.0, "%")
        lines = [Line(one.source, one.temperature, factor * one.difference) for one in here]
        said = []
        for one in here:
            largest, where = one.largest
            said.append(f"{one.source}: largest difference {factor * largest:+.3g} {unit} at {where:.4g} K.")
        words = f"Q(T)/Q(296 K) of {isotopologue}, relative to {here[0].used}. {' '.join(said)}"
        title = f"Partition function of {isotopologue} against independent values"
        labels = ("temperature (K)", f"difference ({unit})")
        pictures.append(line_picture(f"{name}-{place}", title, words, lines, labels))
    return pictures


def loss_picture(name: str, found: Sequence[Loss]) -> Picture | None:
    """Shares of the strength that nodes lack; None where none lacks any."""
    rows, said = [], []
    parted = all(one.cutoff is not None for one in found)
    for one in found:
        values = [one.cutoff, one.ends] if parted else [one.whole]
        marks = tuple(Mark(v if v is not None and v > 0.0 else None, look, look > 0) for look, v in enumerate(values))
        label = f"{one.temperature:.4g} K, {number(one.pressure)} bar"
        rows.append(Row(label, marks, f"{max(one.whole, 0.0):.2e} in all"))
        parts = f" (cut-off {one.cutoff:.1e}, ends {one.ends:.1e})" if parted else ""
        said.append(f"{label}: {one.whole:.2e}{parts}.")
    if not any(mark.value is not None for row in rows for mark in row.marks):
        return None
    legend = ["beyond the cut-off", "beyond the grid's ends"] if parted else ["beyond cut-off and grid's ends together"]
    most = max(found, key=lambda one: one.whole)
    words = (
        "Share of the strength of all lines in reach that a node does not hold; the largest is"
        f" {most.whole:.2e}, at {most.temperature:.4g} K, {number(most.pressure)} bar."
    )
    title = "Strength lost beyond cut-off and grid"
    aside = "What plinth removal or chi factors take off counts as beyond the cut-off."
    text = f"{words} {aside} {' '.join(said)}"
    return replace(mark_rows(name, title, text, rows, "share of the strength", legend, log=True), caption=words)


def uncertainty_picture(name: str, found: ListUncertainty) -> Picture | None:
    """What the list's own uncertainty makes of the bands' strengths, at the coldest and the hottest node."""
    cold, hot = int(np.argmin(found.nodes[:, 0])), int(np.argmax(found.nodes[:, 0]))
    middles, lines, said = found.bands.mean(axis=1), [], []
    for kind, values in (("lines off together", found.correlated), ("each by itself", found.uncorrelated)):
        for node in dict.fromkeys((cold, hot)):
            label = f"{kind}, {found.nodes[node, 0]:.4g} K"
            if np.any(values[node] > 0.0):
                lines.append(Line(label, middles, 100.0 * values[node]))
                worst = int(np.nanargmax(values[node]))
                said.append(f"{label}: at most {100.0 * values[node, worst]:.3g} % at {middles[worst]:.6g} cm⁻¹.")
    if not lines:
        return None
    words = f"Relative uncertainty of the strength of each band that follows from the list. {' '.join(said)}"
    labels = ("wavenumber (cm⁻¹)", "uncertainty (%)")
    return line_picture(name, "The list's own uncertainty by band", words, lines, labels, log=True)
