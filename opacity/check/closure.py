"""Closure: the integral of a table's spectrum against the sum of its lines' strengths.

Expected is sum S times the share of each profile inside cut-off and grid.  The points of a grid sample the
profiles: what that does to the sum is predicted line by line where the grid is even, so that a step too coarse
for the lines is told apart from a wrong table.
"""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from opacity.check.result import AGREES, CANNOT_JUDGE, DIFFERS, CheckResult
from opacity.chi_factors import NO_CHI
from opacity.cross_sections.prepare import LinesAtTemperature, NodeLines
from opacity.grids import FloatArray, cell_widths
from opacity.kernels.closure import Reach, add_closure, resolution, strength_in_reach
from opacity.kernels.node_line import LineColumns
from opacity.recipe.model import Profile

OWN_ERROR = 6e-7
"""What the expectation (profile shares, 2e-7) and the storage (f4, 6e-8 a value) may be off by themselves."""
JUDGED_BELOW = 0.01
"""Above this much uncertainty of the expectation itself (relative) closure is not judged."""


@dataclass(frozen=True)
class Closure:
    """Account of one node, strengths in cm/molecule.

    `strength` of all lines prepared; `in_reach` what of it lies inside cut-off and grid; `integral` of the
    points; `sampling` the relative difference that sampling is predicted to make (None where it can't be);
    `at_risk` the share of the strength in lines that the step does not resolve; `allowance` (relative, at most 1)
    for the ends, and for sampling that is too small to matter but was not predicted.
    """

    temperature: float
    pressure: float
    strength: float
    in_reach: float
    integral: float
    sampling: float | None
    at_risk: float
    allowance: float

    @property
    def expected(self) -> float:
        """What the integral should be, with sampling taken into account."""
        return self.in_reach * (1.0 + (self.sampling or 0.0))

    @property
    def difference(self) -> float:
        """Relative difference of the integral from the expectation."""
        if self.expected <= 0.0:
            return 0.0 if self.integral == 0.0 else float("inf")
        return self.integral / self.expected - 1.0

    @property
    def can_be_judged(self) -> bool:
        """Whether the expectation is certain enough; not so where the points miss nearly all of the strength."""
        seen = self.expected > JUDGED_BELOW * self.in_reach
        return self.sampling is not None and seen and self.allowance <= JUDGED_BELOW

    def as_dict(self) -> dict[str, Any]:
        """The account as plain values for JSON."""
        return {**asdict(self), "difference": self.difference}


@dataclass(frozen=True)
class ClosureSums:
    """What the lines of a node add up to, cm/molecule; those of several stretches of lines can be added.

    `strength`; `in_reach` of cut-off and grid; `inside` in lines centred inside the grid and `risk` what of it the step
    does not resolve; `sampling` what sampling is predicted to add, None where it can't be; `allowance` for ends.
    """

    strength: float = 0.0
    in_reach: float = 0.0
    inside: float = 0.0
    risk: float = 0.0
    sampling: float | None = 0.0
    allowance: float = 0.0

    def plus(self, other: ClosureSums) -> ClosureSums:
        """The sums of both."""
        known = self.sampling is not None and other.sampling is not None
        return ClosureSums(
            self.strength + other.strength,
            self.in_reach + other.in_reach,
            self.inside + other.inside,
            self.risk + other.risk,
            (self.sampling or 0.0) + (other.sampling or 0.0) if known else None,
            self.allowance + other.allowance,
        )


def closure_of(
    node: NodeLines,
    wavenumber: FloatArray,
    sigma: FloatArray,
    cutoff: float,
    plinth: bool,
    uniform: bool,
    chi: FloatArray | None = None,
) -> Closure:
    """The account of one spectrum (n_nu,) computed from the lines of `node`."""
    sums = closure_sums(node.per_bar(), 1.0, wavenumber, cutoff, plinth, uniform, chi)
    integral = float(np.sum(cell_widths(wavenumber) * sigma))
    return closure_from(sums, node.temperature, node.pressure, integral)


def closure_sums(
    lines: LinesAtTemperature,
    pressure: float,
    wavenumber: FloatArray,
    cutoff: float,
    plinth: bool,
    uniform: bool,
    chi: FloatArray | None = None,
) -> ClosureSums:
    """What the lines of a node, or some of them, add up to on a grid; `pressure` in bar."""
    strength = float(np.sum(lines.strength))
    if wavenumber.size < 2:
        return ClosureSums(strength, sampling=None, allowance=strength)
    nu = np.ascontiguousarray(wavenumber)
    reach = Reach(float(nu[0]), float(nu[-1]), cutoff, plinth)
    sums = np.zeros(5)
    add_closure(sums, nu, _columns(lines), pressure, reach, uniform, NO_CHI if chi is None else chi)
    in_reach, inside, risk, sampling, allowance = (float(one) for one in sums)
    known = uniform and not math.isnan(sampling)
    return ClosureSums(strength, in_reach, inside, risk, sampling if known else None, allowance)


def strength_between(
    lines: LinesAtTemperature, pressure: float, between: tuple[float, float], profile: Profile
) -> float:
    """Sum of the lines' strengths times what of their profiles lies in their cut-off and between two wavenumbers,
    cm/molecule; `pressure` in bar.
    """
    reach = Reach(*between, profile.cutoff.at(pressure), profile.plinth)
    return float(strength_in_reach(_columns(lines), pressure, reach, profile.chi_table))


def resolution_of(lines: LinesAtTemperature, pressure: float, wavenumber: FloatArray) -> tuple[float, float, float]:
    """Of the lines centred on a grid: strength, what of it the step does not resolve (cm/molecule), and the narrowest
    half-width (HWHM, cm-1), infinite without lines; `pressure` in bar.
    """
    return resolution(np.ascontiguousarray(wavenumber), _columns(lines), pressure)


def _columns(lines: LinesAtTemperature) -> LineColumns:
    return LineColumns(lines.wavenumber, lines.shift, lines.strength, lines.lorentz, lines.doppler)


def closure_from(sums: ClosureSums, temperature: float, pressure: float, integral: float) -> Closure:
    """The account of a node from its lines' sums and the integral of its points (cm/molecule)."""
    at_risk = sums.risk / max(sums.inside, 1e-300)
    sampling, allowance = sums.sampling, sums.allowance
    if sampling is None and at_risk <= 0.1 * JUDGED_BELOW:
        sampling, allowance = 0.0, allowance + sums.risk
    relative = None if sampling is None else sampling / max(sums.in_reach, 1e-300)
    expected = sums.in_reach * (1.0 + (relative or 0.0))
    return Closure(
        temperature=temperature,
        pressure=pressure,
        strength=sums.strength,
        in_reach=sums.in_reach,
        integral=integral,
        sampling=relative,
        at_risk=at_risk,
        allowance=min(allowance / expected, 1.0) if expected > 0.0 else 1.0,
    )


def judge_closure(accounts: list[Closure], tolerance: float) -> CheckResult:
    """One row for all nodes: the worst of those that can be judged."""
    judged = [one for one in accounts if one.can_be_judged]
    coarse = [one for one in accounts if one.at_risk > JUDGED_BELOW]
    note = ""
    if coarse:
        worst = max(coarse, key=lambda one: one.at_risk)
        note = (
            f"; step too coarse at {len(coarse)} of {len(accounts)} nodes: at {worst.temperature:g} K,"
            f" {worst.pressure:.3g} bar {worst.at_risk:.0%} of the strength is in lines narrower than it resolves"
        )
    if not judged:
        return CheckResult("closure", CANNOT_JUDGE, "no node can be judged" + note)
    tolerance += OWN_ERROR
    worst = max(judged, key=lambda one: abs(one.difference) / (tolerance + one.allowance))
    bad = [one for one in judged if abs(one.difference) > tolerance + one.allowance]
    detail = (
        f"{len(judged)} of {len(accounts)} nodes; worst {worst.difference:+.1e} at {worst.temperature:g} K,"
        f" {worst.pressure:.3g} bar" + note
    )
    verdict = DIFFERS if bad else AGREES
    return CheckResult("closure", verdict, detail, worst.difference, tolerance + worst.allowance)
