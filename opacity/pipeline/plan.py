"""The plan: what a build will do and need, and what a user should know before it starts."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np

from opacity.check.closure import resolution_of
from opacity.chi_factors import CHI_FACTORS
from opacity.cross_sections.planner import Prediction, predict
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LINES_AT_ONCE, LineSource
from opacity.cross_sections.tolerance import regions
from opacity.errors import ResourceError, problem
from opacity.molecule.partition_function import STEP, PartitionFunction, editions_differ
from opacity.pipeline.inputs import Inputs, refuse_invalid_temperatures
from opacity.pipeline.resources import available_memory, free_disk
from opacity.recipe.model import Recipe

# For the estimates of time and memory only; measured (DEVELOPERS.md).
VALUES_STORED_PER_SECOND = 5e6
"""Values that are compressed, hashed, written and read back in a second."""
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
BYTES_A_VALUE = 8
"""A value in memory and, where four bytes cannot hold the table's range, on disk."""
IMAGE_COPIES = 2
"""The table's image, and as much again while it is handed over."""
PROGRAM_BYTES = 400_000_000

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
    """What a build of a recipe amounts to.  Memory and disk in bytes at most, time in seconds on one core.

    `profile_values` are the values of profiles at points that the sum stands for; of its tiles the share `by_cells`
    gets most of them eight a cell.  `predicted_error` is the largest relative error of a value.

    `obstacles` say why the build cannot fit here; it is refused then.
    """

    recipe: str
    table: str
    nodes: int
    points: int
    lines: int
    profile_values: float
    by_cells: float
    predicted_error: float
    seconds: float
    memory: int
    memory_available: int | None
    disk: int
    disk_free: int | None
    obstacles: tuple[str, ...]
    coarse_nodes: tuple[NodeResolution, ...]
    warnings: tuple[str, ...]
    assumptions: tuple[tuple[str, int], ...]
    ledger: dict[str, Any]

    def as_dict(self) -> dict[str, Any]:
        """The plan as plain values for JSON."""
        return asdict(self)


def make_plan(recipe: Recipe, inputs: Inputs, folder: Path) -> Plan:
    """Plan a build into a folder.

    Raises RecipeError where a partition function is not valid at the grid's temperatures.
    """
    lines, grid = inputs.lines, recipe.grid
    refuse_invalid_temperatures(recipe, inputs.partition)
    node_list = grid.node_list()
    temperatures = sorted({t for t, _ in node_list})
    points, nodes = grid.wavenumber.size, len(node_list)
    coarse = _coarse_nodes(recipe, lines)
    values, sums, cells = _summation(recipe, lines)
    limits = regions(recipe.profile.tolerance, recipe.profile.plinth)
    table_bytes = nodes * points * BYTES_A_VALUE
    memory = table_bytes * (1 + IMAGE_COPIES) + min(lines.ledger.read, LINES_AT_ONCE) * BYTES_A_RECORD + PROGRAM_BYTES
    disk = table_bytes + 1_000_000
    memory_available, disk_free = available_memory(), free_disk(folder)
    needs = (("memory", memory, memory_available), ("disk", disk, disk_free))
    return Plan(
        recipe=str(recipe.path),
        table=str(folder / table_name(recipe)),
        nodes=nodes,
        points=points,
        lines=len(lines),
        profile_values=values,
        by_cells=cells,
        predicted_error=limits.predicted_error,
        seconds=sums + _seconds(nodes, points, len(lines), values / (nodes * points)),
        memory=memory,
        memory_available=memory_available,
        disk=disk,
        disk_free=disk_free,
        obstacles=tuple(_obstacle(recipe, *need) for need in needs if need[2] is not None and need[1] > need[2]),
        coarse_nodes=tuple(coarse),
        warnings=(*inputs.warnings, *_warnings(recipe, inputs, coarse, temperatures)),
        assumptions=tuple((one.what, one.lines) for one in lines.assumptions),
        ledger=lines.ledger.as_dict(),
    )


def _seconds(nodes: int, points: int, lines: int, in_reach: float) -> float:
    """Time of checks and writing on one core; `in_reach` lines reach a point."""
    one_audit = AUDIT_SECONDS + POINTS_AUDITED * in_reach / EXACT_PROFILES_PER_SECOND
    checks = nodes * lines / LINES_CHECKED_PER_SECOND + min(nodes, MOST_AUDITED) * one_audit
    return nodes * points / VALUES_STORED_PER_SECOND + checks


def table_name(recipe: Recipe) -> str:
    """File name of a recipe's cross-section table."""
    return f"{recipe.name}.cross-section.h5"


def _obstacle(recipe: Recipe, what: str, needed: int, free: int | None) -> str:
    nodes, points = len(recipe.grid.node_list()), recipe.grid.wavenumber.size
    return problem(
        recipe.path,
        f"the build does not fit in {what}",
        expected=f"at most {(free or 0) / 1e6:.4g} MB",
        found=f"{needed / 1e6:.4g} MB for {nodes} x {points} values",
        remedy="use fewer nodes, fewer points or a larger machine",
    )


def refuse_what_cannot_fit(plan: Plan) -> None:
    """Raise ResourceError where the plan has found an obstacle."""
    if plan.obstacles:
        raise ResourceError("\n".join(plan.obstacles))


def _summation(recipe: Recipe, source: LineSource) -> tuple[float, float, float]:
    """Profile values that the spectra stand for, seconds on one core, and the share of tiles summed by cells."""
    nu = recipe.grid.wavenumber
    places = source.sample()
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
    return values, seconds, cells / max(tiles, 1)


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


def _warnings(recipe: Recipe, inputs: Inputs, coarse: list[NodeResolution], temperatures: list[float]) -> list[str]:
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
    made_for_296_k = any(one.format in ("hitran", "hapi") for one in recipe.line_lists)
    if made_for_296_k and temperatures and temperatures[-1] > HOT_FOR_296K_LIST:
        warnings.append(
            f"a list made for 296 K lacks hot lines, and the grid goes to {temperatures[-1]:g} K:"
            " use a high-temperature list above about 700 K"
        )
    chi = recipe.profile.chi
    if chi is not None and CHI_FACTORS[chi].molecule != recipe.molecule.formula:
        made_for = CHI_FACTORS[chi].measured_for
        warnings.append(f"the chi factors {chi} are for {made_for} and are used for {recipe.molecule.formula}")
    warnings += [_rough(one) for one in inputs.partition if one.steps]
    for one in inputs.isotopologues:
        if not recipe.partition_function.source.startswith("TIPS") or not one.known:
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
