"""The plan: what a build will do and need, and what a user should know before it starts."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np

from opacity.check.closure import resolution_of
from opacity.chi_factors import CHI_FACTORS
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LINES_AT_ONCE, LineSource
from opacity.cross_sections.tolerance import regions
from opacity.errors import ResourceError, problem
from opacity.molecule.partition_function import STEP, PartitionFunction, editions_differ
from opacity.pipeline.inputs import Inputs, refuse_invalid_temperatures
from opacity.pipeline.kinds import shards_of, table_name
from opacity.pipeline.needs import amount_of, needs_of, seconds_besides, workers_that_fit
from opacity.pipeline.resources import allowed_cpus, available_memory, free_disk
from opacity.pipeline.sources import DEFAULT_MEMORY
from opacity.pipeline.units import parted
from opacity.recipe.model import Recipe

AT_RISK = 0.01
LOOKED_AT = 20
HOT_FOR_296K_LIST = 700.0
EDITIONS_AGREE = 0.01


@dataclass(frozen=True)
class NodeResolution:
    """How well the step resolves the lines of one node; `at_risk` is the share of the strength in lines it does not."""

    temperature: float
    pressure: float
    at_risk: float
    narrowest_half_width: float


@dataclass(frozen=True)
class Plan:
    """What the build of a recipe's table amounts to.  Memory and disk in bytes at most, time in seconds.

    `seconds` are those of one core, `wall_seconds` what the workers take, who share the spectra alone.

    `profile_values` are the values of profiles at points that the sum stands for; of its tiles the share `by_cells`
    gets most of them eight a cell.  `predicted_error` is the largest relative error of a value.

    For k-coefficients there are `bands`, and `points` are those of a spectrum that is collapsed, in the mean of nodes.

    `others` are the plans of further tables of the same recipe.

    `obstacles` say why the build cannot fit here; it is refused then, and neither is a trial of its speed made nor are
    coarse nodes looked for.  `limited` says where it gets less than it was
    to have; being of this machine alone, it is no part of the table.
    """

    recipe: str
    table: str
    nodes: int
    points: int
    lines: int
    units: int
    lines_per_unit: int
    workers: int
    profile_values: float
    by_cells: float
    predicted_error: float
    seconds: float
    wall_seconds: float
    memory: int
    memory_per_worker: int
    memory_available: int
    disk: int
    disk_free: int | None
    obstacles: tuple[str, ...]
    limited: tuple[str, ...]
    coarse_nodes: tuple[NodeResolution, ...]
    warnings: tuple[str, ...]
    assumptions: tuple[tuple[str, int], ...]
    ledger: dict[str, Any]
    bands: int = 0
    others: tuple[Plan, ...] = ()

    def as_dict(self) -> dict[str, Any]:
        """The plan as plain values for JSON."""
        return asdict(self)


def make_plan(
    recipe: Recipe,
    inputs: Inputs,
    folder: Path,
    workers: int | None = None,
    memory: int = DEFAULT_MEMORY,
    processes: bool = False,
) -> Plan:
    """Plan a build into a folder by so many workers (None: the CPUs allowed), fewer where memory (bytes) asks for it.

    Raises RecipeError where a partition function is not valid at the grid's temperatures.
    """
    lines, grid = inputs.lines, recipe.grid
    refuse_invalid_temperatures(recipe, inputs.partition)
    node_list = grid.node_list()
    temperatures = sorted({t for t, _ in node_list})
    points, nodes = grid.wavenumber.size, len(node_list)
    units = parted(recipe, lines, inputs.sha256)
    wanted = allowed_cpus() if workers is None else workers
    available, disk_free = available_memory(), free_disk(folder)
    budget = memory if available is None else min(memory, available)
    count = max(min(wanted, workers_that_fit(recipe, lines, units, budget, processes), len(units) or 1), 1)
    needs = needs_of(recipe, lines, units, count, processes, shards_of(recipe, folder))
    limits = (("memory", needs.memory, budget), ("disk", needs.disk, disk_free))
    obstacles = tuple(
        obstacle(recipe, *one, f"{points} values") for one in limits if one[2] is not None and one[1] > one[2]
    )
    # What takes time is looked into only where the build can be.
    coarse = [] if obstacles else _coarse_nodes(recipe, lines)
    amount = amount_of(recipe, lines, trial=not obstacles)
    besides = seconds_besides(nodes, points, len(lines), amount.values / max(nodes * points, 1))
    fitted = [f"memory allows {count} of {wanted} workers"] if count < min(wanted, len(units)) else []
    return Plan(
        recipe=str(recipe.path),
        table=str(folder / table_name(recipe)),
        nodes=nodes,
        points=points,
        lines=len(lines),
        units=len(units),
        lines_per_unit=needs.lines_per_unit,
        workers=count,
        profile_values=amount.values,
        by_cells=amount.by_cells,
        predicted_error=regions(recipe.profile.tolerance, recipe.profile.plinth).predicted_error,
        seconds=amount.seconds + besides,
        wall_seconds=(amount.seconds + besides) / count,
        memory=needs.memory,
        memory_per_worker=needs.memory_per_worker,
        memory_available=budget,
        disk=needs.disk,
        disk_free=disk_free,
        obstacles=obstacles,
        limited=tuple(fitted),
        coarse_nodes=tuple(coarse),
        warnings=(*inputs.warnings, *warnings_of(recipe, inputs, coarse, temperatures)),
        assumptions=tuple((one.what, one.lines) for one in lines.assumptions),
        ledger=lines.ledger.as_dict(),
    )


def obstacle(recipe: Recipe, what: str, needed: int, free: int | None, values: str = "values") -> str:
    """Why a build does not fit into "memory" or "disk"; `needed` and `free` in bytes, `values` those of a node."""
    nodes = len(recipe.grid.node_list())
    return problem(
        recipe.path,
        f"the build does not fit in {what}",
        expected=f"at most {(free or 0) / 1e6:.4g} MB",
        found=f"{needed / 1e6:.4g} MB for {nodes} x {values}",
        remedy="allow more with --memory, or use a larger machine" if what == "memory" else "make room on the disk",
    )


def refuse_what_cannot_fit(plan: Plan) -> None:
    """Raise ResourceError where the plan has found an obstacle."""
    if plan.obstacles:
        raise ResourceError("\n".join(plan.obstacles))


def _coarse_nodes(recipe: Recipe, source: LineSource) -> list[NodeResolution]:
    """Nodes at which more than 1 % of the strength is in lines that the step does not resolve, worst first.

    Of a list too long to be held, a few stretches spread over the grid stand for all.
    """
    nu, nodes = recipe.grid.wavenumber, recipe.grid.node_list()
    sums = np.zeros((len(nodes), 2))
    narrowest = np.full(len(nodes), np.inf)
    rows: dict[float, list[int]] = {}
    for row, (temperature, _) in enumerate(nodes):
        rows.setdefault(temperature, []).append(row)
    for lines in _some_stretches(source, float(nu[0]), float(nu[-1])):
        for temperature, here in rows.items():
            columns = lines.at_temperature(temperature)
            for row in here:
                strength, unresolved, width = resolution_of(columns, nodes[row][1], nu)
                sums[row] += strength, unresolved
                narrowest[row] = min(narrowest[row], width)
    shares = sums[:, 1] / np.maximum(sums[:, 0], 1e-300)
    coarse = [
        NodeResolution(*node, float(share), float(width))
        for node, share, width in zip(nodes, shares, narrowest, strict=True)
        if share > AT_RISK
    ]
    return sorted(coarse, key=lambda one: -one.at_risk)


def _some_stretches(source: LineSource, first: float, last: float) -> Iterator[PreparedLines]:
    if len(source) <= LINES_AT_ONCE:
        yield from source.stretches()
        return
    # Windows that hold about a hundredth of what can be held at once.
    width = (last - first) * 0.01 * LINES_AT_ONCE / len(source)
    for centre in np.linspace(first, last, LOOKED_AT):
        lines = source.window(float(centre) - width, float(centre) + width)
        if len(lines):
            yield lines


def warnings_of(recipe: Recipe, inputs: Inputs, coarse: list[NodeResolution], temperatures: list[float]) -> list[str]:
    """What a user should know of a recipe's lines and choices; `temperatures` (K) rise."""
    warnings = []
    if not len(inputs.lines):
        warnings.append("no line reaches the grid: every value will be 0")
    if coarse:
        worst = coarse[0]
        share = f"{100.0 * worst.at_risk:.0f} % of the strength is in lines that it does not resolve"
        warnings.append(
            f"the step is too coarse at {len(coarse)} of {len(recipe.grid.node_list())} nodes: at"
            f" {worst.temperature:g} K, {worst.pressure:.3g} bar {share} (narrowest half-width"
            f" {worst.narrowest_half_width:.2g} cm-1); each value is right at its point, sums over points are not"
        )
    made_for_296_k = any(one.format in ("hitran", "hapi") for part in recipe.parts for one in part.line_lists)
    if made_for_296_k and temperatures and temperatures[-1] > HOT_FOR_296K_LIST:
        warnings.append(
            f"a list made for 296 K lacks hot lines, and the grid goes to {temperatures[-1]:g} K:"
            " use a high-temperature list above about 700 K"
        )
    chi = recipe.profile.chi
    if chi is not None:
        warnings.append(f"chi factors {chi}: {CHI_FACTORS[chi].source}; look the constants up before you publish")
    if chi is not None and CHI_FACTORS[chi].molecule != recipe.molecule.formula:
        made_for = CHI_FACTORS[chi].measured_for
        warnings.append(f"the chi factors {chi} are for {made_for} and are used for {recipe.molecule.formula}")
    warnings += [_rough(one) for one in inputs.partition if one.steps]
    for one in inputs.isotopologues:
        if not one.known or not any(part.partition_function.source.startswith("TIPS") for part in recipe.parts):
            continue
        worst_t = max(temperatures, key=lambda t, iso=one: abs(editions_differ(iso, t)))  # type: ignore[misc]
        difference = editions_differ(one, worst_t)
        if abs(difference) > EDITIONS_AGREE:
            warnings.append(
                f"partition function of {one.formula}: TIPS-2021 and TIPS-2025 differ by {100.0 * difference:+.1f} %"
                f" at {worst_t:g} K"
            )
    return warnings


def _rough(q: PartitionFunction) -> str:
    at = ", ".join(f"{t:g}" for t in q.steps[:6]) + (f" and {len(q.steps) - 6} more" if len(q.steps) > 6 else "")
    return (
        f"partition function {q.source} is not smooth at {at} K: a value lies more than {100.0 * STEP:g} % off the"
        " cubic through its neighbours; either it has a step or its rows are too far apart to interpolate"
    )
