"""The sum at every tolerance on real lines over the whole range of temperatures, pressures, steps and cut-offs.

Extracts of HITRAN (Gordon et al. 2022, JQSRT 277, 107949) in the folder named by OPACITY_REAL_LINES; the project ships
none of them.
"""

from __future__ import annotations

import os
from pathlib import Path

import numpy as np
import pytest

import opacity
from opacity.cross_sections.compute import spectrum
from opacity.cross_sections.exact import exact_at
from opacity.cross_sections.prepare import PreparedLines, prepare
from opacity.cross_sections.tolerance import regions

FOLDER = os.environ.get("OPACITY_REAL_LINES", "")
pytestmark = [
    pytest.mark.real_lines,
    pytest.mark.skipif(not FOLDER, reason="OPACITY_REAL_LINES names no folder of real lines"),
]
TOLERANCES = (1e-2, 3e-3, 1e-3, 3e-4, 1e-4, 3e-5, 1e-5, 3e-6, 1e-6)
TEMPERATURES = (70.0, 296.0, 1000.0, 3500.0)
PRESSURES = (1e-8, 1e-4, 0.1, 10.0, 1e3)
STEPS_AND_CUTOFFS = ((1e-4, 0.1), (1e-3, 5.0), (0.01, 25.0), (0.01, 300.0), (0.1, 100.0), (1.0, 500.0))
SPANS = {"CO.par": (1900.0, 2300.0), "H2O.par": (3400.0, 4900.0)}


@pytest.fixture(scope="module", params=sorted(SPANS))
def lines(request: pytest.FixtureRequest) -> tuple[str, PreparedLines]:
    found = opacity.read_lines(Path(FOLDER) / request.param)
    choice = {"partition_function": "TIPS-2021", "abundance": "terrestrial", "broadeners": {"air": 1.0}}
    return request.param, prepare(found, **choice)


@pytest.mark.parametrize("tolerance", TOLERANCES)
def test_the_tolerance_holds_at_every_node(lines: tuple[str, PreparedLines], tolerance: float) -> None:
    """By cells, point by point, and as the planner chooses: points at random, at line centres and beside cut-offs."""
    name, prepared = lines
    rng = np.random.default_rng(int(1e7 * tolerance))
    limits = regions(tolerance)
    worst = {True: 0.0, False: 0.0}
    for temperature in TEMPERATURES:
        for pressure in PRESSURES:
            step, cutoff = STEPS_AND_CUTOFFS[int(rng.integers(len(STEPS_AND_CUTOFFS)))]
            start = rng.uniform(*SPANS[name])
            nu = start + step * np.arange(min(round((SPANS[name][1] - SPANS[name][0]) / step), 8000))
            node = prepared.at(temperature, pressure)
            near = node.wavenumber[np.abs(node.wavenumber - nu[nu.size // 2]) < cutoff + nu[-1] - nu[0]]
            places = near[rng.integers(0, near.size, 30)] if near.size else nu[:1]
            index = [
                np.searchsorted(nu, places + offset) - side for offset in (0.0, cutoff, -cutoff) for side in (0, 1)
            ]
            index = np.unique(np.clip(np.concatenate([*index, rng.integers(0, nu.size, 60)]), 0, nu.size - 1))
            truth = exact_at(node, nu[index], cutoff)
            for cells in worst:
                found = spectrum(node, nu, cutoff, limits, cells=cells)
                assert np.all(found >= 0.0)
                assert np.array_equal(found[index] > 0.0, truth > 0.0)
                positive = truth > 1e-300
                error = np.abs(found[index][positive] / truth[positive] - 1.0)
                worst[cells] = max(worst[cells], float(np.max(error, initial=0.0)) / tolerance)
    print(f"{name}, tolerance {tolerance:g}: by cells {worst[True]:.2f} of it, point by point {worst[False]:.2f}")
    assert max(worst.values()) <= 1.0
