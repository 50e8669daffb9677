"""A build: from a recipe to a table whose checks are inside it."""

from __future__ import annotations

import json
import math
import os
import platform
import time
from collections.abc import Callable
from concurrent.futures import Executor, ThreadPoolExecutor
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from opacity.check.run import run_checks
from opacity.cross_sections.compute import NodeSum, Tally, add_spectra
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LINES_AT_ONCE, LineSource, as_source, pieces
from opacity.cross_sections.tolerance import regions
from opacity.errors import ResourceError, TableError, problem
from opacity.grids import FloatArray
from opacity.pipeline.fingerprint import Fingerprint, fingerprint
from opacity.pipeline.inputs import Inputs, load_inputs
from opacity.pipeline.plan import Plan, make_plan, refuse_what_cannot_fit, table_name
from opacity.pipeline.progress import Progress
from opacity.pipeline.resources import allowed_cpus
from opacity.pipeline.sources import DEFAULT_MEMORY
from opacity.recipe.model import Recipe
from opacity.tables.atomic import remove_leftovers, write_atomically
from opacity.tables.layout import BLOCK
from opacity.tables.model import CrossSectionTable
from opacity.tables.read import open_table
from opacity.tables.write import check_table, write_cross_section_table

STRENGTHS_AT_ONCE = 16_000_000
"""Strengths (lines times temperatures) that are made in one pass over the lines: 128 MB, and as much for the widths."""


@dataclass(frozen=True)
class BuildResult:
    """What a build made: the table, the log beside it, the checks, and the plan, None for a table that was kept."""

    table: Path
    log: Path
    plan: Plan | None
    figures: dict[str, Any]
    seconds: float

    @property
    def reused(self) -> bool:
        """Whether the table was there already and was kept."""
        return self.plan is None


def build_table(
    recipe: Recipe,
    folder: Path,
    *,
    workers: int | None = None,
    memory: int = DEFAULT_MEMORY,
    quiet: bool = False,
    announce: Callable[[Plan], None] = lambda plan: None,
) -> BuildResult:
    """Build a recipe's cross-section table into a folder, which is made if it is missing.

    A table that is there already and was built from the very same inputs is verified and kept, without a line being
    read.  `announce` gets the plan before the work starts.  Raises OpacityError of the kind that fits; nothing
    half-written ever has the table's name.
    """
    started = time.monotonic()
    path, log = folder / table_name(recipe), folder / f"{recipe.name}.log.json"
    remove_leftovers(folder)
    origin = fingerprint(recipe)
    kept = _still_good(path, origin)
    if kept is not None:
        return BuildResult(path, log, None, kept, time.monotonic() - started)
    inputs = load_inputs(recipe, folder, origin, memory, quiet)
    plan = make_plan(recipe, inputs, folder)
    announce(plan)
    refuse_what_cannot_fit(plan)
    _make_folder(folder)
    _refuse_folders(path, log)
    count = allowed_cpus() if workers is None else workers
    spectra = compute_spectra(recipe, inputs.lines, count, quiet)
    table = _checked_table(recipe, inputs, spectra.sigma, path, count, quiet)
    table = replace(
        table, checks={**table.checks, "warnings": list(plan.warnings), "summation": _summation(recipe, spectra)}
    )
    write_cross_section_table(path, table)
    seconds = time.monotonic() - started
    _write_log(log, recipe, seconds, count)
    return BuildResult(path, log, plan, table.checks, seconds)


def _summation(recipe: Recipe, spectra: Spectra) -> dict[str, Any]:
    """How each node was summed, tile by tile, and the largest error that is predicted of it."""
    profile = recipe.profile
    return {
        "predicted_error": regions(profile.tolerance, profile.plinth).predicted_error,
        "nodes": [
            {"temperature": t, "pressure": p, "tiles_by_cells": one.by_cells, "tiles_by_points": one.by_points}
            for (t, p), one in zip(recipe.grid.node_list(), spectra.tallies, strict=True)
        ],
    }


def _still_good(path: Path, origin: Fingerprint) -> dict[str, Any] | None:
    """The checks of a table that is there, whole, and made from these inputs; otherwise None."""
    if not os.path.exists(path):
        return None
    try:
        with open_table(path) as table:
            if table.provenance.get("inputs_sha256") != origin.sha256:
                return None
            table.verify()
            return table.checks
    except TableError:  # damaged: it is built again
        return None


def _make_folder(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise ResourceError(problem(folder, f"the folder for the tables cannot be made ({reason})")) from error
    if not os.access(folder, os.W_OK | os.X_OK):
        raise ResourceError(
            problem(folder, "nothing can be written here", remedy="choose a folder in which you may write")
        )


def _refuse_folders(*paths: Path) -> None:
    """Before hours of work, not after them."""
    for path in paths:
        if path.is_dir():
            raise ResourceError(problem(path, "is a folder", expected="a file or nothing", remedy="move it away"))


@dataclass(frozen=True)
class Spectra:
    """All spectra of a recipe, (n_T, n_P, n_nu) or (n_node, n_nu), and how the tiles of each node were summed."""

    sigma: FloatArray
    tallies: tuple[Tally, ...]


def compute_spectra(recipe: Recipe, lines: LineSource | PreparedLines, workers: int, quiet: bool) -> Spectra:
    """All spectra of a recipe."""
    grid, source = recipe.grid, as_source(lines)
    nodes = grid.node_list()
    try:
        sigma = np.empty((len(nodes), grid.wavenumber.size))
    except MemoryError as error:
        raise ResourceError(
            problem(recipe.path, "the spectra do not fit in memory", remedy="use fewer nodes or points")
        ) from error
    executor = ThreadPoolExecutor(workers) if workers > 1 else None
    tallies = [Tally() for _ in nodes]
    try:
        parts = windows(grid.wavenumber, _margin(recipe), source)
        with Progress("spectra", len(nodes) * len(parts), "spectra of windows", quiet) as progress:
            for part in parts:
                _fill(sigma, part, recipe, source, tallies, executor, progress)
    finally:
        if executor is not None:
            executor.shutdown(wait=True, cancel_futures=True)
    shape = (len(nodes),) if grid.nodes is not None else (len(grid.temperature), len(grid.pressure))
    return Spectra(sigma.reshape(*shape, grid.wavenumber.size), tuple(tallies))


def windows(wavenumber: FloatArray, margin: float, lines: LineSource) -> list[slice]:
    """Stretches of the grid, multiples of 16384 points, so short that the lines in reach of each can be held at once.

    The shortest are one block of 16384 points, however many lines reach it.
    """
    found, waiting = [], [(0, wavenumber.size)]
    while waiting:
        start, stop = waiting.pop()
        blocks = math.ceil((stop - start) / BLOCK)
        lower, upper = float(wavenumber[start]) - margin, float(wavenumber[stop - 1]) + margin
        if blocks == 1 or lines.count(lower, upper) <= LINES_AT_ONCE:
            found.append(slice(start, stop))
        else:
            middle = start + BLOCK * (blocks // 2)
            waiting += [(middle, stop), (start, middle)]
    return found


def _fill(
    sigma: FloatArray,
    part: slice,
    recipe: Recipe,
    source: LineSource,
    tallies: list[Tally],
    executor: Executor | None,
    progress: Progress,
) -> None:
    profile = recipe.profile
    nu = np.ascontiguousarray(recipe.grid.wavenumber[part])
    margin, rows = _margin(recipe), _rows_by_temperature(recipe)
    limits = regions(profile.tolerance, profile.plinth)
    sigma[:, part] = 0.0
    for lines in pieces(source, float(nu[0]) - margin, float(nu[-1]) + margin):
        block = max(STRENGTHS_AT_ONCE // max(len(lines), 1), 1)
        for start in range(0, len(rows), block):
            temperatures = list(rows)[start : start + block]
            here: list[int] = []
            nodes: list[NodeSum] = []
            for temperature, strength in zip(temperatures, lines.strengths_at(temperatures), strict=True):
                at_temperature = lines.at_temperature(temperature, strength)
                for row, pressure in rows[temperature]:
                    here.append(row)
                    nodes.append(NodeSum(at_temperature, pressure, profile.cutoff.at(pressure)))

            def done(number: int, tally: Tally, here: list[int] = here) -> None:
                tallies[here[number]] = tallies[here[number]].plus(tally)
                progress.step()

            sums = [sigma[row, part] for row in here]
            add_spectra(sums, nodes, nu, limits, profile.plinth, profile.chi_table, executor, done=done)


def _rows_by_temperature(recipe: Recipe) -> dict[float, list[tuple[int, float]]]:
    """Row and pressure of the nodes at each temperature."""
    found: dict[float, list[tuple[int, float]]] = {}
    for row, (temperature, pressure) in enumerate(recipe.grid.node_list()):
        found.setdefault(temperature, []).append((row, pressure))
    return found


def _margin(recipe: Recipe) -> float:
    return max(step.cutoff for step in recipe.profile.cutoff.steps) + 1e-6


def _checked_table(
    recipe: Recipe, inputs: Inputs, sigma: FloatArray, path: Path, workers: int, quiet: bool
) -> CrossSectionTable:
    """The table with its checks, made of the values as they will be stored."""
    grid = recipe.grid
    nodes = grid.nodes
    axes = (grid.temperature, grid.pressure) if nodes is None else ([t for t, _ in nodes], [p for _, p in nodes])
    table = CrossSectionTable(
        title=f"Absorption cross-section of {recipe.molecule.name} ({recipe.molecule.formula})",
        formula=recipe.molecule.formula,
        temperature=np.array(axes[0], dtype=np.float64),
        pressure=np.array(axes[1], dtype=np.float64),
        wavenumber=grid.wavenumber,
        cross_section=sigma,
        recipe=recipe.text,
        provenance=inputs.provenance,
        checks={},
        profile=nodes is not None,
    )
    if check_table(path, table) == np.dtype("<f4"):
        for node in np.ndindex(sigma.shape[:-1]):
            sigma[node] = sigma[node].astype(np.float32)
    with Progress("checks", len(grid.node_list()), "nodes", quiet) as progress:
        report = run_checks(table, recipe, inputs.lines, inputs.seed, progress.step, workers)
    return replace(table, checks=report.figures)


def _write_log(log: Path, recipe: Recipe, seconds: float, workers: int) -> None:
    """What depends on time and place, beside the table and not in it."""
    entry = {
        "recipe": str(recipe.path.absolute()),
        "finished": time.strftime("%Y-%m-%dT%H:%M:%SZ", time.gmtime()),
        "seconds": round(seconds, 3),
        "workers": workers,
        "host": platform.node(),
        "processor": platform.processor() or platform.machine(),
        "python": platform.python_version(),
    }
    write_atomically(log, (json.dumps(entry, indent=2) + "\n").encode("utf-8"))
