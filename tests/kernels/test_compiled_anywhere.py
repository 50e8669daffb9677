"""The bits of a sum do not depend on which process compiled its kernels, nor on what else it compiled before."""

from __future__ import annotations

import os
import subprocess
import sys

PROGRAM = """
import hashlib, sys
import numpy as np
from opacity.cross_sections.compute import NodeSum, add_spectra
from opacity.cross_sections.prepare import LinesAtTemperature
from opacity.cross_sections.tolerance import regions

random = np.random.default_rng(1)
n = 300
lines = LinesAtTemperature(
    300.0, np.sort(random.uniform(2000.0, 2040.0, n)), random.normal(0.0, 1e-3, n), 10.0 ** random.uniform(-24, -19, n),
    random.uniform(0.03, 0.1, n), np.full(n, 1.2e-6),
)
nu, digest = np.linspace(2000.0, 2040.0, 40_001), {}
for cells in (True, False) if sys.argv[1] == "cells first" else (False, True):
    sigma = np.zeros(nu.size)
    add_spectra([sigma], [NodeSum(lines, 0.1, 25.0)], nu, regions(1e-3, False), cells=cells)
    digest[cells] = hashlib.sha256(sigma.tobytes()).hexdigest()
print(digest[True], digest[False])
"""


def test_compiled_here_or_there_in_any_order(tmp_path):
    def run(order: str, cache: str) -> str:
        environment = {**os.environ, "NUMBA_DISABLE_JIT": "0"}
        if cache == "a":
            environment["NUMBA_CACHE_DIR"] = str(tmp_path / cache)
        command = [sys.executable, "-c", PROGRAM, order]
        return subprocess.run(command, env=environment, capture_output=True, text=True, check=True).stdout

    compiled = run("cells first", "a")
    assert len(compiled.split()) == 2
    assert run("points first", "a") == compiled  # loaded, not compiled
    # By whoever compiled what the other tests use, in another order.
    assert run("points first", os.environ.get("NUMBA_CACHE_DIR", "")) == compiled
