"""A build: from a recipe to a table whose checks are inside it, by units that are never done twice."""

from __future__ import annotations

import contextlib
import os
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from opacity.check.run import run_checks
from opacity.cross_sections.tolerance import regions
from opacity.errors import InUseError, ResourceError, TableError, problem
from opacity.k_coefficient.bands import band_edges
from opacity.line_store.lock import locked
from opacity.pipeline.fingerprint import Fingerprint, fingerprint
from opacity.pipeline.folders import make_folder, refuse_folders, write_log
from opacity.pipeline.inputs import Inputs, load_inputs
from opacity.pipeline.k_assemble import KJob, ShardCells, assemble_k
from opacity.pipeline.k_plan import make_k_plan
from opacity.pipeline.k_units import BandUnit
from opacity.pipeline.kinds import CROSS_SECTION, shards_of, table_name, units_of, wanted
from opacity.pipeline.plan import Plan, make_plan, refuse_what_cannot_fit
from opacity.pipeline.progress import Progress
from opacity.pipeline.resources import several
from opacity.pipeline.sources import DEFAULT_MEMORY
from opacity.pipeline.uncertainty import stated_uncertainty
from opacity.pipeline.units import Unit
from opacity.pipeline.workers import Origin, Work, WorkUnit, in_processes, in_threads
from opacity.recipe.model import Recipe
from opacity.recipe.unverified import refuse_unverified
from opacity.tables.assemble import Assembly, assemble_table, stored_type_of
from opacity.tables.atomic import remove_leftovers
from opacity.tables.model import TableFrame
from opacity.tables.open import open_table
from opacity.tables.sealed import ENDING, is_whole
from opacity.tables.shard import Shard, read_shard, read_shard_header


@dataclass(frozen=True)
class Crew:
    """Who computes: `workers` (None: the CPUs allowed) "threads" or "processes" of this machine, or a cluster's.

    `task` (k, n) is the k-th of n shares of the units, as the tasks of a batch array take them; `scheduler` the
    address or file of a dask scheduler, or "local" for one started here.
    """

    workers: int | None = None
    kind: str = "threads"
    task: tuple[int, int] | None = None
    scheduler: str | None = None

    @property
    def processes(self) -> bool:
        """Whether each worker of this machine holds recipe and lines of its own."""
        return self.kind == "processes" or self.scheduler == "local"


@dataclass(frozen=True)
class BuildResult:
    """What a build made: the table, the log beside it, the checks, and the plan, None for a table that was kept.

    `missing` units are left to other tasks; until they are done there is no table and there are no checks.  Where none
    is missing and there are no checks another task is putting the table together.
    """

    table: Path
    log: Path
    plan: Plan | None
    figures: dict[str, Any]
    seconds: float
    units: int = 0
    missing: int = 0

    @property
    def reused(self) -> bool:
        """Whether the table was there already and was kept."""
        return self.plan is None


def build_tables(
    recipe: Recipe,
    folder: Path,
    *,
    crew: Crew | None = None,
    memory: int = DEFAULT_MEMORY,
    quiet: bool = False,
    announce: Callable[[Plan], None] = lambda plan: None,
) -> tuple[BuildResult, ...]:
    """Build all tables that a recipe asks for, as `build_table` does each."""
    choice: dict[str, Any] = {"crew": crew, "memory": memory, "quiet": quiet, "announce": announce}
    return tuple(build_table(recipe, folder, kind, **choice) for kind in wanted(recipe))


def build_table(
    recipe: Recipe,
    folder: Path,
    kind: str = CROSS_SECTION,
    *,
    crew: Crew | None = None,
    memory: int = DEFAULT_MEMORY,
    quiet: bool = False,
    announce: Callable[[Plan], None] = lambda plan: None,
) -> BuildResult:
    """Build a recipe's table of a kind into a folder, which is made if it is missing.

    A table that is there already and was built from the very same inputs is verified and kept, without a line being
    read; finished units of a build that was stopped are kept too.  `announce` gets the plan before the work starts.
    Raises OpacityError of the kind that fits; nothing half-written ever has a final name.
    """
    started = time.monotonic()
    crew = crew or Crew()
    refuse_unverified(recipe)
    path, log = folder / table_name(recipe, kind), folder / f"{recipe.name}.log.json"
    remove_leftovers(folder)
    origin = fingerprint(recipe)
    kept = _still_good(path, origin)
    if kept is not None:
        _remove_shards(shards_of(recipe, folder, kind))
        if not log.exists():
            with contextlib.suppress(ResourceError):
                write_log(log, recipe, time.monotonic() - started, 0)
        return BuildResult(path, log, None, kept, time.monotonic() - started)
    inputs = load_inputs(recipe, folder, origin, memory, quiet)
    planned = make_plan if kind == CROSS_SECTION else make_k_plan
    plan = planned(recipe, inputs, folder, crew.workers, memory, crew.processes)
    announce(plan)
    refuse_what_cannot_fit(plan)
    job = _Job(recipe, kind, inputs, plan, folder, path, memory, quiet)
    make_folder(folder)
    refuse_folders(path, log)
    make_folder(job.shards)
    units = units_of(recipe, inputs, kind)
    try:
        figures, missing = (_build_alone if crew.task is None else _build_task)(job, units, crew)
    except KeyboardInterrupt as stop:
        done = sum(unit.path(job.shards).exists() for unit in units)
        stop.args = (f"{done} of {len(units)} units are done and kept; the same command goes on",)
        raise
    finally:
        if crew.task is None:  # other tasks may be about to write into it
            with contextlib.suppress(OSError):
                job.shards.rmdir()  # unless shards are kept in it
    seconds = time.monotonic() - started
    if figures:
        write_log(log, recipe, seconds, plan.workers)
    return BuildResult(path, log, plan, figures, seconds, len(units), missing)


Units = tuple[Unit, ...] | tuple[BandUnit, ...]


@dataclass(frozen=True)
class _Job:
    recipe: Recipe
    kind: str
    inputs: Inputs
    plan: Plan
    folder: Path
    path: Path
    memory: int
    quiet: bool

    @property
    def shards(self) -> Path:
        return shards_of(self.recipe, self.folder, self.kind)

    @property
    def work(self) -> Work:
        return Work(self.recipe, self.inputs.lines, self.shards)

    def stated(self) -> dict[str, Any]:
        """What the lists say of their own uncertainty.  Raises ResourceError where they are others by now."""
        origin = self.inputs.fingerprint
        found = stated_uncertainty(self.recipe, self.folder, origin.hashes, self.memory, self.quiet, self.plan.workers)
        if not origin.still_of(self.recipe) and fingerprint(self.recipe).sha256 != origin.sha256:
            what = "its files changed while the table was built"
            raise ResourceError(problem(self.recipe.path, what, remedy="build again when they are at rest"))
        return found

    @property
    def origin(self) -> Origin:
        return Origin(
            self.recipe.path.absolute(),
            self.folder.absolute(),
            self.shards.absolute(),
            self.inputs.sha256,
            self.memory,
            self.kind,
            self.inputs.fingerprint,
        )


def _build_alone(job: _Job, units: Units, crew: Crew) -> tuple[dict[str, Any], int]:
    with locked(job.shards, "table") as lock:
        figures = _still_good(job.path, job.inputs.fingerprint)
        if figures is None:  # else a task was quicker
            if crew.task is None:
                _remove_stale(job.shards, units)
            _compute(job, units, crew)
            figures = _put_together(job, units, lock.check)
    _remove_shards(job.shards)
    return figures, 0


def _remove_stale(folder: Path, units: Units) -> None:
    """Remove what killed workers left, and the shards of other units: those of a recipe that has changed since."""
    remove_leftovers(folder)
    ours = {unit.path(folder) for unit in units}
    for path in folder.glob(f"*{ENDING}"):
        if path not in ours:
            with contextlib.suppress(OSError):
                path.unlink()


def _remove_shards(folder: Path) -> None:
    """Remove the shards of a table that is made, unless somebody works with them."""
    if folder.exists():
        with contextlib.suppress(ResourceError), locked(folder, "table"):
            for path in folder.glob(f"*{ENDING}"):
                path.unlink(missing_ok=True)
            remove_leftovers(folder)
        with contextlib.suppress(OSError):
            folder.rmdir()


def _build_task(job: _Job, units: Units, crew: Crew) -> tuple[dict[str, Any], int]:
    """A share of the units; whoever finds all of them done puts the table together."""
    assert crew.task is not None
    k, n = crew.task
    remove_leftovers(job.shards)
    _compute(job, tuple(unit for unit in units if unit.number % n == k - 1), crew)
    missing = sum(not unit.path(job.shards).exists() for unit in units)
    if missing:
        return {}, missing
    try:
        return _build_alone(job, units, crew)
    except InUseError:  # the task that found all units done at the same moment puts the table together
        return {}, 0


def _compute(job: _Job, units: Sequence[WorkUnit], crew: Crew) -> None:
    """Compute the units whose shards are not there."""
    left = [unit for unit in units if not is_whole(unit.path(job.shards))]
    nodes = sum(len(unit.rows) for unit in left)
    with Progress("spectra", nodes, "spectra of windows", job.quiet) as progress:

        def finished(unit: WorkUnit) -> None:
            progress.step(len(unit.rows))

        if crew.scheduler is not None:
            from opacity.pipeline.cluster import on_cluster

            on_cluster(crew.scheduler, job.origin, left, job.plan.workers, finished)
        elif crew.kind == "processes":
            in_processes(job.origin, left, job.plan.workers, finished)
        else:
            in_threads(job.work, left, job.plan.workers, finished)


def _put_together(job: _Job, units: Units, still_ours: Callable[[], None]) -> dict[str, Any]:
    """The table from all shards; its checks."""
    bands = [unit for unit in units if isinstance(unit, BandUnit)]
    if not bands:
        return _assemble(job, tuple(unit for unit in units if isinstance(unit, Unit)), still_ours)
    grid = job.recipe.grid
    nodes = (len(grid.temperature), len(grid.pressure)) if grid.nodes is None else (len(grid.nodes),)
    cells = ShardCells(bands, job.shards, nodes, band_edges(job.recipe).size - 1, job.work.do)
    inputs, plan = job.inputs, job.plan
    given = (inputs.provenance, plan.warnings, plan.workers, job.quiet)
    return assemble_k(KJob(job.path, job.recipe, inputs.lines, inputs.seed, *given, job.stated), cells, still_ours)


def _assemble(job: _Job, units: tuple[Unit, ...], still_ours: Callable[[], None]) -> dict[str, Any]:
    """The table of cross-sections from all shards; its checks."""
    recipe, grid = job.recipe, job.recipe.grid
    nodes = grid.node_list()
    extremes, tiles, warnings = [], np.zeros((len(nodes), 2), dtype=np.int64), list(job.plan.warnings)
    processors: set[str] = set()
    for shard in _shards(job, units, read_shard_header):
        extremes.append((shard.smallest, shard.largest))
        tiles[list(shard.rows)] += np.array(shard.notes["tiles"])
        processors.add(shard.notes["processor"])
    warnings += several(processors)
    axes = (grid.temperature, grid.pressure) if grid.nodes is None else zip(*grid.nodes, strict=True)
    temperature, pressure = (np.array(axis, dtype=np.float64) for axis in axes)
    frame = TableFrame(
        title=f"Absorption cross-section of {recipe.molecule.name} ({recipe.molecule.formula})",
        formula=recipe.molecule.formula,
        temperature=temperature,
        pressure=pressure,
        wavenumber=grid.wavenumber,
        recipe=recipe.text,
        provenance=job.inputs.provenance,
        profile=grid.nodes is not None,
    )

    def check(table: Assembly) -> dict[str, Any]:
        with Progress("checks", len(nodes), "nodes", job.quiet) as progress:
            report = run_checks(table, recipe, job.inputs.lines, job.inputs.seed, progress.step, job.plan.workers)
        beside = {"uncertainty": job.stated(), "warnings": warnings, "summation": _summation(recipe, tiles)}
        still_ours()
        return {**report.figures, **beside}

    shards = _shards(job, units, read_shard)
    return assemble_table(job.path, frame, stored_type_of(extremes), shards, check, job.plan.workers)


def _shards(job: _Job, units: tuple[Unit, ...], read: Callable[[Path], Shard]) -> Iterator[Shard]:
    """All shards in order; one that was damaged since is computed again."""
    for unit in units:
        try:
            shard = read(unit.path(job.shards))
        except TableError:
            job.work.do(unit)
            shard = read(unit.path(job.shards))
        yield shard


def _summation(recipe: Recipe, tiles: np.ndarray[Any, Any]) -> dict[str, Any]:
    """How each node was summed, tile by tile, and the largest error that is predicted of it."""
    profile = recipe.profile
    return {
        "predicted_error": regions(profile.tolerance, profile.plinth).predicted_error,
        "nodes": [
            {"temperature": t, "pressure": p, "tiles_by_cells": int(cells), "tiles_by_points": int(points)}
            for (t, p), (cells, points) in zip(recipe.grid.node_list(), tiles, strict=True)
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
