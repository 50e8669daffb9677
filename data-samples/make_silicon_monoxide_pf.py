"""The partition function of (28Si)(16O) beside the recipes, summed over the levels of a catalogue list.

    python data-samples/make_silicon_monoxide_pf.py c044505.cat

The list is CDMS 044505, version 2 (Mueller et al. 2013, J. Phys. Chem. A 117, 13843), lines within v = 0 to 10, which
the general package linecat carries.  Each line names its two levels by J and v and gives the energy of the lower one;
the upper one lies the wavenumber above it.  Q is the sum of (2J + 1) exp(-c2 E / T) over the 1201 levels.  Levels
above v = 10 are missing: nothing up to 1000 K, 3e-4 at 2000 K.
"""

from __future__ import annotations

import math
import sys
from pathlib import Path

C2 = 1.438776877  # cm K, CODATA 2018
LIGHT_SPEED = 29979.2458  # MHz cm
TEMPERATURES = [*(0.5 * t for t in range(4, 40)), *range(20, 60, 5), *range(60, 300, 20), *range(300, 2001, 50)]
TARGET = Path(__file__).resolve().parents[1] / "recipes" / "silicon-monoxide.pf"


def number(text: str) -> int:
    """Two characters of a quantum number: A0 is 100."""
    tens = text[0]
    return (10 * (ord(tens) - ord("A") + 10) if tens.isalpha() else 10 * int(tens.strip() or 0)) + int(text[1])


def levels_of(path: Path) -> dict[tuple[int, int], float]:
    """Energy (cm-1) by J and v of all levels that the records name."""
    levels: dict[tuple[int, int], float] = {}
    for record in path.read_text(encoding="ascii").splitlines():
        frequency, error, energy = float(record[:13]), float(record[13:21]), float(record[31:41])
        upper, lower = ((number(record[i : i + 2]), number(record[i + 2 : i + 4])) for i in (55, 67))
        levels[lower] = energy
        levels.setdefault(upper, energy + (frequency / LIGHT_SPEED if error >= 0.0 else frequency))
    return levels


def partition_sum(levels: dict[tuple[int, int], float], temperature: float) -> float:
    """The sum over the levels."""
    return math.fsum((2 * j + 1) * math.exp(-C2 * energy / temperature) for (j, _), energy in levels.items())


def text_of(path: Path) -> str:
    """Rows of T (K) and Q."""
    levels = levels_of(path)
    return "".join(f"{t:8.1f} {partition_sum(levels, t):14.5f}\n" for t in TEMPERATURES)


if __name__ == "__main__":
    TARGET.write_text(text_of(Path(sys.argv[1])), encoding="ascii")
