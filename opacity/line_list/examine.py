"""A look at a list as a whole: it reports, and refuses nothing; what can't be right was refused when it was read."""

from __future__ import annotations

from dataclasses import asdict, dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.constants import REFERENCE_TEMPERATURE
from opacity.errors import MoleculeError
from opacity.kernels.line_strength import strength_from_einstein_a
from opacity.line_list.duplicates import Repeats
from opacity.line_list.model import LineList
from opacity.molecule.isotopologue import Isotopologue
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


@dataclass
class _Tally:
    """Lines of one finding: how many, their strength, and where they lie (cm-1, strongest in cm/molecule)."""

    lines: int = 0
    strength: float = 0.0
    lowest: float = np.inf
    highest: float = -np.inf
    strongest: float = 0.0

    def add(self, lines: LineList, mask: NDArray[np.bool_] | None = None) -> None:
        """Count the lines of a mask (n_lines,), or all."""
        strength = lines.strength if mask is None else lines.strength[mask]
        if strength.size:
            nu = lines.wavenumber if mask is None else lines.wavenumber[mask]
            self.lines += int(strength.size)
            self.strength += float(np.sum(strength))
            self.lowest, self.highest = min(self.lowest, float(nu.min())), max(self.highest, float(nu.max()))
            self.strongest = max(self.strongest, float(strength.max()))

    def where(self) -> str:
        """Where the lines lie, empty where there are none."""
        if not self.lines:
            return ""
        ends = f"between {self.lowest:.6g} and {self.highest:.6g} cm-1"
        return f"{ends}, the strongest with S = {self.strongest:.2e}"


class Examination:
    """What is worth knowing of a list before it is used, from its parts in the order of its file.

    `all` counts all lines; `isotopologues` are those found; `complete` says whether all repeated records were found.
    """

    def __init__(self) -> None:
        self.all = _Tally()
        self.isotopologues: list[Isotopologue] = []
        self._repeats = Repeats()
        self._repeated, self._unknown_energy, self._nothing, self._differ = (_Tally() for _ in range(4))
        self._compared = 0
        self._broadeners: dict[str, dict[str, _Tally]] = {}

    @property
    def complete(self) -> bool:
        """Whether repeated records were looked for among all lines."""
        return self._repeats.complete

    @property
    def repeated(self) -> int:
        """How many lines are identical to one before them."""
        return self._repeated.lines

    def add(self, lines: LineList) -> None:
        """Take in the next lines."""
        self.isotopologues += [one for one in lines.isotopologues if one not in self.isotopologues]
        number = np.array([self.isotopologues.index(one) for one in lines.isotopologues] or [0], dtype=np.int16)
        self.all.add(lines)
        self._repeated.add(lines, self._repeats.add(lines, number[lines.isotopologue]))
        self._unknown_energy.add(lines, lines.lower_energy < 0.0)
        self._nothing.add(lines, lines.strength == 0.0)
        differ, compared = strength_against_a(lines)
        self._compared += int(np.count_nonzero(compared))
        self._differ.add(lines, differ)
        for name, one in lines.broadeners.items():
            of = self._broadeners.setdefault(name, {kind: _Tally() for kind in ("width", "exponent", "shift", "seen")})
            of["width"].add(lines, np.isnan(one.gamma))
            of["exponent"].add(lines, np.isnan(one.exponent) & ~np.isnan(one.gamma))
            of["shift"].add(lines, np.isnan(one.shift))
            of["seen"].add(lines)

    def findings(self) -> list[Finding]:
        """What was noticed, in order of the share of strength concerned."""
        total = max(self.all.strength, 1e-300)

        def finding(what: str, of: _Tally, detail: str = "") -> Finding:
            return Finding(what, of.lines, of.strength / total, detail)

        found = [
            finding("identical to another record", self._repeated),
            finding("lower-state energy unknown (below 0)", self._unknown_energy),
            finding("strength 0", self._nothing),
        ]
        words = f"S and the strength from A differ by over {100.0 * STRENGTH_AGREES:g} % (of {self._compared} lines)"
        found.append(finding(words, self._differ, self._differ.where()))
        for name, one in sorted(self._broadeners.items()):
            # A part without the broadener's columns gives none for any of its lines.
            lines, strength = self.all.lines - one["seen"].lines, self.all.strength - one["seen"].strength
            width, shift = (
                replace(of, lines=of.lines + lines, strength=of.strength + strength)
                for of in (one["width"], one["shift"])
            )
            found.append(finding(f"no width by {name}", width))
            found.append(finding(f"no temperature exponent for {name}", one["exponent"]))
            found.append(finding(f"no pressure shift by {name}", shift))
        return sorted((one for one in found if one.lines), key=lambda one: -one.share)


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
