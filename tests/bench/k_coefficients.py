"""k-coefficients on real lines: points needed, errors, mixing, speed; run by hand:

    python tests/bench/k_coefficients.py FOLDER_OF_REAL_LINES

H2O at 3400-4900 cm-1 and CO at 1950-2250 cm-1, 54 nodes (200-2500 K, 1e-6 to 100 bar), spectra resolved to the
narrowest line, bands of R = 100.  An error is the largest absolute error of a band's transmission over 64 columns a
node and band.
"""

from __future__ import annotations

import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np

import opacity
from opacity.k_coefficient.bands import band_points, edges_of_resolving_power
from opacity.k_coefficient.certificate import certify, fine_cell_errors, random_pairs, two_layer_error
from opacity.k_coefficient.collapse import CELL_WIDTHS, fine_cells, merge_cells
from opacity.k_coefficient.mix import mix
from opacity.k_coefficient.optimise import (
    Rows,
    choose_g_points,
    joined,
    optimise_weights,
    rows_by_band,
    rows_of,
    training_nodes,
)
from opacity.k_coefficient.quadrature import QUADRATURES, GPoints, g_points, k_from_cells
from opacity.k_coefficient.transmission import columns_of, transmission

TEMPERATURES = [200.0, 300.0, 500.0, 800.0, 1300.0, 2500.0]
PRESSURES = np.geomspace(1e-6, 100.0, 9)
PRESSURE = np.tile(PRESSURES, len(TEMPERATURES))
TEMPERATURE = np.repeat(TEMPERATURES, PRESSURES.size)
TARGETS = (1e-2, 3e-3, 1e-3)
SPECIES = {"H2O": (3400.0, 4900.0, 0.002), "CO": (1950.0, 2250.0, 0.001)}


def best(work, repeats: int = 5) -> float:
    """Shortest time of several runs, s."""
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def rates() -> None:
    """Points a second to fine cells, beside numpy's sort of the same bands alone."""
    random = np.random.default_rng(0)
    nu = np.linspace(2000.0, 12000.0, 1_000_001)
    sigma = 10.0 ** (-22.0 + 3.0 * np.sin(3.0 * nu) + random.normal(size=nu.size))
    spectra = np.array([sigma] * 4)
    edges = edges_of_resolving_power(2000.0, 12000.0, 100.0)
    points = band_points(nu, edges)
    one = best(lambda: fine_cells(spectra, nu, edges))
    with ThreadPoolExecutor(2) as executor:
        two = best(lambda: fine_cells(spectra, nu, edges, executor))
    parts = list(zip(points.first, points.last, strict=True))
    plain = best(lambda: [np.sort(sigma[a:b]) for a, b in parts])
    print(
        f"fine cells, R = 100, 1e6 points, 4 spectra: {spectra.size / one / 1e6:.0f} M points/s with 1 worker,"
        f" {spectra.size / two / 1e6:.0f} with 2; numpy's sort alone {nu.size / plain / 1e6:.0f}"
    )


def largest(rows: Rows, points: GPoints) -> float:
    """Largest error of transmission."""
    return float(np.max(np.abs(rows.errors(points))))


def fewest(error, target: float, start: int = 2, most: int = 140) -> str:
    """The fewest points from which the error is within the target, looked for upwards."""
    count = start
    while count <= most:
        if error(count) <= target:
            return str(count)
        count += 1
    return "-"


def points_needed(name: str, rows: Rows) -> None:
    """The table of points needed for each target, and the errors at 16 points."""
    mean = rows.cells @ CELL_WIDTHS
    for quadrature in QUADRATURES:
        points = g_points(16, quadrature)
        off = np.max(np.abs(k_from_cells(rows.cells[None], points)[0] @ points.weights / mean - 1.0))
        needed = [fewest(lambda n: largest(rows, g_points(n, quadrature)), target) for target in TARGETS]  # noqa: B023
        print(
            f"{name} {quadrature:16} {' / '.join(needed):16} at 16: {largest(rows, points):.1e}, mean off by {off:.0e}"
        )
    # Looked for upwards from where there are surely too few.
    starts = {"H2O": (9, 13, 22), "CO": (5, 12, 22)}[name]
    needed = [
        fewest(lambda n: optimise_weights(rows, n).error, target, start)
        for target, start in zip(TARGETS, starts, strict=True)
    ]
    start = time.perf_counter()
    at_16 = optimise_weights(rows, 16)
    seconds = time.perf_counter() - start
    print(f"{name} matched, fitted  {' / '.join(needed):16} at 16: {at_16.error:.1e} in {seconds:.0f} s", flush=True)


def per_band(name: str, cells: np.ndarray) -> None:
    """The same with weights of each band's own: the largest of all bands."""
    rows = rows_by_band(cells, PRESSURE)
    for count in (9, 13):
        print(f"{name} weights per band, {count}: {max(optimise_weights(one, count).error for one in rows):.1e}")


def chosen(name: str, cells: np.ndarray, everything: Rows) -> None:
    """Points chosen for a target from a third of the nodes, and how far the other nodes are worse."""
    nodes = training_nodes(TEMPERATURE, PRESSURE, 18, seed=1)
    training = rows_of(cells[nodes], PRESSURE[nodes])
    for target in (2e-2, 5e-3):
        start = time.perf_counter()
        found = choose_g_points(target, training, everything, seed=1)
        print(
            f"{name} chosen for {target:g}: {found.points.count} points, trained {found.trained_error:.1e} on"
            f" {found.trained_rows} rows, all {found.error:.1e}, {time.perf_counter() - start:.0f} s",
            flush=True,
        )


def spectra_errors(name: str, sigma: np.ndarray, nu: np.ndarray, edges: np.ndarray, cells: np.ndarray) -> None:
    """Fine cells against spectra, halves of bands merged, two layers, the certificate at 16 points."""
    points = band_points(nu, edges)
    some = np.arange(0, 54, 5)
    fine = fine_cell_errors(cells[some], sigma[some], points, PRESSURE[some])
    middles = np.sort(np.concatenate([edges, 0.5 * (edges[1:] + edges[:-1])]))
    halves, widths = fine_cells(sigma[some], nu, middles), np.diff(middles)
    bands = range(edges.size - 1)
    merged = np.stack(
        [merge_cells([halves[:, 2 * b], halves[:, 2 * b + 1]], widths[2 * b : 2 * b + 2]) for b in bands], 1
    )
    again = fine_cell_errors(merged, sigma[some], points, PRESSURE[some])
    print(f"{name} fine cells: {max(fine):.1e}; merged of two halves: {max(again):.1e}", flush=True)
    optimised = optimise_weights(rows_of(cells, PRESSURE), 16).points
    k = k_from_cells(cells, optimised)
    pairs = random_pairs(len(cells), 12, seed=1)
    layers = two_layer_error(k, optimised.weights, cells, sigma, points, PRESSURE, pairs)
    found = certify(k, optimised.weights, cells, PRESSURE)
    p99, mean = max(band.p99 for band in found.bands), max(abs(band.mean) for band in found.bands)
    print(
        f"{name} two layers: {layers.largest:.1e} (p99 {layers.p99:.1e}); p99 of one {p99:.1e}, mean off by {mean:.0e}"
    )


def mixing(cells: dict[str, np.ndarray], rows: dict[str, Rows]) -> None:
    """H2O with CO at 16 points, bands paired by number, against the product of the fine cells' transmissions."""
    count = cells["CO"].shape[1]
    water, monoxide = cells["H2O"][:, :count], cells["CO"]
    pressure = np.repeat(PRESSURE, count)
    fitted = optimise_weights(joined(list(rows.values())), 16).points
    for name, points in {"matched, fitted": fitted, **{q: g_points(16, q) for q in QUADRATURES}}.items():
        errors, alone = [], []
        for shares in ((0.5, 0.5), (0.9, 0.1), (0.1, 0.9), (0.99, 0.01), (0.01, 0.99)):
            k = [k_from_cells(one, points) for one in (water, monoxide)]
            mixed = mix(k, shares, points).reshape(-1, 16)
            flat = [x * one.reshape(-1, 398) for x, one in zip(shares, (water, monoxide), strict=True)]
            columns = np.concatenate([columns_of(one, pressure) for one in flat], axis=1)
            truth = np.prod([transmission(one, CELL_WIDTHS, columns) for one in flat], axis=0)
            parts = [
                transmission(x * one.reshape(-1, 16), points.weights, columns) for x, one in zip(shares, k, strict=True)
            ]
            found = transmission(mixed, points.weights, columns)
            errors.append(np.max(np.abs(found - truth)))
            alone.append(np.max(np.abs(found - parts[0] * parts[1])))
        print(f"H2O + CO, 16 points, {name:16}: {max(errors):.1e}; rebinning alone {max(alone):.1e}", flush=True)


def main(folder: Path) -> None:
    """All measurements."""
    rates()
    cells, rows = {}, {}
    for name, (start, stop, step) in SPECIES.items():
        nu = start + step * np.arange(round((stop - start) / step) + 1)
        sigma = opacity.cross_section(
            opacity.read_lines(folder / f"{name}.par"),
            wavenumber=nu,
            temperature=TEMPERATURES,
            pressure=PRESSURES,
            broadeners={"air": 1.0},
            cutoff=25.0,
            workers=2,
        ).reshape(-1, nu.size)
        edges = edges_of_resolving_power(start, nu[-1], 100.0)
        cells[name] = fine_cells(sigma, nu, edges)
        rows[name] = rows_of(cells[name], PRESSURE)
        spectra_errors(name, sigma, nu, edges, cells[name])
        points_needed(name, rows[name])
        per_band(name, cells[name])
        chosen(name, cells[name], rows[name])
    mixing(cells, rows)


if __name__ == "__main__":
    main(Path(sys.argv[1]))
