"""What the machinery of a build costs beside its sums, and how builds scale; run by hand:

    python tests/bench/builds.py FOLDER_OF_REAL_LINES

A build of 200 nodes of real H2O (3400-4900 cm-1, step 0.01 cm-1, cut-off 25 cm-1): the time of its sums, of making
shards (packing, hashing, writing), of assembly (reading, writing, reading back) and of the checks, with one worker;
then spectra and shards with 1 and 2 workers, threads and processes, and the peak of memory against the budget.
"""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

RECIPE = """\
[molecule]
name = "water"
formula = "H2O"
[[line_list]]
format = "hitran"
files = ["{lines}/H2O.par"]
reference = "HITRAN, Gordon et al. 2022"
[isotopologues]
abundance = "terrestrial"
[partition_function]
source = "TIPS-2021"
[broadening]
mixture = {{ air = 1.0 }}
[profile]
cutoff = 25.0
tolerance = 1e-3
[grid]
wavenumber = {{ start = 3400.0, stop = 4900.0, step = 0.01 }}
temperature = {{ start = 300.0, stop = 2200.0, count = 20, spacing = "linear" }}
pressure = {{ start = 1e-4, stop = 10.0, count = 10, spacing = "log" }}
[cross_section]
"""


def stages(recipe_path: Path, folder: Path) -> None:
    """Seconds of each stage with one worker."""
    from opacity.pipeline import build as build_module
    from opacity.pipeline import units as units_module
    from opacity.pipeline.build import Crew, build_table
    from opacity.recipe.load import load_recipe

    spent: dict[str, float] = {}

    def timed(name: str, module: object, function: str) -> None:
        real = getattr(module, function)

        def run(*given: object, **named: object) -> object:
            started = time.perf_counter()
            try:
                return real(*given, **named)
            finally:
                spent[name] = spent.get(name, 0.0) + time.perf_counter() - started

        setattr(module, function, run)

    timed("sums", units_module, "add_spectra")
    timed("packing and hashing", units_module, "make_shard")
    timed("units", build_module, "in_threads")
    timed("checks", build_module, "run_checks")
    timed("assembly and checks", build_module, "assemble_table")
    started = time.perf_counter()
    build_table(load_recipe(recipe_path), folder, crew=Crew(1), quiet=True)
    whole = time.perf_counter() - started
    assembly = spent["assembly and checks"] - spent["checks"]
    shards = spent["units"] - spent["sums"]
    print(f"sums {spent['sums']:.2f} s; shards {shards:.2f} s (packing {spent['packing and hashing']:.2f} s);")
    print(f"assembly {assembly:.2f} s; checks {spent['checks']:.2f} s; whole build {whole:.2f} s")
    print(f"machinery (shards and assembly) is {(shards + assembly) / (whole - spent['checks']):.0%} of all but checks")


def one_build(recipe: Path, folder: Path, workers: int, kind: str, memory: int) -> None:
    """Spectra and shards alone, for another process to time."""
    from opacity.pipeline import build as build_module
    from opacity.pipeline.build import Crew, build_table
    from opacity.recipe.load import load_recipe

    def measured(job: object, units: object, crew: object) -> None:
        started = time.perf_counter()
        real(job, units, crew)
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
        print(f"{time.perf_counter() - started:.3f} {peak / 1e9:.3f}", flush=True)
        raise SystemExit

    real = build_module._compute
    build_module._compute = measured
    build_table(load_recipe(recipe), folder, crew=Crew(workers, kind), memory=memory, quiet=True)


def main(lines: Path) -> None:
    """Print both tables."""
    with tempfile.TemporaryDirectory() as scratch:
        recipe = Path(scratch) / "water.toml"
        recipe.write_text(RECIPE.format(lines=lines.absolute()), encoding="utf-8")
        stages(recipe, Path(scratch) / "stages")
        for kind in ("threads", "processes"):
            found = {}
            for workers in (1, 2, 1, 2):
                with tempfile.TemporaryDirectory() as folder:
                    words = [str(recipe), folder, str(workers), kind, "2000000000"]
                    run = subprocess.run(
                        [sys.executable, __file__, "--one", *words], capture_output=True, text=True, check=True
                    )
                    seconds, peak = (float(word) for word in run.stdout.split())
                    found[workers] = min(found.get(workers, (1e9, 0.0)), (seconds, peak))
            (one, _), (two, peak) = found[1], found[2]
            print(
                f"{kind}: {one:.2f} s with 1 worker, {two:.2f} s with 2: {one / two:.2f} x; peak {peak:.2f} GB of 2 GB"
            )


if __name__ == "__main__":
    if sys.argv[1] == "--one":
        one_build(Path(sys.argv[2]), Path(sys.argv[3]), int(sys.argv[4]), sys.argv[5], int(sys.argv[6]))
    else:
        main(Path(sys.argv[1]))
