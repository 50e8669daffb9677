"""The plan of a k-coefficient table: how fine its spectra must be, and what the build needs."""

from __future__ import annotations

import time
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from opacity.check.k_samples import MOST_BANDS, MOST_MIDDLES
from opacity.cross_sections.source import LINES_AT_ONCE, LineSource
from opacity.cross_sections.tolerance import regions
from opacity.k_coefficient.bands import band_edges
from opacity.k_coefficient.choose import MOST_ROWS
from opacity.k_coefficient.collapse import N_CELLS
from opacity.k_coefficient.quadrature import INTERVALS
from opacity.k_coefficient.spectra import (
    MOST_POINTS,
    POINTS_AT_ONCE,
    collapsed,
    lines_of_bands,
    margin_of,
    points_of_bands,
)
from opacity.pipeline.inputs import Inputs, refuse_invalid_temperatures
from opacity.pipeline.k_units import BandUnit
from opacity.pipeline.kinds import CROSS_SECTION, K_COEFFICIENT, k_units_of, table_name, wanted
from opacity.pipeline.needs import BYTES_A_LINE, BYTES_A_RECORD, COPIES_OF_A_SPECTRUM, PROGRAM_BYTES
from opacity.pipeline.plan import Plan, make_plan, obstacle, warnings_of
from opacity.pipeline.resources import allowed_cpus, available_memory, free_disk
from opacity.pipeline.sources import DEFAULT_MEMORY
from opacity.recipe.model import Recipe

LOOKED_AT = 3
"""Bands whose lines tell how fine spectra must be, and nodes of the trial."""
SECONDS_A_ROW = 5e-4
"""Time to certify a band at a node; measured, for the estimate only."""
SECONDS_A_SAMPLE = 5e-3
FITTING_SECONDS = 15.0
COPIES_OF_CELLS = 4


def make_k_plan(
    recipe: Recipe,
    inputs: Inputs,
    folder: Path,
    workers: int | None = None,
    memory: int = DEFAULT_MEMORY,
    processes: bool = False,
) -> Plan:
    """Plan the build of a recipe's k-coefficient table, as `make_plan` does that of its cross-sections.

    Raises RecipeError where a partition function is not valid at the grid's temperatures.
    """
    refuse_invalid_temperatures(recipe, inputs.partition)
    lines, nodes, edges = inputs.lines, recipe.grid.node_list(), band_edges(recipe)
    bands = edges.size - 1
    units = k_units_of(recipe, inputs)
    amount = _amount_of(recipe, lines)
    needs = _needs_of(recipe, lines, units, bands)
    asked = allowed_cpus() if workers is None else workers
    available, disk_free = available_memory(), free_disk(folder)
    budget = memory if available is None else min(memory, available)
    base = needs.base + (needs.base if processes else 0)
    fit = max((budget - needs.base) // (needs.worker + base - needs.base), 1)
    count = max(min(asked, fit, len(units)), 1)
    memory_needed = needs.base + max(count * (needs.worker + base - needs.base), needs.assembly)
    besides = _seconds_besides(recipe, bands)
    limits = (("memory", memory_needed, budget), ("disk", needs.disk, disk_free))
    temperatures = sorted({t for t, _ in nodes})
    return Plan(
        recipe=str(recipe.path),
        table=str(folder / table_name(recipe, K_COEFFICIENT)),
        nodes=len(nodes),
        points=int(amount.points),
        lines=len(lines),
        units=len(units),
        lines_per_unit=needs.lines,
        workers=count,
        profile_values=amount.values,
        by_cells=1.0,
        predicted_error=regions(recipe.profile.tolerance, recipe.profile.plinth).predicted_error,
        seconds=amount.seconds + besides,
        wall_seconds=amount.seconds / count + besides,
        memory=memory_needed,
        memory_per_worker=needs.worker,
        memory_available=budget,
        disk=needs.disk,
        disk_free=disk_free,
        obstacles=tuple(
            obstacle(recipe, *one, f"{bands} bands") for one in limits if one[2] is not None and one[1] > one[2]
        ),
        limited=(f"memory allows {count} of {asked} workers",) if count < min(asked, len(units)) else (),
        coarse_nodes=(),
        warnings=(
            *inputs.warnings,
            *amount.warnings,
            *_means_lost(recipe),
            *warnings_of(recipe, inputs, [], temperatures),
        ),
        assumptions=tuple((one.what, one.lines) for one in lines.assumptions),
        ledger=lines.ledger.as_dict(),
        bands=bands,
    )


def plan_all(recipe: Recipe, inputs: Inputs, folder: Path, memory: int) -> Plan:
    """The plan of the first table that a recipe asks for, with those of the others in it."""
    planned = {CROSS_SECTION: make_plan, K_COEFFICIENT: make_k_plan}
    first, *others = (planned[kind](recipe, inputs, folder, memory=memory) for kind in wanted(recipe))
    return replace(first, others=tuple(others))


def _means_lost(recipe: Recipe) -> list[str]:
    """A warning where the quadrature chosen does not keep the means of bands."""
    assert recipe.k_coefficient is not None
    quadrature = recipe.k_coefficient.quadrature
    if quadrature in INTERVALS:
        return []
    what = f'the quadrature "{quadrature}" does not keep the means of bands, which may be off by most of their value'
    return [f'{what} at low pressures; "matched" and "interval-mean" keep them']


@dataclass(frozen=True)
class _Amount:
    """`points` of a spectrum in the mean of nodes, profile `values` in all, `seconds` of one core for spectra."""

    points: float
    values: float
    seconds: float
    warnings: tuple[str, ...]


def _amount_of(recipe: Recipe, source: LineSource) -> _Amount:
    """The work, from how fine some bands must be at every node, and a trial of the middle one at a few nodes."""
    edges, nodes, profile = band_edges(recipe), recipe.grid.node_list(), recipe.profile
    bands = edges.size - 1
    looked_at = sorted({(2 * i + 1) * bands // (2 * LOOKED_AT) for i in range(LOOKED_AT)})
    temperatures = list(dict.fromkeys(t for t, _ in nodes))
    pressures = {t: [p for at, p in nodes if at == t] for t in temperatures}
    tried = {nodes[(2 * i + 1) * len(nodes) // (2 * LOOKED_AT)] for i in range(LOOKED_AT)}
    points, seconds, trial_points, widest = 0.0, 0.0, 0.0, 0.0
    for band in looked_at:
        part = edges[band : band + 2]
        if source.count(float(part[0]), float(part[1])) > LINES_AT_ONCE:
            continue
        for lines in lines_of_bands(source, profile, part, temperatures):
            for pressure in pressures[lines.temperature]:
                needed = float(points_of_bands(lines, part, pressure)[0])
                points, widest = points + needed / len(looked_at), max(widest, needed)
                if (lines.temperature, pressure) in tried and band == looked_at[len(looked_at) // 2]:
                    for _ in range(2):  # the first may compile
                        started = time.perf_counter()
                        if needed <= POINTS_AT_ONCE:
                            collapsed(lines, part, pressure)
                        took = time.perf_counter() - started
                    seconds, trial_points = seconds + took, trial_points + needed
    reach = 2.0 * float(np.mean([profile.cutoff.at(p) for _, p in nodes]))
    span = float(edges[-1] - edges[0])
    values = points * bands * len(source) * min(reach / max(span, reach), 1.0)
    total = points * bands
    warnings = ("some bands are too wide for the step that their lines need",) if widest > MOST_POINTS else ()
    return _Amount(total / len(nodes), values, seconds / max(trial_points, 1.0) * total, warnings)


@dataclass(frozen=True)
class _Needs:
    """Bytes: of the program with its lines, of a worker, of the assembly, on disk; lines of the largest unit."""

    base: int
    worker: int
    assembly: int
    disk: int
    lines: int


def _needs_of(recipe: Recipe, source: LineSource, units: tuple[BandUnit, ...], bands: int) -> _Needs:
    edges, margin = band_edges(recipe), margin_of(recipe.profile)
    lines = max(source.count(float(edges[unit.first]) - margin, float(edges[unit.last]) + margin) for unit in units)
    cells = 8 * N_CELLS
    unit_cells = max(len(unit.rows) * (unit.last - unit.first) for unit in units) * cells
    block = max(len(unit.rows) for unit in units) * bands * cells
    fitted = min(MOST_ROWS, 18 * bands) * cells
    worker = COPIES_OF_A_SPECTRUM * 8 * POINTS_AT_ONCE + BYTES_A_LINE * min(lines, LINES_AT_ONCE) + 2 * unit_cells
    held = BYTES_A_RECORD * min(source.ledger.read, LINES_AT_ONCE)
    assembly = block + COPIES_OF_CELLS * (fitted + bands * cells)
    disk = 2 * len(recipe.grid.node_list()) * bands * (cells + 8 * 32) + 1_000_000
    return _Needs(PROGRAM_BYTES + held, worker, assembly, disk, lines)


def _seconds_besides(recipe: Recipe, bands: int) -> float:
    """Time of fitting, certificate and samples on one core."""
    nodes = len(recipe.grid.node_list())
    assert recipe.k_coefficient is not None
    fitting = 0.0 if recipe.k_coefficient.weights == "fixed" else FITTING_SECONDS * min(18 * bands / 2000.0, 2.0)
    samples = min(bands, MOST_BANDS) * (4 + MOST_MIDDLES) * SECONDS_A_SAMPLE
    return fitting + nodes * bands * SECONDS_A_ROW + samples
