"""Write the list of an invented molecule: `python data-samples/make_invented.py`.

Every number here is made up.  The molecule "Vl" exists nowhere; its list is for trying the
program on a species that hapi does not know, and for nothing else.  It is consistent in itself: all lines
run between the levels that `make_levels` returns, and the partition function sums the same levels.
"""

from __future__ import annotations

import math
import random
import sys
from dataclasses import dataclass
from pathlib import Path

from line_records import DIPOLE_TO_EINSTEIN, REFERENCE_TEMPERATURE, SECOND_RADIATION, Line, record, strength

FOLDER = Path(__file__).resolve().parent
NAME = "invented-molecule"

MOLECULE, ISOTOPOLOGUE = 99, 1
HIGHEST_J = 60
SEED = 20077
TEMPERATURES = range(50, 3001, 10)
"""Rows of the partition function, K."""

Levels = dict[str, list[float]]


@dataclass(frozen=True)
class Vibration:
    """A vibrational state: origin and constants in cm-1; `scatter` shifts its levels at random by up to so much."""

    origin: float
    b: float
    d: float
    scatter: float = 0.0


@dataclass(frozen=True)
class Band:
    """Lines from `lower` to `upper`.  `dipole` in debye; `spread` is the random range of a line, in powers of ten."""

    upper: str
    lower: str
    dipole: float
    perpendicular: bool
    spread: float = 0.0


VIBRATIONS = {
    "0 0 0": Vibration(0.0, 0.4120, 1.5e-7),
    "0 1 0": Vibration(612.7, 0.4131, 1.6e-7),
    "1 0 0": Vibration(2911.3, 0.4098, 1.5e-7),
    "0 0 1": Vibration(3074.8, 0.4089, 1.5e-7),
    "1 1 0": Vibration(3509.2, 0.4109, 1.6e-7),
    "0 1 1": Vibration(3668.1, 0.4100, 1.6e-7),
    "0 5 0": Vibration(2987.6, 0.4161, 1.9e-7, scatter=6.0),
    "1 0 1": Vibration(3021.4, 0.4065, 1.5e-7, scatter=8.0),
    "0 6 0": Vibration(3597.5, 0.4170, 2.0e-7, scatter=6.0),
    "1 1 1": Vibration(3631.0, 0.4077, 1.6e-7, scatter=8.0),
}

BANDS = (
    Band("1 0 0", "0 0 0", 0.080, perpendicular=False),
    Band("0 0 1", "0 0 0", 0.055, perpendicular=True),
    Band("1 1 0", "0 1 0", 0.080, perpendicular=False),
    Band("0 1 1", "0 1 0", 0.055, perpendicular=True),
    Band("0 5 0", "0 0 0", 0.002, perpendicular=True, spread=4.0),
    Band("1 0 1", "0 0 0", 0.002, perpendicular=True, spread=4.0),
    Band("0 6 0", "0 1 0", 0.002, perpendicular=True, spread=4.0),
    Band("1 1 1", "0 1 0", 0.002, perpendicular=True, spread=4.0),
)
"""Four regular bands and four that make a weak forest."""


def make_levels() -> Levels:
    """Energy (cm-1) of every level of the molecule: J = 0..60 of each vibrational state."""
    # random() of random.Random gives the same numbers in every version of Python.
    chance = random.Random(SEED)
    levels = {}
    for name, state in VIBRATIONS.items():
        turns = [j * (j + 1) for j in range(HIGHEST_J + 1)]
        levels[name] = [
            state.origin + state.b * x - state.d * x * x + state.scatter * (2.0 * chance.random() - 1.0) for x in turns
        ]
    return levels


def partition_sum(levels: Levels, temperature: float) -> float:
    """Q(T): the sum over all levels with weights 2J + 1."""
    return math.fsum(
        (2 * j + 1) * math.exp(-SECOND_RADIATION * energy / temperature)
        for energies in levels.values()
        for j, energy in enumerate(energies)
    )


def line_factor(branch: str, j: int, perpendicular: bool) -> float:
    """Hoenl-London factor of a line from J'' = j; over the branches of a band it sums to 2j + 1."""
    if perpendicular:
        return {"P": (j - 1) / 2.0, "Q": (2 * j + 1) / 2.0 if j else 0.0, "R": (j + 2) / 2.0}[branch]
    return {"P": float(j), "Q": 0.0, "R": float(j + 1)}[branch]


def make_line(band: Band, branch: str, j: int, levels: Levels, scale: float, q296: float) -> Line:
    """One line of a band; `scale` multiplies its squared dipole."""
    upper_j = j + {"P": -1, "Q": 0, "R": 1}[branch]
    m = j + 1 if branch == "R" else j
    lower_energy = levels[band.lower][j]
    wavenumber = levels[band.upper][upper_j] - lower_energy
    factor = line_factor(branch, j, band.perpendicular)
    einstein_a = DIPOLE_TO_EINSTEIN * wavenumber**3 * band.dipole**2 * scale * factor / (2 * upper_j + 1)
    forest = band.spread > 0.0
    return Line(
        molecule=MOLECULE,
        isotopologue=ISOTOPOLOGUE,
        wavenumber=wavenumber,
        strength=strength(einstein_a, wavenumber, lower_energy, 2 * upper_j + 1, q296, abundance=1.0),
        einstein_a=einstein_a,
        lower_energy=lower_energy,
        upper_vibration=band.upper,
        lower_vibration=band.lower,
        branch=branch,
        lower_j=j,
        gamma_air=0.048 + 0.045 * math.exp(-m / 14.0),
        # The forest has no self widths: 0 means missing, and a recipe must give a default.
        gamma_self=0.0 if forest else 0.070 + 0.060 * math.exp(-m / 11.0),
        n_air=0.58 + 0.15 * math.exp(-m / 20.0),
        delta_air=0.0 if forest else -0.0012 - 2.5e-5 * m,
    )


def make_lines(levels: Levels) -> list[Line]:
    """All lines of all bands, rising in wavenumber."""
    chance = random.Random(SEED + 1)
    q296 = partition_sum(levels, REFERENCE_TEMPERATURE)
    lines = []
    for band in BANDS:
        for branch, first, last in (("P", 1, HIGHEST_J), ("Q", 0, HIGHEST_J), ("R", 0, HIGHEST_J - 1)):
            for j in range(first, last + 1):
                scale = 10.0 ** (band.spread * (chance.random() - 1.0))
                if line_factor(branch, j, band.perpendicular) > 0.0:
                    lines.append(make_line(band, branch, j, levels, scale, q296))
    return sorted(lines, key=lambda line: line.wavenumber)


def main(folder: Path = FOLDER) -> list[Path]:
    """Write the list and its partition function into a folder and return their paths."""
    levels = make_levels()
    list_path, partition_path = folder / f"{NAME}.par", folder / f"{NAME}.pf"
    text = "".join(record(line) + "\n" for line in make_lines(levels))
    list_path.write_bytes(text.encode("ascii"))
    rows = (f"{temperature:8.1f} {partition_sum(levels, temperature):18.6f}\n" for temperature in TEMPERATURES)
    partition_path.write_bytes("".join(rows).encode("ascii"))
    return [list_path, partition_path]


if __name__ == "__main__":
    for written in main():
        print(written, file=sys.stderr)
