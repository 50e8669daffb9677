"""How fast the sum is, as ratios measured side by side in one run; run by hand:

    python tests/bench/against_hapi.py FOLDER_OF_REAL_LINES

Same lines (12,351 of H2O), grid (3400-4900 cm-1, step 0.01) and cut-off (25 cm-1) for hapi, for the exact sum and
for ours, at 600 K and 0.1 atm; besides it the rate at which this machine divides, which bounds a sum point by point.
Then over pressures from 1e-4 to 100 bar.
Each is repeated and the best time counts, since other work on the machine only ever adds to it.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1] / "reference"))

from hapi_reference import hapi_voigt, open_in_hapi

from opacity.cross_sections.compute import spectrum
from opacity.cross_sections.exact import exact_spectrum
from opacity.cross_sections.prepare import PreparedLines, prepare
from opacity.cross_sections.tolerance import regions
from opacity.kernels.jit import jit
from opacity.line_list.read import read_lines

TEMPERATURE, PRESSURE, CUTOFF = 600.0, 0.1 * 1.01325, 25.0


def best(work: Callable[[], object], repeats: int) -> float:
    """Shortest time of several runs, s."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


@jit
def divide(out: np.ndarray, x: np.ndarray, rounds: int) -> None:
    """One division and two additions a point and round, in the loop form of the far-wing kernel."""
    for k in range(rounds):
        for i in range(x.size):
            out[i] += 1.0 / (x[i] + k)


def main(folder: Path) -> None:
    """Print the table of ratios."""
    lines = read_lines(folder / "H2O.par")
    prepared = prepare(lines, partition_function="TIPS-2021", abundance="terrestrial", broadeners={"air": 1.0})
    nu = np.linspace(3400.0, 4900.0, 150001)
    node = prepared.at(TEMPERATURE, PRESSURE)
    points = float(
        np.sum(np.searchsorted(nu, lines.wavenumber + CUTOFF) - np.searchsorted(nu, lines.wavenumber - CUTOFF))
    )
    with tempfile.TemporaryDirectory() as scratch:
        table = open_in_hapi(folder / "H2O.par", Path(scratch))
        hapi_time = best(lambda: hapi_voigt(table, nu, TEMPERATURE, PRESSURE, {"air": 1.0}, CUTOFF), 2)
        theirs = hapi_voigt(table, nu, TEMPERATURE, PRESSURE, {"air": 1.0}, CUTOFF)
    truth = exact_spectrum(node, nu, CUTOFF)
    exact_time = best(lambda: exact_spectrum(node, nu, CUTOFF), 1)
    difference = np.abs(theirs / truth - 1.0)
    print(f"{len(lines)} lines, {points:.3g} profile values")
    print(f"{'':34}{'lines/s':>10}{'hapi x':>9}{'largest error':>15}")
    print(f"{'hapi':34}{len(lines) / hapi_time:10.3g}{1.0:9.3g}{difference.max():15.1e}")
    print(f"{'exact sum (scipy wofz)':34}{len(lines) / exact_time:10.3g}{hapi_time / exact_time:9.3g}{0.0:15.1e}")
    out, x = np.zeros(4096), np.linspace(1.0, 2.0, 4096)
    divide(out, x, 1)
    divisions = 4096 * 2000 / best(lambda: divide(out, x, 2000), 5)
    for tolerance in (1e-3, 1e-5, 1e-6):
        limits = regions(tolerance)
        error = np.max(np.abs(spectrum(node, nu, CUTOFF, limits) / truth - 1.0))
        for workers in (1, 2):
            with ThreadPoolExecutor(workers) as executor:
                chosen = executor if workers > 1 else None
                seconds = best(lambda: spectrum(node, nu, CUTOFF, limits, executor=chosen), 7)  # noqa: B023
            name = f"sum, tolerance {tolerance:g}, {workers} worker{'s' * (workers > 1)}"
            share = points / seconds / divisions / workers
            print(
                f"{name:34}{len(lines) / seconds:10.3g}{hapi_time / seconds:9.3g}{error:15.1e}"
                f"   {points / seconds / 1e9:.2f} G values/s, {share:.0%} of the divider"
            )
    print(f"divider: {divisions / 1e9:.2f} G divisions/s on one core")
    over_pressures(folder, prepared, nu)


def over_pressures(folder: Path, prepared: PreparedLines, nu: np.ndarray) -> None:
    """hapi and ours with two workers, tolerance 6e-4, node by node."""
    limits = regions(6e-4)
    with tempfile.TemporaryDirectory() as scratch, ThreadPoolExecutor(2) as two:
        table = open_in_hapi(folder / "H2O.par", Path(scratch))
        for pressure in (1e-4, 1e-2, 1.0, 10.0, 100.0):
            node = prepared.at(TEMPERATURE, pressure)
            theirs = best(lambda: hapi_voigt(table, nu, TEMPERATURE, pressure, {"air": 1.0}, CUTOFF), 1)  # noqa: B023
            seconds = best(lambda: spectrum(node, nu, CUTOFF, limits, executor=two), 5)  # noqa: B023
            error = np.max(np.abs(spectrum(node, nu, CUTOFF, limits) / exact_spectrum(node, nu, CUTOFF) - 1.0))
            print(f"{pressure:g} bar: {theirs / seconds:.3g} x hapi, largest error {error:.1e}")


if __name__ == "__main__":
    main(Path(sys.argv[1]))
