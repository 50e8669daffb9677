"""The two ways of summing side by side, as ratios measured in one run; run by hand:

    python tests/bench/engine.py FOLDER_OF_REAL_LINES

By cells against point by point on real lines of H2O: over cut-offs, pressures and grids even in log; with 1 and 2
workers; then a generated list of 10^6 lines on 10^6 points, what of a node's time is the making of line columns, and
the account of a node's lines beside their sum.
Each is repeated and the best time counts, since other work on the machine only ever adds to it.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np

from opacity.check.closure import closure_sums
from opacity.cross_sections.compute import NodeSum, add_spectra
from opacity.cross_sections.exact import exact_at
from opacity.cross_sections.prepare import LinesAtTemperature, PreparedLines, prepare
from opacity.cross_sections.tolerance import regions
from opacity.line_list.read import read_lines

TEMPERATURE = 600.0


def best(work: Callable[[], object], repeats: int = 5) -> float:
    """Shortest time of several runs, s."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def timed(
    lines: LinesAtTemperature, nu: np.ndarray, pressure: float, cutoff: float, tolerance: float, repeats: int = 5
) -> dict[str, float]:
    """Seconds by cells and by points with one worker, and as chosen with one and two."""
    sigma, node, limits = np.zeros(nu.size), [NodeSum(lines, pressure, cutoff)], regions(tolerance)
    found = {}
    with ThreadPoolExecutor(2) as two:
        for name, cells, executor in (
            ("cells", True, None),
            ("points", False, None),
            ("one", None, None),
            ("two", None, two),
        ):
            found[name] = best(lambda: add_spectra([sigma], node, nu, limits, False, None, executor, cells), repeats)  # noqa: B023
    return found


def show(name: str, lines: int, found: dict[str, float]) -> None:
    """A row of the table."""
    per = {key: value / lines * 1e9 for key, value in found.items()}
    print(
        f"{name:40}{per['cells']:9.0f}{per['points']:9.0f}{found['points'] / found['cells']:8.2f}x"
        f"{per['one']:9.0f}{per['two']:9.0f}{found['one'] / found['two']:8.2f}x",
        flush=True,
    )


def real_lines(prepared: PreparedLines) -> None:
    """Over cut-offs, pressures and tolerances."""
    nu = np.linspace(3400.0, 4900.0, 150001)
    even_in_log = np.geomspace(3400.0, 4900.0, 150001)
    lines = prepared.at_temperature(TEMPERATURE)
    for cutoff in (1.0, 5.0, 25.0, 100.0, 300.0):
        show(f"cut-off {cutoff:g}", len(prepared), timed(lines, nu, 0.1, cutoff, 1e-3))
    for tolerance in (1e-2, 1e-3, 1e-4, 1e-5, 1e-6):
        show(f"tolerance {tolerance:g}", len(prepared), timed(lines, nu, 0.1, 25.0, tolerance))
    for pressure in (1e-4, 1e-2, 1.0, 10.0, 100.0):
        show(f"{pressure:g} bar", len(prepared), timed(lines, nu, pressure, 25.0, 1e-3))
    show("points even in log", len(prepared), timed(lines, even_in_log, 0.1, 25.0, 1e-3))


def generated_lines(n_lines: int, n_points: int) -> None:
    """Lines spread evenly, widths about those of water, all made up."""
    rng = np.random.default_rng(1)
    nu = 1000.0 + 0.01 * np.arange(n_points)
    place = np.sort(rng.uniform(nu[0], nu[-1], n_lines))
    lines = LinesAtTemperature(
        TEMPERATURE,
        place,
        np.full(n_lines, -0.003),
        10.0 ** rng.uniform(-32.0, -21.0, n_lines),
        rng.uniform(0.03, 0.1, n_lines),
        np.full(n_lines, 2e-6),
    )
    for pressure in (1e-3, 0.1, 10.0):
        show(
            f"{n_lines:.0e} lines, {n_points:.0e} points, {pressure:g} bar",
            n_lines,
            timed(lines, nu, pressure, 25.0, 1e-3, 2),
        )
    sigma = np.zeros(n_points)
    add_spectra([sigma], [NodeSum(lines, 0.1, 25.0)], nu, regions(1e-3))
    at = rng.integers(0, n_points, 200)
    node = lines.at(0.1)
    print(f"largest error at 200 points: {np.max(np.abs(sigma[at] / exact_at(node, nu[at], 25.0) - 1.0)):.1e}")


def setup(prepared: PreparedLines) -> None:
    """What of a node's time goes into the columns of its lines, with 10 pressures a temperature."""
    temperatures = [300.0, 600.0, 1000.0, 1500.0]
    nu = np.linspace(3400.0, 4900.0, 150001)
    strengths = best(lambda: prepared.strengths_at(temperatures)) / len(temperatures)
    strength = prepared.strengths(TEMPERATURE)
    columns = best(lambda: prepared.at_temperature(TEMPERATURE, strength))
    node = timed(prepared.at_temperature(TEMPERATURE), nu, 0.1, 25.0, 1e-3)["one"]
    print(
        f"a temperature's strengths {strengths * 1e3:.2f} ms and columns {columns * 1e3:.2f} ms, a node's sum"
        f" {node * 1e3:.1f} ms: {(strengths + columns) / node:.1%} of a node at one pressure,"
        f" {(strengths + columns) / (10 * node):.1%} at ten"
    )


def closure(prepared: PreparedLines) -> None:
    """A node's account beside its sum, ns a line, at pressures that do and do not resolve the lines."""
    nu, lines = np.linspace(3400.0, 4900.0, 150001), prepared.at_temperature(TEMPERATURE)
    for pressure in (1e-4, 0.1, 10.0):
        account = best(lambda: closure_sums(lines, pressure, nu, 25.0, False, True))  # noqa: B023
        node = timed(lines, nu, pressure, 25.0, 1e-3)["one"]
        per_line = 1e9 / len(prepared)
        print(f"closure at {pressure:g} bar: {account * per_line:.0f} ns a line, its sum {node * per_line:.0f}")


if __name__ == "__main__":
    water = read_lines(Path(sys.argv[1]) / "H2O.par")
    made = prepare(water, partition_function="TIPS-2021", abundance="terrestrial", broadeners={"air": 1.0})
    print(f"{'ns a line':40}{'cells':>9}{'points':>9}{'ratio':>9}{'chosen':>9}{'2 work.':>9}{'ratio':>9}")
    real_lines(made)
    generated_lines(1_000_000, 1_000_000)
    setup(made)
    closure(made)
