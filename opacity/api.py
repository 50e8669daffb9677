"""The public functions: lines to cross-sections in memory, recipes to tables on disk."""

from __future__ import annotations

import warnings
from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from opacity.arguments import (
    DefaultWidth,
    as_default_widths,
    as_fractions,
    as_number,
    check_workers,
    shown,
)
from opacity.chi_factors import CHI_FACTORS, chi_table
from opacity.cross_sections.exact import exact_spectrum
from opacity.cross_sections.prepare import PreparedLines, prepare
from opacity.cross_sections.tolerance import regions
from opacity.errors import AssumptionWarning, InputError, LineListError, problem
from opacity.grids import HIGHEST_PRESSURE, LOWEST_PRESSURE, FloatArray, as_axis, as_wavenumbers
from opacity.line_list.model import LineList
from opacity.recipe.model import Cutoff, CutoffStep, Recipe

if TYPE_CHECKING:
    from opacity.pipeline.plan import Plan

Numbers = float | Sequence[float] | NDArray[Any]


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
    where no line reaches.  `tolerance` is from 1e-6, with `plinth` from 2e-6, to 0.1.
    With `plinth` each profile counts less its value at the distance `cutoff` from its shifted centre, not below 0,
    inside the cut-off, which counts from the unshifted one.  `chi` names a set of `opacity.CHI_FACTORS` for
    sub-Lorentzian wings, whose constants are from memory.
    `partition_function` is "TIPS-2021", "TIPS-2025" or the Path of a file of T and Q; `abundance` is
    "terrestrial", "pure" or fractions by isotopologue; `default_widths` serve lines without widths.
    `workers` threads give the same bits as one.

    What had to be assumed for some of the lines is told in one AssumptionWarning.  Raises InputError for arguments
    that cannot be right, MoleculeError for widths or partition functions that are not to be had.
    """
    # Late, so that importing the package does not load numba.
    from opacity.cross_sections.compute import NodeSum, add_spectra

    check_workers(workers)
    _check_flag("plinth", plinth)
    limits = regions(as_number("tolerance", tolerance), plinth)
    nodes = _nodes(wavenumber, temperature, pressure, cutoff)
    factors = _chi(chi)
    prepared = _prepare(lines, partition_function, abundance, broadeners, default_widths)
    executor = ThreadPoolExecutor(workers) if workers > 1 else None

    def one(temperature: float, strength: FloatArray) -> FloatArray:
        at_temperature = prepared.at_temperature(temperature, strength)
        sums = [NodeSum(at_temperature, pressure, nodes.cutoff.at(pressure)) for pressure in nodes.pressure.tolist()]
        sigma = np.zeros((len(sums), nodes.wavenumber.size))
        add_spectra(list(sigma), sums, nodes.wavenumber, limits, plinth, factors, executor)
        return sigma

    try:
        return _all_nodes(prepared, nodes, one)
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
    _check_flag("plinth", plinth)
    nodes = _nodes(wavenumber, temperature, pressure, cutoff)

    factors = _chi(chi)
    prepared = _prepare(lines, partition_function, abundance, broadeners, default_widths)

    def one(temperature: float, strength: FloatArray) -> FloatArray:
        sums = []
        for pressure in nodes.pressure.tolist():
            node = prepared.at(temperature, pressure, strength)
            sums.append(exact_spectrum(node, nodes.wavenumber, nodes.cutoff.at(pressure), plinth, factors))
        return np.array(sums)

    return _all_nodes(prepared, nodes, one)


@dataclass(frozen=True)
class _Nodes:
    """The axes asked for, and the cut-off by pressure."""

    wavenumber: FloatArray
    temperature: FloatArray
    pressure: FloatArray
    cutoff: Cutoff


def _nodes(
    wavenumber: Sequence[float] | NDArray[Any], temperature: Numbers, pressure: Numbers, cutoff: float | Cutoff
) -> _Nodes:
    nodes = _Nodes(
        as_wavenumbers(wavenumber),
        as_axis("temperature", "K", temperature),
        as_axis("pressure", "bar", pressure),
        _cutoff_rule(cutoff),
    )
    if nodes.pressure[0] < LOWEST_PRESSURE or nodes.pressure[-1] > HIGHEST_PRESSURE:
        expected, found = f"{LOWEST_PRESSURE:g} to {HIGHEST_PRESSURE:g} bar", shown(nodes.pressure.tolist())
        raise InputError(problem("pressure", "out of range", expected=expected, found=found))
    return nodes


def _check_flag(name: str, value: object) -> None:
    if not isinstance(value, (bool, np.bool_)):
        raise InputError(problem(name, "not a boolean", expected="True or False", found=shown(value)))


def _check_lines(lines: object) -> None:
    if not isinstance(lines, LineList):
        expected = "a LineList, such as opacity.read_lines gives"
        raise InputError(problem("lines", "not a line list", expected=expected, found=shown(lines)))


def _chi(name: object) -> FloatArray:
    if name is not None and (not isinstance(name, str) or name not in CHI_FACTORS):
        expected = " or ".join(["None", *(f'"{one}"' for one in CHI_FACTORS)])
        raise InputError(problem("chi", "no such set of chi factors", expected=expected, found=shown(name)))
    return chi_table(name)


def _prepare(
    lines: LineList,
    partition_function: str | Path,
    abundance: str | Mapping[str, float],
    broadeners: Mapping[str, float],
    default_widths: Mapping[str, DefaultWidth] | None,
) -> PreparedLines:
    _check_lines(lines)
    if not isinstance(abundance, str):
        abundance = as_fractions("abundance", abundance, '"terrestrial", "pure" or fractions by isotopologue')
    prepared = prepare(
        lines,
        partition_function=partition_function,
        abundance=abundance,
        broadeners=as_fractions("broadeners", broadeners, 'mole fractions such as {"H2": 0.85, "He": 0.15}'),
        defaults=as_default_widths("default_widths", default_widths),
    )
    if prepared.assumptions:
        assumed = "; ".join(f"for {one.lines} of {len(prepared)} lines: {one.what}" for one in prepared.assumptions)
        # The user's call stands two frames above.
        warnings.warn(f"assumed {assumed}", AssumptionWarning, stacklevel=3)
    return prepared


def _all_nodes(prepared: PreparedLines, nodes: _Nodes, one: Callable[[float, FloatArray], FloatArray]) -> FloatArray:
    sigma = np.empty((nodes.temperature.size, nodes.pressure.size, nodes.wavenumber.size))
    for i, t in enumerate(nodes.temperature.tolist()):
        sigma[i] = one(t, prepared.strengths(t))
        for j, p in enumerate(nodes.pressure.tolist()):
            if not np.all(np.isfinite(sigma[i, j])):
                where = f"node {t:g} K, {p:g} bar"
                raise LineListError(problem(where, "the sum is not finite: a line has impossible values"))
    return sigma


def _cutoff_rule(cutoff: float | Cutoff) -> Cutoff:
    if not isinstance(cutoff, Cutoff):
        return Cutoff((CutoffStep(_above_zero("cutoff", cutoff, "cm-1")),))
    steps = cutoff.steps
    if not isinstance(steps, (tuple, list)) or not steps or not all(isinstance(one, CutoffStep) for one in steps):
        expected = "steps such as Cutoff((CutoffStep(25.0, to_pressure=200.0), CutoffStep(100.0)))"
        raise InputError(problem("cutoff.steps", "not steps of a cut-off", expected=expected, found=shown(steps)))
    before = 0.0
    for index, step in enumerate(steps):
        name = f"cutoff.steps[{index}]"
        _above_zero(f"{name}.cutoff", step.cutoff, "cm-1")
        if (step.to_pressure is None) != (index == len(steps) - 1):
            expected = "to_pressure in every step but the last, which holds for all higher pressures"
            raise InputError(
                problem(f"{name}.to_pressure", "out of place", expected=expected, found=shown(step.to_pressure))
            )
        if step.to_pressure is not None:
            limit = _above_zero(f"{name}.to_pressure", step.to_pressure, "bar")
            if limit <= before:
                expected = f"above {before:g} bar"
                raise InputError(
                    problem(f"{name}.to_pressure", "not in rising order", expected=expected, found=f"{limit:g}")
                )
            before = limit
    return cutoff


def _above_zero(name: str, value: object, unit: str) -> float:
    expected = f"a number above 0 {unit}"
    number = as_number(name, value, expected)
    if number <= 0.0:
        raise InputError(problem(name, "impossible", expected=expected, found=shown(value)))
    return number


def plan(recipe: Recipe, folder: str | Path = "tables", *, memory: int = 2_000_000_000, quiet: bool = True) -> Plan:
    """What a build of the recipe into a folder will do and need; of a second table in the plan's `others`.

    Raises OpacityError of the kind that fits where the recipe's lines cannot be used; whether the build fits into
    memory and disk is told by the plan's `obstacles`.
    """
    from opacity.pipeline.inputs import load_inputs
    from opacity.pipeline.k_plan import plan_all

    inputs = load_inputs(recipe, Path(folder), memory=memory, quiet=quiet)
    return plan_all(recipe, inputs, Path(folder), memory)


def build(
    recipe: Recipe,
    folder: str | Path = "tables",
    *,
    workers: int | None = None,
    processes: bool = False,
    memory: int = 2_000_000_000,
) -> tuple[Path, ...]:
    """Build the tables that a recipe asks for into a folder and return their paths.

    `workers` threads, or processes, by default as many as the CPUs and `memory` (bytes) allow; the tables have the
    same bits for any number.  What a build that was stopped has finished is kept, and not computed again.  A script
    that asks for processes must itself do nothing when it is imported (`if __name__ == "__main__":`).
    A table that is there already and was made from the same inputs is kept.  What was assumed and what there is to be
    warned of stands in the table's `checks`.  Raises OpacityError of the kind that fits.
    """
    from opacity.pipeline.build import Crew, build_tables

    if workers is not None:
        check_workers(workers)
    _check_flag("processes", processes)
    crew = Crew(workers, "processes" if processes else "threads")
    return tuple(made.table for made in build_tables(recipe, Path(folder), crew=crew, memory=memory, quiet=True))
