"""Closure: the integral of a table's spectrum against the sum of its lines' strengths.

Expected is sum S times the share of each profile inside cut-off and grid.  The points of a grid sample the
profiles: what that does to the sum is predicted line by line where the grid is even, so that a step too coarse
for the lines is told apart from a wrong table.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.check.profile_share import (
    sampling_offset,
    sampling_risk,
    share_between,
    spacing_at,
    weighted_share_between,
)
from opacity.check.result import AGREES, CANNOT_JUDGE, DIFFERS, CheckResult
from opacity.cross_sections.exact import chi_factors, voigt_derivatives, voigt_profile
from opacity.cross_sections.prepare import NodeLines
from opacity.grids import FloatArray, cell_widths

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
    node: NodeLines, wavenumber: FloatArray, sigma: FloatArray, cutoff: float, plinth: bool, uniform: bool
) -> Closure:
    """The account of one spectrum (n_nu,) computed from the lines of `node`."""
    sums = closure_sums(node, wavenumber, cutoff, plinth, uniform)
    integral = float(np.sum(cell_widths(wavenumber) * sigma))
    return closure_from(sums, node.temperature, node.pressure, integral)


def closure_sums(
    node: NodeLines,
    wavenumber: FloatArray,
    cutoff: float,
    plinth: bool,
    uniform: bool,
    chi: FloatArray | None = None,
) -> ClosureSums:
    """What the lines of a node, or some of them, add up to on a grid."""
    share = share_within(node, float(wavenumber[0]), float(wavenumber[-1]), cutoff, plinth, chi)
    weighed = node.strength * (share > 0.0)
    risk = sampling_risk(node, wavenumber)
    inside = (node.centre > wavenumber[0]) & (node.centre < wavenumber[-1])
    return ClosureSums(
        strength=float(np.sum(node.strength)),
        in_reach=float(np.sum(node.strength * share)),
        inside=float(np.sum(weighed * inside)),
        risk=float(np.sum(weighed * risk * inside)),
        sampling=_predicted_sampling(node, wavenumber, inside) if uniform else None,
        allowance=_ends_allowance(node, wavenumber, cutoff, risk),
    )


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


def share_within(
    node: NodeLines, first: float, last: float, cutoff: float, plinth: bool, chi: FloatArray | None = None
) -> FloatArray:
    """Share of each line's profile, times its chi factors, that lies inside its cut-off and between two wavenumbers,
    (n_lines,).
    """
    lower = np.maximum(node.wavenumber - cutoff, first)
    upper = np.minimum(node.wavenumber + cutoff, last)
    if plinth:
        # The cut-off counts from the unshifted wavenumber; further than it from the centre the floor holds.
        lower, upper = np.maximum(lower, node.centre - cutoff), np.minimum(upper, node.centre + cutoff)
    if chi is None or not len(chi):
        share = share_between(node, lower, upper)
    else:
        share = weighted_share_between(node, lower, upper, chi)
    if plinth:
        at = np.full(node.centre.size, cutoff)
        edge = chi_factors(chi, at) * _at_distance(node, at)
        share = np.maximum(share - edge * np.maximum(upper - lower, 0.0), 0.0)
    return share


def _predicted_sampling(node: NodeLines, wavenumber: FloatArray, inside: NDArray[np.bool_]) -> float | None:
    """What sampling on an even grid adds to the sum, cm/molecule; None where it can't be predicted for some line."""
    offset = sampling_offset(node, float(wavenumber[0]), float(wavenumber[1] - wavenumber[0]))[inside]
    if not np.all(np.isfinite(offset[node.strength[inside] > 0.0])):
        return None
    return float(np.sum(node.strength[inside] * np.nan_to_num(offset)))


def _at_distance(node: NodeLines, distance: FloatArray) -> FloatArray:
    """Each line's profile (per cm-1) at a distance from its centre, (n_lines,)."""
    return voigt_profile(distance, node.doppler, node.lorentz)


def _ends_allowance(node: NodeLines, wavenumber: FloatArray, cutoff: float, risk: FloatArray) -> float:
    """How far the trapezoid sum may be off at the cut-off's steps and at lines across the grid's ends, cm/molecule.

    Half a cell of the profile's value at each cut.  At the grid's ends the terms of Euler and Maclaurin's formula,
    h^2/12 of the first and h^4/720 of the third derivative, with room to spare; lines of which an end cuts the
    unresolved core count whole.
    """
    if wavenumber.size < 2:
        return float(np.sum(node.strength))
    step = spacing_at(wavenumber, node.centre)
    at_cut = np.zeros(node.centre.size)
    for side in (-1.0, 1.0):
        edge = node.wavenumber + side * cutoff
        within = (edge >= wavenumber[0]) & (edge <= wavenumber[-1])
        at_cut += np.where(within, 0.5 * step * _at_distance(node, np.abs(edge - node.centre)), 0.0)
    near_end = np.zeros(node.centre.size)
    for end in (wavenumber[0], wavenumber[-1]):
        distance = np.abs(node.centre - end)
        first, third = voigt_derivatives(distance, node.doppler, node.lorentz)
        term = step**2 / 12.0 * np.abs(first) + step**4 / 360.0 * np.abs(third)
        near_end += np.minimum(1.1 * term, 1.0)
        near_end += np.where(distance < 5.0 * np.maximum(node.doppler + node.lorentz, step), risk, 0.0)
    return float(np.sum(node.strength * (at_cut + near_end)))


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
