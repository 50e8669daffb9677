"""One line of a sample list: its strength at 296 K and its 160-character record.

Record layout: Rothman et al. 2005, JQSRT 96, 139, table 1 (widths of the fields read from the
header that hapi writes).  Fields that a sample can't fill (uncertainty codes, references) hold 0,
which in that layout means "not stated".
"""

from __future__ import annotations

import math
from dataclasses import dataclass

LIGHT_SPEED = 2.99792458e10
"""cm s-1, exact."""

SECOND_RADIATION = 1.438776877
"""c2 = h c / k, cm K (CODATA 2018)."""

REFERENCE_TEMPERATURE = 296.0
"""K, of strengths and widths in this layout (Rothman et al. 1998, JQSRT 60, 665)."""

DIPOLE_TO_EINSTEIN = 3.1361887e-7
"""64 pi^4 / (3 h) in s-1 cm3 D-2: A = this * nu^3 * M^2 * (line factor) / (2J' + 1)."""


@dataclass(frozen=True)
class Line:
    """A transition.  Wavenumber and energy in cm-1, A in s-1, strength in cm/molecule, widths in cm-1/atm."""

    molecule: int
    isotopologue: int
    wavenumber: float
    strength: float
    einstein_a: float
    lower_energy: float
    upper_vibration: str
    lower_vibration: str
    branch: str
    lower_j: int
    gamma_air: float
    gamma_self: float
    n_air: float
    delta_air: float = 0.0

    @property
    def upper_j(self) -> int:
        """J' of the branch: R is J'' + 1, Q is J'', P is J'' - 1."""
        return self.lower_j + {"P": -1, "Q": 0, "R": 1}[self.branch]


def strength(
    einstein_a: float, wavenumber: float, lower_energy: float, upper_g: int, partition_sum: float, abundance: float
) -> float:
    """S at 296 K, cm/molecule, from A (s-1); `partition_sum` is Q(296 K).

    S = Ia g' A exp(-c2 E''/T) [1 - exp(-c2 nu/T)] / (8 pi c nu^2 Q)  (Rothman et al. 1998, appendix).
    """
    boltzmann = math.exp(-SECOND_RADIATION * lower_energy / REFERENCE_TEMPERATURE)
    emission = -math.expm1(-SECOND_RADIATION * wavenumber / REFERENCE_TEMPERATURE)
    front = abundance * upper_g * einstein_a / (8.0 * math.pi * LIGHT_SPEED * wavenumber**2 * partition_sum)
    return front * boltzmann * emission


def record(line: Line) -> str:
    """The 160 characters of a line, without a line end."""
    upper_g, lower_g = 2 * line.upper_j + 1, 2 * line.lower_j + 1
    text = (
        f"{line.molecule:2d}{line.isotopologue:1d}{line.wavenumber:12.6f}{line.strength:10.3E}{line.einstein_a:10.3E}"
        f"{_short(line.gamma_air)}{line.gamma_self:5.3f}{line.lower_energy:10.4f}{line.n_air:4.2f}"
        f"{_shift(line.delta_air)}{line.upper_vibration:>15}{line.lower_vibration:>15}"
        f"{'':15}     {line.branch}{line.lower_j:3d}{'':6}"
        f"000000{' 0' * 6} {upper_g:7.1f}{lower_g:7.1f}"
    )
    if len(text) != 160:
        raise ValueError(f"record of {len(text)} characters: {text!r}")
    return text


def _short(width: float) -> str:
    """Five characters, four decimals, no leading zero: '.0803'."""
    return f"{width:6.4f}"[1:]


def _shift(shift: float) -> str:
    """Eight characters: '0.000000' or '-.002861'."""
    return f"{shift:8.6f}" if shift >= 0.0 else "-" + f"{-shift:8.6f}"[1:]
