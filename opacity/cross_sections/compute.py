"""Cross-sections by the kernels: tiles of the grid side by side in threads.

A tile is a fixed stretch of the grid and is always summed line by line in the same order, so the
result has the same bits for any number of workers.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from concurrent.futures import Executor

import numpy as np

from opacity.cross_sections.prepare import NodeLines
from opacity.cross_sections.tolerance import Regions
from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.kernels.accumulate import add_lines

TILE = 4096
SMALLEST_Y = 1e-30

_SQRT_LN2 = math.sqrt(math.log(2.0))


def spectrum(
    node: NodeLines,
    wavenumber: FloatArray,
    cutoff: float,
    regions: Regions,
    plinth: bool = False,
    executor: Executor | None = None,
) -> FloatArray:
    """Cross-section (cm2/molecule) at each wavenumber, (n_nu,), within the tolerance of `regions`.

    `wavenumber` rises and is contiguous; the lines of `node` are sorted by unshifted wavenumber.
    With an executor of threads the tiles are computed side by side.
    """
    sigma = np.zeros(wavenumber.size)
    scale = _SQRT_LN2 / node.doppler
    y = node.lorentz * scale
    if y.size and not (y.min() >= SMALLEST_Y and np.all(np.isfinite(y))):
        raise InputError(
            problem(
                f"node {node.temperature:g} K, {node.pressure:g} bar",
                "pressure width out of range",
                expected=f"pressure over Doppler width of {SMALLEST_Y:g} or more",
                found=f"{y.min():g}",
            )
        )
    amplitude = node.strength * scale / math.sqrt(math.pi)

    def add(tile: slice) -> None:
        nu = wavenumber[tile]
        # A little wider than the cut-off: the kernel decides point by point.
        margin = cutoff * (1.0 + 1e-12) + 1e-9 * (1.0 + nu[-1])
        first, last = np.searchsorted(node.wavenumber, (nu[0] - margin, nu[-1] + margin))
        add_lines(
            sigma[tile], nu, first, last, node.wavenumber, node.centre, scale, y, amplitude, cutoff, plinth,
            regions.tolerance, regions.near_radius, regions.far_radius,
        )  # fmt: skip

    if executor is None:
        for tile in tiles(wavenumber.size):
            add(tile)
    else:
        for _ in executor.map(add, tiles(wavenumber.size)):
            pass
    return sigma


def tiles(n_points: int) -> Iterator[slice]:
    """The fixed tiles of a grid."""
    for start in range(0, n_points, TILE):
        yield slice(start, min(start + TILE, n_points))
