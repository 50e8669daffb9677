"""Write the sample list of carbon monoxide: `python data-samples/make_carbon_monoxide.py`.

Nothing here is copied from a line list.  Positions and lower-state energies come from Dunham
constants, strengths from one published band strength, widths from a smooth curve through printed
values of a few lines.  `README.md` says how near the result comes to measured lines.
"""

from __future__ import annotations

import contextlib
import io
import json
import sys
from pathlib import Path

import numpy as np
from line_records import DIPOLE_TO_EINSTEIN, REFERENCE_TEMPERATURE, Line, record, strength
from scipy.interpolate import PchipInterpolator

FOLDER = Path(__file__).resolve().parent
NAME = "carbon-monoxide"

MOLECULE, ISOTOPOLOGUE = 5, 1
"""HITRAN numbers of (12C)(16O)."""

HIGHEST_J = 50
"""Largest J'' in either branch of either band."""

DUNHAM = {
    (1, 0): 2169.8135802 - 3.139e-4,
    (2, 0): -13.2883076,
    (3, 0): 0.01051127,
    (4, 0): 5.744e-5,
    (5, 0): 9.831e-7,
    (6, 0): -3.166e-8,
    (0, 1): 1.9312808724,
    (1, 1): -0.0175044121,
    (2, 1): 5.487e-7,
    (3, 1): 2.541e-8,
    (0, 2): -6.121468e-6,
    (1, 2): 1.1526e-9,
    (2, 2): -1.805e-10,
    (0, 3): 5.8272e-12,
    (1, 3): -1.7375e-13,
}
"""Y_lk of (12C)(16O), cm-1: E = sum Y_lk (v + 1/2)^l [J(J + 1)]^k.

Leading terms: Huber & Herzberg 1979, Constants of Diatomic Molecules; higher orders from memory.  Y10 is
lowered by 3.139e-4 to meet the heterodyne standards of the 1-0 band (CRC Handbook of Chemistry
and Physics, A. Maki).
"""

TRANSITION_DIPOLE = 0.106463
"""M10 in debye, from the strength of the 1-0 band of Zou & Varanasi 2002, JQSRT 75, 63: 1.013e-17 cm/molecule."""

HERMAN_WALLIS = (1.77e-4, 7.14e-6)
"""M^2 is multiplied by 1 + a m + b m^2, m = J'' + 1 (R) or -J'' (P): from memory, checked against measured lines."""

WIDTH_AT_M = (1, 5, 6, 10, 11, 20, 21, 41)
WIDTHS = {
    "gamma_air": (0.0803, 0.0651, 0.0632, 0.0586, 0.0577, 0.0510, 0.0503, 0.0395),
    "gamma_self": (0.087, 0.071, 0.069, 0.064, 0.063, 0.054, 0.053, 0.042),
    "n_air": (0.76, 0.74, 0.74, 0.75, 0.75, 0.67, 0.67, 0.67),
    "gamma_h2": (0.0755, 0.0700, 0.0699, 0.0697, 0.0697, 0.0690, 0.0689, 0.0669),
    "gamma_he": (0.0490, 0.0464, 0.0464, 0.0469, 0.0470, 0.0464, 0.0463, 0.0451),
    "n_h2": (0.66, 0.65, 0.65, 0.64, 0.65, 0.62, 0.61, 0.48),
    "n_he": (0.51, 0.53, 0.54, 0.58, 0.58, 0.55, 0.54, 0.52),
}
"""Half-widths (cm-1/atm, 296 K) and exponents of P(1) and R(0), P(5), R(5), P(10), R(10), P(20), R(20), R(40) of 1-0.

As printed for these lines in HITRAN (Gordon et al. 2022, JQSRT 277, 107949).  Other |m| lie on a
monotone cubic through them; beyond |m| = 41 the last value is kept.
"""

EXTRA_COLUMNS = {"gamma_h2": "%6.4f", "gamma_he": "%6.4f", "n_h2": "%7.4f", "n_he": "%7.4f"}

COLUMNS = {
    "molec_id": ("%2d", "HITRAN number of the molecule"),
    "local_iso_id": ("%1d", "HITRAN number of the isotopologue within the molecule"),
    "nu": ("%12.6f", "Wavenumber in cm-1"),
    "sw": ("%10.3E", "Strength at 296 K in cm/molecule, terrestrial abundance included"),
    "a": ("%10.3E", "Einstein A coefficient in s-1"),
    "gamma_air": ("%5.4f", "Half-width at half maximum in air in cm-1/atm at 296 K"),
    "gamma_self": ("%5.3f", "Half-width at half maximum in the gas itself in cm-1/atm at 296 K"),
    "elower": ("%10.4f", "Lower-state energy in cm-1"),
    "n_air": ("%4.2f", "Temperature exponent of the half-width in air"),
    "delta_air": ("%8.6f", "Pressure shift in air in cm-1/atm; 0 where not given"),
    "global_upper_quanta": ("%15s", "Vibrational quantum number of the upper state"),
    "global_lower_quanta": ("%15s", "Vibrational quantum number of the lower state"),
    "local_upper_quanta": ("%15s", "Rotational quantum numbers of the upper state (blank)"),
    "local_lower_quanta": ("%15s", "Branch and J of the lower state"),
    "ierr": ("%6s", "Uncertainty codes; 0 where not stated"),
    "iref": ("%12s", "Reference numbers; 0 where not stated"),
    "line_mixing_flag": ("%1s", "Line-mixing flag"),
    "gp": ("%7.1f", "Statistical weight of the upper state"),
    "gpp": ("%7.1f", "Statistical weight of the lower state"),
}
"""Fields of a record: printf format and meaning, in order."""


def level_energy(v: int, j: int) -> float:
    """Energy of a level above v = 0, J = 0, cm-1."""
    return _dunham(v, j) - _dunham(0, 0)


def _dunham(v: int, j: int) -> float:
    return sum(y * (v + 0.5) ** power_v * (j * (j + 1)) ** power_j for (power_v, power_j), y in DUNHAM.items())


def squared_dipole(lower_v: int, m: int) -> float:
    """M^2 of a line of the band v+1 - v, debye^2.  Harmonic scaling with v: M^2(v+1, v) = (v + 1) M10^2."""
    a, b = HERMAN_WALLIS
    return float((lower_v + 1) * TRANSITION_DIPOLE**2 * (1.0 + a * m + b * m * m))


def widths(m: int) -> dict[str, float]:
    """All widths and exponents at m, by column name."""
    at = min(abs(m), WIDTH_AT_M[-1])
    return {name: float(PchipInterpolator(WIDTH_AT_M, values)(at)) for name, values in WIDTHS.items()}


def partition_sum_and_abundance() -> tuple[float, float]:
    """Q(296 K) of TIPS-2021 (Gamache et al. 2021, JQSRT 271, 107713) and the terrestrial abundance, from hapi."""
    with contextlib.redirect_stdout(io.StringIO()):
        import hapi
    q = hapi.partitionSum(MOLECULE, ISOTOPOLOGUE, REFERENCE_TEMPERATURE, version=2021)
    return float(q), float(hapi.ISO[(MOLECULE, ISOTOPOLOGUE)][hapi.ISO_INDEX["abundance"]])


def make_line(lower_v: int, branch: str, j: int, partition_sum: float, abundance: float) -> Line:
    """The line `branch`(j) of the band lower_v + 1 - lower_v."""
    upper_j, m = (j + 1, j + 1) if branch == "R" else (j - 1, -j)
    lower_energy = level_energy(lower_v, j)
    wavenumber = level_energy(lower_v + 1, upper_j) - lower_energy
    upper_g = 2 * upper_j + 1
    einstein_a = DIPOLE_TO_EINSTEIN * wavenumber**3 * squared_dipole(lower_v, m) * abs(m) / upper_g
    width = widths(m)
    return Line(
        molecule=MOLECULE,
        isotopologue=ISOTOPOLOGUE,
        wavenumber=wavenumber,
        strength=strength(einstein_a, wavenumber, lower_energy, upper_g, partition_sum, abundance),
        einstein_a=einstein_a,
        lower_energy=lower_energy,
        upper_vibration=str(lower_v + 1),
        lower_vibration=str(lower_v),
        branch=branch,
        lower_j=j,
        gamma_air=width["gamma_air"],
        gamma_self=width["gamma_self"],
        n_air=width["n_air"],
    )


def make_lines() -> list[Line]:
    """The bands 1-0 and 2-1, rising in wavenumber."""
    partition_sum, abundance = partition_sum_and_abundance()
    numbers = [
        (lower_v, branch, j)
        for lower_v in (0, 1)
        for branch, first in (("P", 1), ("R", 0))
        for j in range(first, HIGHEST_J + 1)
    ]
    lines = [make_line(*number, partition_sum, abundance) for number in numbers]
    return sorted(lines, key=lambda line: line.wavenumber)


def extra_fields(line: Line) -> str:
    """The columns for H2 and He that follow the record in the hapi table."""
    width = widths(line.lower_j + 1 if line.branch == "R" else -line.lower_j)
    return "".join("," + (form % width[name]).strip() for name, form in EXTRA_COLUMNS.items())


def header(rows: int) -> str:
    """The JSON header that hapi keeps beside a local table."""
    names = list(COLUMNS)
    lengths = [int(form[1:-1].split(".")[0]) for form, _ in COLUMNS.values()]
    content = {
        "table_name": NAME,
        "number_of_rows": rows,
        "table_type": "column-fixed",
        "size_in_bytes": -1,
        "comment": "Sample list computed from published constants; see README.md beside it",
        "order": names,
        "format": {name: form for name, (form, _) in COLUMNS.items()},
        "position": {name: int(start) for name, start in zip(names, np.cumsum([0, *lengths[:-1]]), strict=True)},
        "default": {name: "" if form.endswith("s") else 0 for name, (form, _) in COLUMNS.items()},
        "description": {name: text for name, (_, text) in COLUMNS.items()},
        "extra": list(EXTRA_COLUMNS),
        "extra_format": EXTRA_COLUMNS,
        "extra_separator": ",",
    }
    return json.dumps(content, indent=2) + "\n"


def main(folder: Path = FOLDER) -> list[Path]:
    """Write the three files into a folder and return their paths."""
    lines = make_lines()
    texts = {
        ".par": "".join(record(line) + "\n" for line in lines),
        ".data": "".join(record(line) + extra_fields(line) + "\n" for line in lines),
        ".header": header(len(lines)),
    }
    paths = []
    for ending, text in texts.items():
        path = folder / f"{NAME}{ending}"
        path.write_bytes(text.encode("ascii"))
        paths.append(path)
    return paths


if __name__ == "__main__":
    for written in main():
        print(written, file=sys.stderr)
