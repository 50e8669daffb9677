"""Units of work: a window of the grid and some of its nodes, each a pure function of the recipe and its lines.

How a build is parted into units follows from the recipe and the lines alone, never from memory or workers, so that
whoever continues a build finds what is done.
"""

from __future__ import annotations

import hashlib
import json
import math
from concurrent.futures import Executor
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from opacity.cross_sections.compute import NodeSum, Tally, add_spectra
from opacity.cross_sections.prepare import LinesAtTemperature
from opacity.cross_sections.source import LINES_AT_ONCE, LineSource, pieces
from opacity.cross_sections.tolerance import regions
from opacity.errors import LineListError, problem
from opacity.grids import FloatArray
from opacity.kernels.jit import source_hash
from opacity.pipeline.resources import processor
from opacity.recipe.model import Recipe
from opacity.tables.layout import BLOCK, block_slices
from opacity.tables.sealed import ENDING
from opacity.tables.shard import Shard, make_shard, write_shard

WINDOW = 8 * BLOCK
"""Points of the widest window."""
FEWEST_VALUES = 2_000_000
"""Values of a unit, where its nodes are enough of them."""
MOST_VALUES = 8_000_000
"""A unit's spectra are 64 MB at most, unless those of one node are more."""
NODES_PER_READING = 16
"""Where lines are many, reading them once must serve so many nodes."""
MANY_LINES = 100_000
STRENGTHS_AT_ONCE = 4_000_000
"""Strengths (lines times temperatures) that are made in one pass over the lines: 32 MB."""


@dataclass(frozen=True)
class Unit:
    """Nodes `rows` (numbers in stored order) from point `start` to before `stop`; `name` is the hash of its inputs."""

    number: int
    start: int
    stop: int
    rows: tuple[int, ...]
    name: str

    def path(self, folder: Path) -> Path:
        """Where its shard lies."""
        return folder / f"{self.name}{ENDING}"

    def do(self, recipe: Recipe, source: LineSource, path: Path, executor: Executor | None = None) -> None:
        """Compute the unit and write its shard."""
        write_shard(path, compute(recipe, source, self, executor))


def parted(recipe: Recipe, source: LineSource, inputs_sha256: str) -> tuple[Unit, ...]:
    """All units of a build, window by window."""
    nodes = len(recipe.grid.node_list())
    found: list[Unit] = []
    for window in windows(recipe.grid.wavenumber, margin_of(recipe), source):
        size = _nodes_at_once(recipe, source, window)
        for first in range(0, nodes, size):
            rows = tuple(range(first, min(first + size, nodes)))
            text = json.dumps([inputs_sha256, source_hash(), window.start, window.stop, rows[0], rows[-1]])
            name = hashlib.sha256(text.encode("ascii")).hexdigest()[:32]
            found.append(Unit(len(found), window.start, window.stop, rows, name))
    return tuple(found)


def _nodes_at_once(recipe: Recipe, source: LineSource, window: slice) -> int:
    nu, margin = recipe.grid.wavenumber, margin_of(recipe)
    points = window.stop - window.start
    lines = source.count(float(nu[window.start]) - margin, float(nu[window.stop - 1]) + margin)
    wanted = max(FEWEST_VALUES // points, NODES_PER_READING if lines > MANY_LINES else 1, 1)
    pressures = len(recipe.grid.pressure) if recipe.grid.nodes is None else 1
    # Whole temperatures, so that strengths and widths are made once.
    whole = pressures * math.ceil(wanted / pressures)
    return int(max(min(whole, MOST_VALUES // points), 1))


def windows(wavenumber: FloatArray, margin: float, lines: LineSource) -> list[slice]:
    """Stretches of the grid, multiples of 16384 points, so short that the lines in reach of each can be held at once.

    The shortest are one block of 16384 points, however many lines reach it.
    """
    found: list[slice] = []
    starts = range(0, wavenumber.size, WINDOW)
    waiting = [(start, min(start + WINDOW, wavenumber.size)) for start in reversed(starts)]
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


def margin_of(recipe: Recipe) -> float:
    """How far beyond a window lines are looked for, cm-1."""
    return max(step.cutoff for step in recipe.profile.cutoff.steps) + 1e-6


def compute(recipe: Recipe, source: LineSource, unit: Unit, executor: Executor | None = None) -> Shard:
    """The shard of a unit; with an executor of threads its tiles are computed side by side.

    Raises LineListError where a sum is not finite.
    """
    nodes = [recipe.grid.node_list()[row] for row in unit.rows]
    sums = np.zeros((len(nodes), unit.stop - unit.start))
    tallies = [Tally() for _ in nodes]
    places: dict[float, list[int]] = {}
    for place, (temperature, _) in enumerate(nodes):
        places.setdefault(temperature, []).append(place)
    nu = np.ascontiguousarray(recipe.grid.wavenumber[unit.start : unit.stop])
    margin = margin_of(recipe)
    for lines in pieces(source, float(nu[0]) - margin, float(nu[-1]) + margin):
        for temperatures in _some_at_once(list(places), len(lines)):
            for temperature, strength in zip(temperatures, lines.strengths_at(temperatures), strict=True):
                here = places[temperature]
                at_temperature = lines.at_temperature(temperature, strength)
                found = _add(recipe, nu, at_temperature, [nodes[i][1] for i in here], [sums[i] for i in here], executor)
                for place, tally in zip(here, found, strict=True):
                    tallies[place] = tallies[place].plus(tally)
    notes = {"tiles": [[one.by_cells, one.by_points] for one in tallies], "processor": processor()}
    shard = make_shard(unit.rows, unit.start, min(BLOCK, recipe.grid.wavenumber.size), sums, notes)
    if not math.isfinite(shard.largest):
        _refuse(nodes, sums)
    return shard


def _refuse(nodes: list[tuple[float, float]], sums: FloatArray) -> None:
    for (temperature, pressure), spectrum in zip(nodes, sums, strict=True):
        if not np.all(np.isfinite(spectrum) & (spectrum >= 0.0)):
            where = f"node {temperature:g} K, {pressure:g} bar"
            raise LineListError(problem(where, "the sum is not finite: a line has impossible values"))


def _some_at_once(temperatures: list[float], lines: int) -> list[list[float]]:
    size = max(STRENGTHS_AT_ONCE // max(lines, 1), 1)
    return [temperatures[first : first + size] for first in range(0, len(temperatures), size)]


def _add(
    recipe: Recipe,
    nu: FloatArray,
    lines: LinesAtTemperature,
    pressures: list[float],
    sums: list[FloatArray],
    executor: Executor | None,
) -> list[Tally]:
    """Add the spectra of lines at a temperature, by pressure; how their tiles were summed."""
    profile = recipe.profile
    nodes = [NodeSum(lines, pressure, profile.cutoff.at(pressure)) for pressure in pressures]
    limits = regions(profile.tolerance, profile.plinth)
    found: list[Tally] = []
    add_spectra(
        sums,
        nodes,
        nu,
        limits,
        profile.plinth,
        profile.chi_table,
        executor,
        done=lambda _, tally: found.append(tally),
    )
    return found


def spectra_in_memory(recipe: Recipe, source: LineSource) -> FloatArray:
    """All spectra of a recipe as its shards hold them, (n_T, n_P, n_nu) or (n_node, n_nu)."""
    grid = recipe.grid
    sigma = np.empty((len(grid.node_list()), grid.wavenumber.size))
    for unit in parted(recipe, source, ""):
        shard = compute(recipe, source, unit)
        blocks = block_slices(unit.stop - unit.start)
        for number in range(len(shard.blocks)):
            row, place = divmod(number, len(blocks))
            sigma[unit.rows[row], unit.start : unit.stop][blocks[place]] = shard.values(number)
    nodes = sigma.shape[:1] if grid.nodes is not None else (len(grid.temperature), len(grid.pressure))
    return sigma.reshape(*nodes, -1)
