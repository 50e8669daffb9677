"""The public functions: lines to cross-sections in memory, recipes to tables on disk."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.cross_sections.exact import exact_spectrum
from opacity.cross_sections.prepare import NodeLines, PreparedLines, prepare
from opacity.cross_sections.tolerance import regions
from opacity.errors import InputError, problem
from opacity.grids import FloatArray, as_axis, as_wavenumbers
from opacity.line_list.model import LineList
from opacity.molecule.broadening import DefaultWidth
from opacity.recipe.model import Cutoff, CutoffStep, Recipe

Numbers = float | Sequence[float] | NDArray[Any]

LOWEST_PRESSURE = 1e-15
HIGHEST_PRESSURE = 1e6


def cross_section(
    lines: LineList,
    *,
    wavenumber: Sequence[float] | NDArray[Any],
    temperature: Numbers,
    pressure: Numbers,
    broadeners: Mapping[str, float],
    cutoff: float | Cutoff,
    tolerance: float = 1e-3,
    partition_function: str | Path = "TIPS-2021",
    abundance: str | Mapping[str, float] = "terrestrial",
    plinth: bool = False,
    chi: str | None = None,
    default_widths: Mapping[str, DefaultWidth] | None = None,
    workers: int = 1,
) -> FloatArray:
    """Absorption cross-sections of a line list, (n_T, n_P, n_nu), in cm2 per molecule of the species.

    `wavenumber` (n_nu,) cm-1, rising; `temperature` K; `pressure` bar; `broadeners` mole fractions, sum 1;
    `cutoff` cm-1 from each line's unshifted wavenumber, one number or a `Cutoff` by pressure.  At every point
    |sigma - exact| <= `tolerance` exact, where exact is what `exact_cross_section` gives, and sigma is 0
    where no line reaches.  With `plinth` the profile's value at the cut-off is subtracted inside it.
    `partition_function` is "TIPS-2021", "TIPS-2025" or the Path of a file of T and Q; `abundance` is
    "terrestrial", "pure" or fractions by isotopologue; `default_widths` serve lines without widths.
    `workers` threads give the same bits as one.

    Raises InputError for arguments that cannot be right, MoleculeError for widths or partition functions that
    are not to be had.
    """
    # Late, so that importing the package does not load numba.
    from opacity.cross_sections.compute import spectrum

    _check_workers(workers)
    limits = regions(tolerance, plinth)
    nu = as_wavenumbers(wavenumber)
    executor = ThreadPoolExecutor(workers) if workers > 1 else None

    def one(node: NodeLines, reach: float) -> FloatArray:
        return spectrum(node, nu, reach, limits, plinth, executor)

    prepared = _prepare(lines, partition_function, abundance, broadeners, default_widths, chi)
    try:
        return _all_nodes(prepared, nu, temperature, pressure, cutoff, one)
    finally:
        if executor is not None:
            executor.shutdown(cancel_futures=True)


def exact_cross_section(
    lines: LineList,
    *,
    wavenumber: Sequence[float] | NDArray[Any],
    temperature: Numbers,
    pressure: Numbers,
    broadeners: Mapping[str, float],
    cutoff: float | Cutoff,
    tolerance: float = 1e-3,
    partition_function: str | Path = "TIPS-2021",
    abundance: str | Mapping[str, float] = "terrestrial",
    plinth: bool = False,
    chi: str | None = None,
    default_widths: Mapping[str, DefaultWidth] | None = None,
    workers: int = 1,
) -> FloatArray:
    """The truth that `cross_section` is held to: the direct sum with scipy.special.wofz, slow and plain.

    Takes the same arguments, so that one call can be exchanged for the other; `tolerance` and `workers` change
    nothing here.
    """
    del tolerance, workers
    nu = as_wavenumbers(wavenumber)

    def one(node: NodeLines, reach: float) -> FloatArray:
        return exact_spectrum(node, nu, reach, plinth)

    prepared = _prepare(lines, partition_function, abundance, broadeners, default_widths, chi)
    return _all_nodes(prepared, nu, temperature, pressure, cutoff, one)


def _check_workers(workers: object) -> None:
    if not isinstance(workers, (int, np.integer)) or workers < 1:
        expected = "a whole number of threads, 1 or more"
        raise InputError(problem("workers", "impossible", expected=expected, found=repr(workers)))


def _prepare(
    lines: LineList,
    partition_function: str | Path,
    abundance: str | Mapping[str, float],
    broadeners: Mapping[str, float],
    default_widths: Mapping[str, DefaultWidth] | None,
    chi: str | None,
) -> PreparedLines:
    if chi is not None:
        raise InputError(
            problem("chi", "no set of chi factors is known to this version", expected="None", found=f'"{chi}"')
        )
    return prepare(
        lines,
        partition_function=partition_function,
        abundance=abundance,
        broadeners=broadeners,
        defaults=default_widths,
    )


def _all_nodes(
    prepared: PreparedLines,
    nu: FloatArray,
    temperature: Numbers,
    pressure: Numbers,
    cutoff: float | Cutoff,
    one: Callable[[NodeLines, float], FloatArray],
) -> FloatArray:
    temperatures, pressures = as_axis("temperature", "K", temperature), as_axis("pressure", "bar", pressure)
    if pressures[0] < LOWEST_PRESSURE or pressures[-1] > HIGHEST_PRESSURE:
        expected = f"{LOWEST_PRESSURE:g} to {HIGHEST_PRESSURE:g} bar"
        raise InputError(problem("pressure", "out of range", expected=expected, found=f"{pressures}"))
    rule = _cutoff_rule(cutoff)
    sigma = np.empty((temperatures.size, pressures.size, nu.size))
    for i, t in enumerate(temperatures):
        strength = prepared.strengths(float(t))
        for j, p in enumerate(pressures):
            sigma[i, j] = one(prepared.at(float(t), float(p), strength), rule.at(float(p)))
    return sigma


def _cutoff_rule(cutoff: float | Cutoff) -> Cutoff:
    if isinstance(cutoff, Cutoff):
        return cutoff
    if not (np.isfinite(cutoff) and cutoff > 0.0):
        raise InputError(problem("cutoff", "impossible", expected="a number above 0 cm-1", found=cutoff))
    return Cutoff((CutoffStep(float(cutoff)),))


def plan(recipe: Recipe, folder: str | Path = "tables") -> Any:
    """What a build of the recipe into a folder will do and need: an `opacity.pipeline.plan.Plan`.

    Raises OpacityError of the kind that fits where the build could not be made.
    """
    from opacity.pipeline.inputs import load_inputs
    from opacity.pipeline.plan import make_plan

    return make_plan(recipe, load_inputs(recipe), Path(folder))


def build(recipe: Recipe, folder: str | Path = "tables", *, workers: int | None = None) -> tuple[Path, ...]:
    """Build the tables that a recipe asks for into a folder and return their paths.

    `workers` threads, by default as many as the CPUs allowed; the tables have the same bits for any number.
    A table that is there already and was made from the same inputs is kept.  Raises OpacityError of the kind that fits.
    """
    from opacity.pipeline.build import build_table

    if workers is not None:
        _check_workers(workers)
    return (build_table(recipe, Path(folder), workers=workers, quiet=True).table,)
