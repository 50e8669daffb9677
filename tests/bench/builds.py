"""What the machinery of a build costs beside its sums, and how builds scale; run by hand:

    python tests/bench/builds.py FOLDER_OF_REAL_LINES

A build of 200 nodes of real H2O (3400-4900 cm-1, step 0.01 cm-1, cut-off 25 cm-1): the time of its sums, of what is
made of the lines for them, of making shards (packing, hashing, writing), of assembly (reading, writing, reading back)
and of the checks, with one worker; then the same for 10 nodes of a million lines, the real ones at random places.
Machinery is shards and assembly, as a share of all but the checks.

Then spectra and shards with 1 and 2 workers, threads and processes: the same work for both, and twice the nodes for
two (the work of a worker staying the same), the start of processes apart; and the peak of memory against the budget.
"""

from __future__ import annotations

import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

RECIPE = """\
[molecule]
name = "water"
formula = "H2O"
[[line_list]]
format = "hitran"
files = ["{lines}"]
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
temperature = {{ start = 300.0, stop = 2200.0, count = {temperatures}, spacing = "linear" }}
pressure = {{ start = 1e-4, stop = 10.0, count = 10, spacing = "log" }}
[cross_section]
"""
MEMORY = 2_000_000_000
MILLION = 1_000_000


def write_recipe(folder: Path, name: str, lines: Path, temperatures: int) -> Path:
    """A recipe of so many temperatures and ten pressures."""
    path = folder / f"{name}.toml"
    path.write_text(RECIPE.format(lines=lines.absolute(), temperatures=temperatures), encoding="utf-8")
    return path


def write_million(real: Path, path: Path) -> None:
    """A million records: the real ones over and over, at random places."""
    records = np.array([line for line in real.read_bytes().splitlines() if len(line) == 160], dtype="S160")
    rng = np.random.default_rng(1)
    columns = records[rng.integers(0, records.size, MILLION)].view(np.uint8).reshape(MILLION, 160)
    places = np.char.mod(b"%12.6f", np.sort(rng.uniform(3376.0, 4924.0, MILLION)))
    columns[:, 3:15] = places.astype("S12").view(np.uint8).reshape(MILLION, 12)
    with open(path, "wb") as stream:
        stream.write(np.hstack([columns, np.full((MILLION, 1), ord("\n"), np.uint8)]).tobytes())


def stages(title: str, recipe_path: Path, folder: Path) -> None:
    """Seconds of each stage with one worker, by the clock and of the processor."""
    from opacity.cross_sections.prepare import PreparedLines
    from opacity.cross_sections.source import StoredLines
    from opacity.pipeline import build as build_module
    from opacity.pipeline import units as units_module
    from opacity.pipeline.build import Crew, build_table
    from opacity.recipe.load import load_recipe

    spent: dict[str, np.ndarray] = {}
    under_way: list[str] = []

    def now() -> np.ndarray:
        return np.array([time.perf_counter(), time.process_time()])

    def timed(name: str, place: object, function: str) -> Callable[[], None]:
        real = getattr(place, function)

        def run(*given: object, **named: object) -> object:
            under_way.append(name)
            started = now()
            try:
                return real(*given, **named)
            finally:
                under_way.pop()
                # Plan and checks look at lines as well.
                if name != "lines" or "units" in under_way:
                    spent[name] = spent.get(name, np.zeros(2)) + now() - started

        setattr(place, function, run)
        return lambda: setattr(place, function, real)

    timers = [
        timed("sums", units_module, "add_spectra"),
        timed("lines", PreparedLines, "strengths_at"),
        timed("lines", PreparedLines, "at_temperature"),
        timed("lines", StoredLines, "window"),
        timed("packing", units_module, "make_shard"),
        timed("units", build_module, "in_threads"),
        timed("checks", build_module, "run_checks"),
        timed("checks", build_module, "stated_uncertainty"),
        timed("assembly", build_module, "assemble_table"),
    ]
    try:
        started = now()
        made = build_table(load_recipe(recipe_path), folder, crew=Crew(1), quiet=True)
        whole = now() - started
    finally:
        for undo in reversed(timers):
            undo()
    shards = spent["units"] - spent["sums"] - spent["lines"]
    assembly = spent["assembly"] - spent["checks"]
    print(f"{title}: {made.table.stat().st_size / 1e6:.1f} MB")
    for number, clock in enumerate(("clock", "processor")):
        parts = {**spent, "shards": shards, "assembly": assembly, "whole": whole}
        words = ", ".join(
            f"{name} {parts[name][number]:.2f} s"
            for name in ("sums", "lines", "shards", "packing", "assembly", "checks", "whole")
        )
        share = (shards + assembly)[number] / (whole - spent["checks"])[number]
        print(f"  {clock}: {words}; machinery {share:.1%} of all but checks", flush=True)


def one_build(recipe: Path, folder: Path, workers: int, kind: str) -> None:
    """Spectra and shards alone, for another process to time."""
    from opacity.pipeline import build as build_module
    from opacity.pipeline import workers as workers_module
    from opacity.pipeline.build import Crew, build_table
    from opacity.recipe.load import load_recipe

    first: list[float] = []

    def measured(job: object, units: object, crew: object) -> None:
        started = time.perf_counter()
        real(job, units, crew)
        ended = time.perf_counter()
        peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
        peak += resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss * (kind == "processes") * workers
        print(f"{ended - started:.3f} {first[0] - started:.3f} {peak * 1024 / 1e9:.3f}", flush=True)
        raise SystemExit

    def in_order(waiting: dict, done: Callable[[object], None]) -> None:
        def told(unit: object) -> None:
            first.append(time.perf_counter())
            done(unit)

        real_order(waiting, told)

    real, real_order = build_module._compute, workers_module._all_done
    build_module._compute = measured
    workers_module._all_done = in_order
    if kind == "threads":
        first.append(0.0)
    build_table(load_recipe(recipe), folder, crew=Crew(workers, kind), memory=MEMORY, quiet=True)


def timed_build(recipe: Path, workers: int, kind: str) -> np.ndarray:
    """Seconds of spectra and shards, seconds until the first unit is done, and the peak (GB), in another process."""
    with tempfile.TemporaryDirectory() as folder:
        words = [str(recipe), folder, str(workers), kind]
        run = subprocess.run([sys.executable, __file__, "--one", *words], capture_output=True, text=True, check=True)
        return np.array([float(word) for word in run.stdout.split()])


def scaling(single: Path, double: Path, kind: str) -> None:
    """The same work, and twice the work, by two workers."""
    cases = {"one": (single, 1), "two": (single, 2), "double by two": (double, 2)}
    found = {name: np.full(3, np.inf) for name in cases}
    for _ in range(3):
        for name, (recipe, workers) in cases.items():
            found[name] = min(found[name], timed_build(recipe, workers, kind), key=lambda one: one[0])
    one, two, double_by_two = (found[name][0] for name in cases)
    print(f"{kind}: {one:.2f} s with 1 worker, {two:.2f} s with 2: {one / two:.2f} x; twice the nodes with 2:")
    print(f"  {double_by_two:.2f} s, {2.0 * one / double_by_two:.2f} x; peak {found['two'][2]:.2f} GB of 2 GB")
    if kind == "processes":
        start = found["one"][1]
        after = (2.0 * (one - start)) / (double_by_two - found["double by two"][1])
        print(f"  the first unit was done after {start:.2f} s; then {after:.2f} x with twice the nodes", flush=True)


def main(lines: Path) -> None:
    """Print all of it."""
    with tempfile.TemporaryDirectory() as scratch:
        folder = Path(scratch)
        real = lines / "H2O.par"
        single, double = (write_recipe(folder, f"water-{count}", real, count) for count in (20, 40))
        small = write_recipe(folder, "first", real, 2)
        timed_build(small, 1, "threads")  # compiles what is not compiled yet
        stages("200 nodes, real lines", single, folder / "real")
        write_million(real, folder / "million.par")
        million = write_recipe(folder, "million", folder / "million.par", 2)
        million.write_text(million.read_text(encoding="utf-8").replace("count = 10", "count = 5"), encoding="utf-8")
        stages("10 nodes, 10^6 lines", million, folder / "million")
        for kind in ("threads", "processes"):
            scaling(single, double, kind)


if __name__ == "__main__":
    if sys.argv[1] == "--one":
        one_build(Path(sys.argv[2]), Path(sys.argv[3]), int(sys.argv[4]), sys.argv[5])
    else:
        main(Path(sys.argv[1]))
