"""The audit: a table's values at points drawn from a seed, against the exact sum.

The seed is made of the table's inputs, so that the audit stored with a table can be repeated to the last digit,
and repeated with another seed.  Points are drawn where errors would show: over the whole range of values, at
line centres, on both sides of cut-off edges, at the grid's ends.  They are a sample and no guarantee.
"""

from __future__ import annotations

import math
from concurrent.futures import Executor
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.check.result import CheckResult, judge
from opacity.check.spectra import Node, Spectra, interpolated, nodes_of
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LineSource, Request, as_source, exact_points
from opacity.grids import FloatArray
from opacity.recipe.model import Profile

MOST_NODES = 16
MOST_CELLS = 8
STORAGE_ROUNDING = 1.2e-7
"""Twice the rounding of f4, in which most tables are stored."""
PLINTH_ROUNDING = 1e-13
"""With plinth removal the truth itself is only as good as this, relative to the sum before subtraction."""
NEGLIGIBLE = 1e-300
"""Values below this (cm2/molecule) lose digits in f8 itself and are held only to be as small."""

Index = NDArray[np.intp]


@dataclass(frozen=True)
class Audit:
    """What an audit found.  Errors are relative to the exact sum; `worst` is where the largest was met."""

    seed: int
    nodes: int
    points: int
    zeros: int
    largest_error: float
    p99_error: float
    worst: dict[str, float]

    def as_dict(self) -> dict[str, Any]:
        """The audit as plain values for JSON."""
        return asdict(self)


def choose_points(
    rng: np.random.Generator, sigma: FloatArray, wavenumber: FloatArray, lines: FloatArray, cutoff: float
) -> Index:
    """Indices of about 200 points of a spectrum to audit, rising, without repeats."""
    size = wavenumber.size
    chosen = [np.array([0, size - 1]), rng.integers(0, size, 20)]
    # Sorting is quicker than the hashes by which numpy's unique goes.
    sample = np.sort(rng.integers(0, size, min(size, 50_000)))
    sample = sample[np.append(True, sample[1:] > sample[:-1])]
    by_value = sample[np.argsort(sigma[sample], kind="stable")]
    chosen.append(by_value[np.linspace(0, by_value.size - 1, 80).astype(np.intp)])
    if lines.size:
        at_centre = lines[rng.integers(0, lines.size, 30)]
        edges = lines[rng.integers(0, lines.size, 20)] + rng.choice([-1.0, 1.0], 20) * cutoff
        for place in (at_centre, edges):
            index = np.searchsorted(wavenumber, place)
            chosen += [index, index - 1]
    merged = np.concatenate(chosen)
    return np.unique(np.clip(merged, 0, size - 1)).astype(np.intp)


def relative_errors(values: FloatArray, truth: FloatArray, rounding: FloatArray | float = 0.0) -> FloatArray:
    """|value - truth| / truth, (n,); where truth is 0 the error is 0 for 0 and infinite for all above `NEGLIGIBLE`.

    `rounding`, (n,) or a number, is what the truth itself may be off by; NaN is infinitely off.
    """
    errors = np.maximum(np.abs(values - truth) - rounding, 0.0)
    errors = np.where(np.isnan(errors), np.inf, errors)
    values = np.where(np.abs(values) <= rounding, 0.0, values)
    safe = np.where(truth > 0.0, truth, 1.0)
    errors = np.where(truth > 0.0, errors / safe, np.where(values == 0.0, 0.0, np.inf))
    negligible = (truth < NEGLIGIBLE) & (values < 2.0 * NEGLIGIBLE) & (values >= 0.0)
    return np.where(negligible, 0.0, errors)


def audit(
    spectra: Spectra,
    lines: LineSource | PreparedLines,
    profile: Profile,
    seed: int,
    executor: Executor | None = None,
) -> Audit:
    """Recompute points of up to 16 nodes exactly; with all corners of the grid among them."""
    source = as_source(lines)
    rng = np.random.default_rng(seed)
    nodes = nodes_of(spectra)
    if len(nodes) > MOST_NODES:
        columns = 1 if spectra.profile else spectra.pressure.size
        corners = {0, columns - 1, len(nodes) - columns, len(nodes) - 1}
        others = [i for i in range(len(nodes)) if i not in corners]
        picked = rng.choice(others, MOST_NODES - len(corners), replace=False).tolist()
        nodes = [nodes[i] for i in sorted([*corners, *picked])]
    requests, values = _draw(rng, spectra, source, profile, nodes)
    truths = exact_points(source, requests, profile.cutoff.at, profile.plinth, profile.chi_table, executor)
    roundings: list[FloatArray | float] = [0.0] * len(requests)
    if profile.plinth:
        # What rounding leaves of a difference of two nearly equal values.
        whole = exact_points(source, requests, profile.cutoff.at, False, profile.chi_table, executor)
        roundings = [PLINTH_ROUNDING * one for one in whole]
    all_errors, worst = [], {"error": -1.0}
    for request, found, truth, rounding in zip(requests, values, truths, roundings, strict=True):
        errors = relative_errors(found, truth, rounding)
        all_errors.append(errors)
        top = int(np.argmax(errors))
        if errors[top] > worst["error"]:
            worst = {
                "error": float(errors[top]),
                "wavenumber": float(request[2][top]),
                "temperature": request[0],
                "pressure": request[1],
                "value": float(found[top]),
                "exact": float(truth[top]),
            }
    errors = np.concatenate(all_errors)
    return Audit(
        seed=seed,
        nodes=len(nodes),
        points=errors.size,
        zeros=sum(int(np.count_nonzero(truth == 0.0)) for truth in truths),
        largest_error=float(errors.max()),
        p99_error=float(np.percentile(errors, 99.0)) if np.all(np.isfinite(errors)) else math.inf,
        worst=worst,
    )


def _draw(
    rng: np.random.Generator, spectra: Spectra, source: LineSource, profile: Profile, nodes: list[Node]
) -> tuple[list[Request], list[FloatArray]]:
    """Points to audit at each node, and the table's values there."""
    requests, values = [], []
    places = source.sample()
    for index, temperature, pressure in nodes:
        sigma = spectra.spectrum(*index)
        points = choose_points(rng, sigma, spectra.wavenumber, places, profile.cutoff.at(pressure))
        requests.append((temperature, pressure, spectra.wavenumber[points]))
        values.append(sigma[points])
    return requests, values


def judge_audit(found: Audit, tolerance: float) -> CheckResult:
    """The audit's row: the largest error against the tolerance and the rounding of the storage."""
    worst = found.worst
    detail = (
        f"{found.points} points of {found.nodes} nodes; 99 % within {found.p99_error:.1e}; worst at"
        f" {worst['wavenumber']:.6g} cm-1, {worst['temperature']:g} K, {worst['pressure']:.3g} bar"
    )
    return judge("audit against the exact sum", found.largest_error, tolerance + STORAGE_ROUNDING, detail)


def interpolation_errors(
    spectra: Spectra,
    lines: LineSource | PreparedLines,
    profile: Profile,
    seed: int,
    executor: Executor | None = None,
) -> dict[str, Any] | None:
    """Relative error of interpolating at the middle (in ln T and ln P) of up to 8 cells; None without cells.

    This measures the grid's spacing, not the table's values: it is reported and not judged.
    """
    axes = [
        np.sqrt(axis[1:] * axis[:-1]) if axis.size > 1 else axis for axis in (spectra.temperature, spectra.pressure)
    ]
    if spectra.profile or spectra.temperature.size * spectra.pressure.size < 2:
        return None
    rng = np.random.default_rng(seed + 1)
    cells = [(float(t), float(p)) for t in axes[0] for p in axes[1]]
    picked = rng.choice(len(cells), min(MOST_CELLS, len(cells)), replace=False)
    source = as_source(lines)
    requests, values = [], []
    for temperature, pressure in (cells[i] for i in sorted(picked.tolist())):
        sigma = interpolated(spectra, temperature, pressure)
        points = choose_points(rng, sigma, spectra.wavenumber, source.sample(), profile.cutoff.at(pressure))
        requests.append((temperature, pressure, spectra.wavenumber[points]))
        values.append(sigma[points])
    errors, by_cell = [], []
    truths = exact_points(source, requests, profile.cutoff.at, profile.plinth, profile.chi_table, executor)
    for (temperature, pressure, _), found, truth in zip(requests, values, truths, strict=True):
        here = relative_errors(found, truth)[truth > 0.0]
        if here.size:
            p99 = float(np.percentile(here, 99.0))
            by_cell.append({"p99": p99, "temperature": temperature, "pressure": pressure})
        errors.append(here)
    merged = np.concatenate(errors)
    if not merged.size:
        return None
    return {
        "cells": len(picked),
        "points": int(merged.size),
        "p50": float(np.percentile(merged, 50.0)),
        "p99": float(np.percentile(merged, 99.0)),
        "largest": float(merged.max()),
        "worst_cell": max(by_cell, key=lambda one: one["p99"]),
        "by_cell": by_cell,
    }
