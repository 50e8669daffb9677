"""What a build needs: memory, disk and time, and how many workers that allows."""

from __future__ import annotations

import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from opacity.cross_sections.compute import NodeSum, add_spectra
from opacity.cross_sections.planner import Prediction, predict
from opacity.cross_sections.source import LINES_AT_ONCE, LineSource
from opacity.cross_sections.tolerance import regions
from opacity.pipeline.units import Unit, margin_of
from opacity.recipe.model import Recipe

# For the estimates of time and memory only; measured (DEVELOPERS.md).
VALUES_STORED_PER_SECOND = 2e7
"""Values that are packed, hashed, written and read back in a second."""
LINES_CHECKED_PER_SECOND = 1e7
"""Lines of one node that closure goes through in a second."""
AUDIT_SECONDS = 0.01
"""Time to choose points of one node or cell and to go through them, their profiles apart."""
POINTS_AUDITED = 200
EXACT_PROFILES_PER_SECOND = 1.5e7
"""Profile values of the exact sum in a second."""
MOST_AUDITED = 24
BYTES_A_RECORD = 600
"""Memory that reading a record takes at its peak."""
BYTES_A_LINE = 400
"""A line of a window with all that is made of it at a temperature."""
COPIES_OF_A_UNIT = 3
"""A unit's spectra, and what is made of them on the way to a shard."""
PROGRAM_BYTES = 400_000_000
COPIES_OF_AN_AXIS = 3
"""The grid's wavenumbers: in the recipe, the table's frame, and where they are hashed."""
COPIES_OF_A_SPECTRUM = 6
"""While the table is checked: as stored, as f8, weighted, sampled."""
_MANY = 1_000_000
ASSEMBLY_BYTES = 150_000_000
"""A shard and a few spectra, while the table is put together and checked."""
DISK_BYTES_A_VALUE = 8
"""In the shards and, where four bytes cannot hold the table's range, in the table."""
CALIBRATED_ON = 3
CALIBRATION_POINTS = 4096


@dataclass(frozen=True)
class Needs:
    """Bytes of memory in all and for each worker, and of disk; the largest number of lines that a unit is made of."""

    memory: int
    memory_per_worker: int
    disk: int
    lines_per_unit: int


def needs_of(
    recipe: Recipe,
    source: LineSource,
    units: tuple[Unit, ...],
    workers: int,
    processes: bool,
    shards: Path | None = None,
) -> Needs:
    """What a build with so many workers needs, on disk beside the shards that lie in their folder already."""
    nu, margin = recipe.grid.wavenumber, margin_of(recipe)
    reach = [
        source.count(float(nu[unit.start]) - margin, float(nu[unit.stop - 1]) + margin)
        for unit in {(unit.start, unit.stop): unit for unit in units}.values()
    ]
    lines = max(reach, default=0)
    values = max((len(unit.rows) * (unit.stop - unit.start) for unit in units), default=0)
    worker = COPIES_OF_A_UNIT * 8 * values + BYTES_A_LINE * min(lines, LINES_AT_ONCE)
    held = BYTES_A_RECORD * min(source.ledger.read, LINES_AT_ONCE)
    base = PROGRAM_BYTES + held + COPIES_OF_AN_AXIS * 8 * nu.size
    if processes:
        worker += base
    assembly = ASSEMBLY_BYTES + COPIES_OF_A_SPECTRUM * 8 * nu.size
    return Needs(base + max(workers * worker, assembly), worker, _disk(units, shards), lines)


def _disk(units: tuple[Unit, ...], shards: Path | None) -> int:
    """Bytes that are still to be written: shards that are not there, and the table."""
    there, missing = 0, 0
    for unit in units:
        try:
            there += unit.path(shards).stat().st_size if shards is not None else 0
            missing += 0 if shards is not None else len(unit.rows) * (unit.stop - unit.start)
        except (OSError, ValueError):
            missing += len(unit.rows) * (unit.stop - unit.start)
    # What is there goes into the table as it is, or as f8.
    return 2 * missing * DISK_BYTES_A_VALUE + 2 * there + 1_000_000


def workers_that_fit(recipe: Recipe, source: LineSource, units: tuple[Unit, ...], budget: int, processes: bool) -> int:
    """So many workers fit into a budget of memory (bytes); 0 where not even one does."""
    one = needs_of(recipe, source, units, 1, processes)
    if one.memory > budget:
        return 0
    # Beside the base, which two different numbers of workers tell.
    many = needs_of(recipe, source, units, _MANY, processes)
    base = many.memory - _MANY * many.memory_per_worker
    return max((budget - base) // max(one.memory_per_worker, 1), 1)


@dataclass(frozen=True)
class Amount:
    """Profile values that the spectra stand for, seconds of one core, and the share of tiles summed by cells."""

    values: float
    seconds: float
    by_cells: float


def amount_of(recipe: Recipe, source: LineSource, trial: bool = True) -> Amount:
    """The work in a build's spectra as the planner predicts it, scaled by a short `trial` on the recipe's own lines."""
    nu, places = recipe.grid.wavenumber, source.sample()
    share = len(source) / max(places.size, 1)
    values, seconds, cells, tiles = 0.0, 0.0, 0, 0
    known: dict[float, tuple[float, Prediction]] = {}
    for _, pressure in recipe.grid.node_list():
        cutoff = recipe.profile.cutoff.at(pressure)
        if cutoff not in known:
            low, high = np.searchsorted(nu, places - cutoff), np.searchsorted(nu, places + cutoff)
            known[cutoff] = float(np.sum(high - low)) * share, predict(nu, cutoff, places, share)
        count, one = known[cutoff]
        values, seconds = values + count, seconds + one.seconds
        cells, tiles = cells + one.by_cells, tiles + one.tiles
    scale = _calibration(recipe, source) if trial else 1.0
    return Amount(values, seconds * scale, cells / max(tiles, 1))


def _calibration(recipe: Recipe, source: LineSource) -> float:
    """Measured over predicted time of a few short stretches at nodes spread over the grid; 1 without lines."""
    nu, nodes, profile = recipe.grid.wavenumber, recipe.grid.node_list(), recipe.profile
    limits = regions(profile.tolerance, profile.plinth)
    took = predicted = 0.0
    for number in range(min(CALIBRATED_ON, len(nodes))):
        temperature, pressure = nodes[(2 * number + 1) * len(nodes) // (2 * CALIBRATED_ON)]
        start = (2 * number + 1) * max(nu.size - CALIBRATION_POINTS, 0) // (2 * CALIBRATED_ON)
        points = np.ascontiguousarray(nu[start : start + CALIBRATION_POINTS])
        cutoff = profile.cutoff.at(pressure)
        lower, upper = float(points[0]) - cutoff, float(points[-1]) + cutoff
        if not 0 < source.count(lower, upper) <= LINES_AT_ONCE:
            continue
        lines = source.window(lower, upper)
        node = [NodeSum(lines.at_temperature(temperature), pressure, cutoff)]
        for trial in range(2):  # the first may compile
            started = time.perf_counter()
            add_spectra([np.zeros(points.size)], node, points, limits, profile.plinth, profile.chi_table)
            if trial:
                took += time.perf_counter() - started
        predicted += predict(points, cutoff, lines.wavenumber, 1.0).seconds
    return float(np.clip(took / predicted, 0.1, 30.0)) if predicted > 0.0 else 1.0


def seconds_besides(nodes: int, points: int, lines: int, in_reach: float) -> float:
    """Time of checks and writing on one core; `in_reach` lines reach a point."""
    one_audit = AUDIT_SECONDS + POINTS_AUDITED * in_reach / EXACT_PROFILES_PER_SECOND
    checks = nodes * lines / LINES_CHECKED_PER_SECOND + min(nodes, MOST_AUDITED) * one_audit
    return nodes * points / VALUES_STORED_PER_SECOND + checks
