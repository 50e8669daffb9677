"""What a build of k-coefficients costs beside its spectra, and mixtures against the premixed gas; run by hand:

    python tests/bench/k_builds.py FOLDER_OF_REAL_LINES

Real H2O, 3400-4900 cm-1, 10 temperatures and 10 pressures, bands of R = 100, 16 points: seconds of the spectra at the
steps that the lines need, and of all that the build adds to them, with one worker and with two; the peak of memory.
Then H2O with the 2-0 band of CO (positions from Dunham constants, strength of Zou & Varanasi 2002), mixed by random
overlap and line by line.
"""

from __future__ import annotations

import importlib.util
import resource
import subprocess
import sys
import tempfile
import time
from dataclasses import replace
from pathlib import Path

RECIPE = """\
[molecule]
name = "{name}"
formula = "{formula}"
[[line_list]]
format = "hitran"
files = ["{file}"]
reference = "HITRAN, Gordon et al. 2022"
[isotopologues]
abundance = "terrestrial"
[partition_function]
source = "TIPS-2021"
[broadening]
mixture = {{ air = 1.0 }}
"""

GRID = """\
[profile]
cutoff = 25.0
tolerance = 1e-3
[grid]
wavenumber = {{ start = {start}, stop = {stop} }}
temperature = {{ start = 300.0, stop = 2100.0, count = {count}, spacing = "linear" }}
pressure = {{ start = 1e-4, stop = 10.0, count = {count}, spacing = "log" }}
[k_coefficient]
bands = {{ resolving_power = 100 }}
g_points = 16
"""

STRENGTH_2_0 = 7.532e-20
"""cm/molecule at 296 K: Zou & Varanasi 2002, JQSRT 75, 63 (abstract)."""


def stages(recipe_path: Path, folder: Path, workers: int) -> None:
    """Seconds of each stage."""
    from opacity.k_coefficient import spectra as spectra_module
    from opacity.pipeline import build as build_module
    from opacity.pipeline import k_assemble
    from opacity.pipeline.build import Crew, build_table
    from opacity.recipe.load import load_recipe

    spent: dict[str, float] = {}

    def timed(name: str, home: object, function: str) -> None:
        real = getattr(home, function)

        def run(*given: object, **named: object) -> object:
            started = time.perf_counter()
            try:
                return real(*given, **named)
            finally:
                spent[name] = spent.get(name, 0.0) + time.perf_counter() - started

        setattr(home, function, run)

    timed("spectra", spectra_module.BandLines, "spectrum")
    timed("units", build_module, "in_threads")
    timed("fitting", k_assemble, "_choose")
    timed("checks", k_assemble, "run_k_checks")
    timed("writing", k_assemble, "write_k_table")
    build_table(load_recipe(recipe_path), folder, "k-coefficient", crew=Crew(workers), quiet=True)
    within = spent["spectra"] if workers == 1 else 0.0
    print(" ".join(str(spent[name]) for name in ("units", "fitting", "checks", "writing")), within)
    print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024, flush=True)


def costs(recipe: Path) -> None:
    """The table of costs, each run in a process of its own; the second of two runs, whose kernels are compiled."""
    units_alone = spectra = 0.0
    for workers in (1, 1, 2, 2):
        with tempfile.TemporaryDirectory() as folder:
            words = [sys.executable, __file__, "--one", str(recipe), folder, str(workers)]
            out = subprocess.run(words, capture_output=True, text=True, check=True).stdout.split()
        units, fitting, checks, writing, within, peak = (float(word) for word in out)
        if workers == 1:
            # Checks make spectra too.
            units_alone, spectra = units, min(within, units)
        print(
            f"{workers} worker(s): units {units:.2f} s, fitting {fitting:.2f}, writing {writing - checks:.2f},"
            f" checks {checks:.2f}; peak {peak / 1e9:.2f} GB of 2 GB",
            flush=True,
        )
    print(f"spectra, and those of checks, {spectra:.2f} s of {units_alone:.2f} s of units (1 worker)")


def spectra_alone(recipe_path: Path) -> None:
    """Units with and without all but their spectra, in turns in one process."""
    from opacity.k_coefficient import spectra as spectra_module
    from opacity.pipeline.inputs import load_inputs
    from opacity.pipeline.k_units import compute_bands
    from opacity.pipeline.kinds import k_units_of
    from opacity.recipe.load import load_recipe
    from opacity.tables.band_shard import write_band_shard

    recipe = load_recipe(recipe_path)
    inputs = load_inputs(recipe)
    units = k_units_of(recipe, inputs)
    spent = [0.0]
    real = spectra_module.BandLines.spectrum

    def timed(*given: object, **named: object) -> object:
        started = time.perf_counter()
        try:
            return real(*given, **named)
        finally:
            spent[0] += time.perf_counter() - started

    spectra_module.BandLines.spectrum = timed
    best = (float("inf"), 0.0)
    for _ in range(4):
        spent[0], started = 0.0, time.perf_counter()
        for unit in units:
            with tempfile.TemporaryDirectory() as folder:
                write_band_shard(unit.path(Path(folder)), compute_bands(recipe, inputs.lines, unit))
        best = min(best, (time.perf_counter() - started, spent[0]))
    spectra_module.BandLines.spectrum = real
    print(f"units with their shards {best[0]:.2f} s, their spectra alone {best[1]:.2f} s: {best[0] / best[1]:.2f} x")


def overtone(path: Path) -> None:
    """Write the 2-0 band of (12C)(16O) in 160-character records."""
    samples = Path(__file__).resolve().parents[2] / "data-samples"
    sys.path.insert(0, str(samples))
    spec = importlib.util.spec_from_file_location("made", samples / "make_carbon_monoxide.py")
    made = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(made)
    partition_sum, abundance = made.partition_sum_and_abundance()
    lines = []
    for branch, first in (("P", 1), ("R", 0)):
        for j in range(first, made.HIGHEST_J + 1):
            line = made.make_line(0, branch, j, partition_sum, abundance)
            upper = j + 1 if branch == "R" else j - 1
            nu = made.level_energy(2, upper) - line.lower_energy
            einstein_a = line.einstein_a * (nu / line.wavenumber) ** 3
            made_strength = made.strength(einstein_a, nu, line.lower_energy, 2 * upper + 1, partition_sum, abundance)
            lines.append(
                replace(line, wavenumber=nu, strength=made_strength, einstein_a=einstein_a, upper_vibration="2")
            )
    scale = STRENGTH_2_0 * abundance / sum(line.strength for line in lines)
    lines = [replace(one, strength=scale * one.strength, einstein_a=scale * one.einstein_a) for one in lines]
    records = [made.record(line) for line in sorted(lines, key=lambda one: one.wavenumber)]
    path.write_text("\n".join(records) + "\n", encoding="ascii")


def mixtures(lines: Path, scratch: Path) -> None:
    """Random overlap and its rebinning, against the premixed gas line by line."""
    import numpy as np

    import opacity
    from opacity.k_coefficient.choose import Wanted
    from opacity.k_coefficient.collapse import CELL_WIDTHS
    from opacity.k_coefficient.transmission import columns_of, transmission
    from opacity.pipeline.k_files import choose_again, mix_tables

    overtone(scratch / "CO.par")
    grid = GRID.format(start=4150.0, stop=4360.0, count=5)
    names = {"water": ("H2O", lines / "H2O.par"), "carbon-monoxide": ("CO", scratch / "CO.par")}
    for name, (formula, file) in names.items():
        text = RECIPE.format(name=name, formula=formula, file=file.absolute()) + grid
        (scratch / f"{name}.toml").write_text(text, encoding="utf-8")
        opacity.build(opacity.load_recipe(scratch / f"{name}.toml"), scratch / "alone")
    tables = [scratch / "alone" / f"{name}.k-coefficient.h5" for name in names]
    choose_again(tables, Wanted(16, 5e-3, "matched", "optimised"), scratch / "shared", quiet=True)
    for fractions in ((0.001, 0.999), (0.01, 0.99), (0.1, 0.9)):
        parts = list(zip([scratch / "shared" / one.name for one in tables], fractions, strict=True))
        path, checks = mix_tables(parts, scratch / "mixed.k-coefficient.h5", quiet=True)
        rebinned = max(abs(band["largest"]) for band in checks["certificate"]["bands"])
        species = "".join(
            f'[[species]]\nrecipe = "{name}.toml"\nfraction = {x}\n' for name, x in zip(names, fractions, strict=True)
        )
        (scratch / "premixed.toml").write_text(species + grid, encoding="utf-8")
        (premixed,) = opacity.build(opacity.load_recipe(scratch / "premixed.toml"), scratch / "premixed")
        largest = 0.0
        with opacity.open_table(path) as mixed, opacity.open_table(premixed) as truth:
            for node in np.ndindex(truth.shape[:2]):
                cells = truth.cells(*node)
                columns = columns_of(cells, np.full(len(cells), truth.pressure[node[1]]))
                off = transmission(mixed.k(*node), mixed.g_weight, columns) - transmission(cells, CELL_WIDTHS, columns)
                largest = max(largest, float(np.max(np.abs(off))))
        print(
            f"H2O {fractions[0]:g} + CO {fractions[1]:g}: rebinning {rebinned:.1e}; random overlap and rebinning"
            f" against line by line {largest:.1e}",
            flush=True,
        )


def main(lines: Path) -> None:
    """Print all of it."""
    with tempfile.TemporaryDirectory() as scratch:
        recipe = Path(scratch) / "water.toml"
        text = RECIPE.format(name="water", formula="H2O", file=(lines / "H2O.par").absolute())
        recipe.write_text(text + GRID.format(start=3400.0, stop=4900.0, count=10), encoding="utf-8")
        spectra_alone(recipe)
        costs(recipe)
        mixtures(lines, Path(scratch))


if __name__ == "__main__":
    if sys.argv[1] == "--one":
        stages(Path(sys.argv[2]), Path(sys.argv[3]), int(sys.argv[4]))
    else:
        main(Path(sys.argv[1]))
