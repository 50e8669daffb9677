"""A look at a list as a whole: it reports, and refuses nothing; what can't be right was refused when it was read."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.constants import REFERENCE_TEMPERATURE
from opacity.errors import MoleculeError
from opacity.kernels.line_strength import strength_from_einstein_a
from opacity.line_list.duplicates import identical_pairs
from opacity.line_list.model import LineList
from opacity.molecule.partition_function import tips

STRENGTH_AGREES = 0.01
"""S from A may differ this much, relative, before a line is counted."""


@dataclass(frozen=True)
class Finding:
    """Something noticed: `what`, for how many `lines`, holding which `share` of the strength, and `detail`."""

    what: str
    lines: int
    share: float
    detail: str = ""

    def as_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return asdict(self)


def examine(lines: LineList) -> list[Finding]:
    """What is worth knowing of a list before it is used, in order of the share of strength concerned."""
    total = max(float(np.sum(lines.strength)), 1e-300)

    def finding(what: str, mask: NDArray[np.bool_], detail: str = "") -> Finding:
        return Finding(what, int(np.count_nonzero(mask)), float(np.sum(lines.strength[mask])) / total, detail)

    later, _ = identical_pairs(lines)
    repeated = np.zeros(len(lines), dtype=bool)
    repeated[later] = True
    found = [
        finding("identical to another record", repeated),
        finding("lower-state energy unknown (below 0)", lines.lower_energy < 0.0),
        finding("strength 0", lines.strength == 0.0),
    ]
    differ, compared = strength_against_a(lines)
    if compared.any():
        where = _where(lines, differ)
        words = (
            f"S and the strength from A differ by over {100.0 * STRENGTH_AGREES:g} % (of {int(compared.sum())} lines)"
        )
        found.append(finding(words, differ, where))
    for name, one in sorted(lines.broadeners.items()):
        found.append(finding(f"no width by {name}", np.isnan(one.gamma)))
        found.append(finding(f"no temperature exponent for {name}", np.isnan(one.exponent) & ~np.isnan(one.gamma)))
        found.append(finding(f"no pressure shift by {name}", np.isnan(one.shift)))
    return sorted((one for one in found if one.lines), key=lambda one: -one.share)


def _where(lines: LineList, mask: NDArray[np.bool_]) -> str:
    if not mask.any():
        return ""
    nu = lines.wavenumber[mask]
    strongest = float(lines.strength[mask].max())
    return f"between {nu.min():.6g} and {nu.max():.6g} cm-1, the strongest with S = {strongest:.2e}"


def strength_against_a(lines: LineList) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Lines whose S at 296 K and A disagree, and lines for which both are given; masks (n_lines,).

    Only for strengths that hold Q and abundance (HITRAN format), with Q of TIPS-2021.
    """
    compared = np.isfinite(lines.einstein_a) & np.isfinite(lines.upper_weight) & (lines.strength > 0.0)
    compared &= (lines.einstein_a > 0.0) & (lines.upper_weight > 0.0) & (lines.lower_energy >= 0.0)
    partition = np.full(max(len(lines.isotopologues), 1), np.nan)
    abundance = np.array([one.abundance for one in lines.isotopologues] or [1.0])
    for number, (one, basis) in enumerate(zip(lines.isotopologues, lines.basis, strict=True)):
        if one.known and basis.holds_partition and basis.temperature == REFERENCE_TEMPERATURE:
            try:
                partition[number] = tips("TIPS-2021", one)(REFERENCE_TEMPERATURE)
            except MoleculeError:  # an isotopologue that this edition lacks is not compared
                continue
    q = partition[lines.isotopologue] if len(lines) else np.empty(0)
    compared &= np.isfinite(q)
    computed = strength_from_einstein_a(
        lines.wavenumber,
        lines.lower_energy,
        lines.einstein_a,
        lines.upper_weight,
        abundance[lines.isotopologue] if len(lines) else np.empty(0),
        REFERENCE_TEMPERATURE,
        q,
    )
    with np.errstate(divide="ignore", invalid="ignore"):
        off = np.abs(computed / lines.strength - 1.0) > STRENGTH_AGREES
    return compared & off, compared
