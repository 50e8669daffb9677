"""Pressure broadening: which half-width, exponent and shift each line takes from which broadener.

HITRAN (Rothman et al. 1998, JQSRT 60, 665, appendix): gamma(P, T) = P sum_b x_b gamma_b (296/T)^n_b, centre at
nu0 + P sum_b x_b delta_b.  What a list does not give is taken from the recipe's default, or is an error;
each assumption is counted.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from opacity.arguments import DefaultWidth
from opacity.errors import MoleculeError, problem
from opacity.grids import FloatArray


@dataclass(frozen=True)
class BroadenerColumns:
    """What a list gives for one broadener, each (n_lines,), NaN where it gives nothing.

    `gamma` HWHM and `shift` in cm-1/bar at 296 K, `exponent` of temperature.
    """

    gamma: FloatArray
    exponent: FloatArray
    shift: FloatArray


@dataclass(frozen=True)
class Assumption:
    """Something that was assumed for `lines` lines."""

    what: str
    lines: int


@dataclass(frozen=True)
class LineBroadening:
    """Broadening of every line in one mixture, in the order of `broadeners`.

    `gamma` is x_b gamma_b (n_b, n_lines), cm-1/bar at 296 K; `exponent` (n_b, n_lines);
    `shift` is sum_b x_b delta_b (n_lines,), cm-1/bar.
    """

    broadeners: tuple[str, ...]
    gamma: FloatArray
    exponent: FloatArray
    shift: FloatArray
    assumptions: tuple[Assumption, ...]


def resolve_broadening(
    columns: Mapping[str, BroadenerColumns],
    mixture: Mapping[str, float],
    defaults: Mapping[str, DefaultWidth],
    n_lines: int,
) -> LineBroadening:
    """Widths, exponents and shifts of all lines in a mixture.

    `columns` is keyed by the broadener's name in lower case.  Raises MoleculeError naming each broadener for
    which neither the list nor a default gives a width or an exponent.
    """
    gammas, exponents, assumptions, problems = [], [], [], []
    shift = np.zeros(n_lines)
    for name, fraction in mixture.items():
        given = columns.get(name.lower())
        gamma, exponent, notes = _resolve_one(name, given, columns.get("air"), defaults.get(name), n_lines)
        assumptions += notes
        missing = int(np.count_nonzero(np.isnan(gamma) | np.isnan(exponent)))
        if missing:
            problems.append(_missing(name, missing, n_lines, gamma, columns))
        gammas.append(fraction * gamma)
        exponents.append(exponent)
        delta = np.full(n_lines, np.nan) if given is None else given.shift
        without = int(np.count_nonzero(np.isnan(delta)))
        if without:
            assumptions.append(Assumption(f"no pressure shift by {name} given: taken as 0", without))
        shift += fraction * np.nan_to_num(delta, nan=0.0)
    if problems:
        raise MoleculeError("\n".join(problems)).about("broadeners")
    shape = (len(mixture), n_lines)
    return LineBroadening(
        tuple(mixture),
        np.array(gammas).reshape(shape),
        np.array(exponents).reshape(shape),
        shift,
        tuple(assumptions),
    )


def _resolve_one(
    name: str,
    given: BroadenerColumns | None,
    air: BroadenerColumns | None,
    default: DefaultWidth | None,
    n_lines: int,
) -> tuple[FloatArray, FloatArray, list[Assumption]]:
    notes = []
    gamma = np.full(n_lines, np.nan) if given is None else given.gamma.copy()
    exponent = np.full(n_lines, np.nan) if given is None else given.exponent.copy()
    no_width = np.isnan(gamma)
    exponent[no_width] = np.nan
    if default is not None and no_width.any():
        gamma[no_width], exponent[no_width] = default.gamma, default.exponent
        text = f"{name} width from the default {default.gamma:g} cm-1/bar, exponent {default.exponent:g}"
        notes.append(Assumption(f"{text} ({default.source})", int(no_width.sum())))
    no_exponent = np.isnan(exponent) & ~np.isnan(gamma)
    if name.lower() == "self" and air is not None:
        # HITRAN's definition: n_air also serves self-broadening where no n_self is given.
        take = no_exponent & ~np.isnan(air.exponent)
        exponent[take] = air.exponent[take]
        if take.any():
            notes.append(Assumption("no temperature exponent for self given: that of air taken", int(take.sum())))
        no_exponent &= ~take
    if default is not None and no_exponent.any():
        exponent[no_exponent] = default.exponent
        text = f"{name} temperature exponent from the default {default.exponent:g} ({default.source})"
        notes.append(Assumption(text, int(no_exponent.sum())))
    return gamma, exponent, notes


def _missing(name: str, missing: int, n_lines: int, gamma: FloatArray, columns: Mapping[str, BroadenerColumns]) -> str:
    what = "half-width" if np.isnan(gamma).any() else "temperature exponent"
    return problem(
        "broadeners",
        f"{missing} of {n_lines} lines have no {what} by {name}",
        expected=f"columns for {name.lower()} in the list, or a default",
        found=f"columns for {', '.join(sorted(columns)) or 'no broadener'}",
        remedy=f"give [broadening.default.{name}] with gamma, exponent and source in a recipe,"
        f' default_widths={{"{name}": DefaultWidth(...)}} in Python',
    )
