"""The carbon monoxide sample against positions, strengths and energies from outside.  Read here in plain Python."""

from __future__ import annotations

import csv
import math
import os
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

import pytest

SAMPLE = Path(__file__).resolve().parents[2] / "data-samples" / "carbon-monoxide.par"
STANDARDS = Path(__file__).parent / "data" / "co_wavenumber_standards.csv"
REAL_LINES = os.environ.get("OPACITY_REAL_LINES", "")

# Terrestrial share of (12C)(16O) in HITRAN (Gordon et al. 2022, JQSRT 277, 107949).
ABUNDANCE = 0.9865444
# Q(296 K): TIPS-2021 (Gamache et al. 2021, JQSRT 271, 107713).
PARTITION_SUM_296 = 107.42
# c2 (cm K) and c (cm/s): CODATA 2018.
C2, LIGHT_SPEED = 1.438776877, 2.99792458e10

# S at 296 K, cm/molecule, of 1-0 R(0) to R(10), terrestrial abundance included, as HITRAN gives them (cite Gordon et
# al. 2022, JQSRT 277, 107949; an edition of CO before the newest measurements).
HITRAN_R_BRANCH = [
    9.290e-20,
    1.828e-19,
    2.646e-19,
    3.342e-19,
    3.884e-19,
    4.253e-19,
    4.444e-19,
    4.465e-19,
    4.335e-19,
    4.079e-19,
    3.729e-19,
]


@dataclass(frozen=True)
class Record:
    wavenumber: float
    strength: float
    einstein_a: float
    gamma_air: float
    gamma_self: float
    lower_energy: float
    n_air: float
    upper_v: int
    lower_v: int
    branch: str
    lower_j: int
    upper_g: float
    lower_g: float

    @property
    def m(self) -> int:
        return self.lower_j + 1 if self.branch == "R" else -self.lower_j


Lines = dict[tuple[int, str, int], Record]


def read_record(text: str) -> Record:
    assert text[:3] == " 51"
    branch, lower_j = text[112:127].split()
    return Record(
        wavenumber=float(text[3:15]),
        strength=float(text[15:25]),
        einstein_a=float(text[25:35]),
        gamma_air=float(text[35:40]),
        gamma_self=float(text[40:45]),
        lower_energy=float(text[45:55]),
        n_air=float(text[55:59]),
        upper_v=int(text[67:82]),
        lower_v=int(text[82:97]),
        branch=branch,
        lower_j=int(lower_j),
        upper_g=float(text[146:153]),
        lower_g=float(text[153:160]),
    )


def read_list(path: Path) -> Lines:
    records = [read_record(text) for text in path.read_text(encoding="ascii").splitlines()]
    return {(record.lower_v, record.branch, record.lower_j): record for record in records}


def read_standards(kind: str) -> dict[str, float]:
    with STANDARDS.open(encoding="utf-8", newline="") as stream:
        rows = [row for row in csv.DictReader(stream) if row["line"].startswith(f"CO {kind}")]
    return {row["line"].split()[-1]: float(row["wavenumber_cm-1"]) for row in rows}


@pytest.fixture(scope="module")
def sample() -> Lines:
    return read_list(SAMPLE)


@pytest.fixture(scope="module")
def real() -> Lines:
    return read_list(Path(REAL_LINES) / "CO.par")


def test_both_bands_are_complete(sample: Lines) -> None:
    wanted = {(v, "R", j) for v in (0, 1) for j in range(51)} | {(v, "P", j) for v in (0, 1) for j in range(1, 51)}
    assert set(sample) == wanted
    assert all(record.upper_v == record.lower_v + 1 for record in sample.values())


def test_weights_and_energies(sample: Lines) -> None:
    for record in sample.values():
        upper_j = record.lower_j + (1 if record.branch == "R" else -1)
        assert record.upper_g == 2 * upper_j + 1
        assert record.lower_g == 2 * record.lower_j + 1
        assert record.lower_energy >= 0.0
        assert record.strength > 0.0
        assert record.einstein_a > 0.0
    assert sample[0, "R", 0].lower_energy == 0.0


def test_positions_meet_the_heterodyne_standards(sample: Lines) -> None:
    standards = read_standards("1-0")
    assert len(standards) == 9
    for name, wavenumber in standards.items():
        branch, j = name[0], int(name[2:-1])
        # CRC Handbook of Chemistry and Physics (A. Maki).
        assert sample[0, branch, j].wavenumber == pytest.approx(wavenumber, abs=1e-5), name


def test_energies_meet_the_rotational_standards(sample: Lines) -> None:
    standards = read_standards("v=0")
    assert len(standards) == 8
    for name, wavenumber in standards.items():
        upper, lower = (int(j) for j in name.removeprefix("J=").split("-"))
        found = sample[0, "R", upper].lower_energy - sample[0, "R", lower].lower_energy
        # CDMS entry 28503.
        assert found == pytest.approx(wavenumber, abs=1e-4), name


def test_combination_differences_meet_the_rotational_standards(sample: Lines) -> None:
    """R(J) and P(J+2) end on the same level: their distance is the energy of J+2 above J, free of its rounding."""
    rotation = read_standards("v=0")
    for j in range(7):
        found = sample[0, "R", j].wavenumber - sample[0, "P", j + 2].wavenumber
        wanted = rotation[f"J={j + 1}-{j}"] + rotation[f"J={j + 2}-{j + 1}"]
        # As near as single positions are held to the standards above.
        assert found == pytest.approx(wanted, abs=1e-5), f"J={j}"


def test_strengths_meet_hitran(sample: Lines) -> None:
    """No independent proof of the band's strength: both rest on Zou & Varanasi 2002 or its like; it is of all else."""
    for j, strength in enumerate(HITRAN_R_BRANCH):
        assert sample[0, "R", j].strength == pytest.approx(strength, rel=3e-3), f"R({j})"


def test_sum_is_the_band_strength_it_was_made_for(sample: Lines) -> None:
    total = math.fsum(record.strength for record in sample.values() if record.lower_v == 0)
    # Zou & Varanasi 2002, JQSRT 75, 63: 1.013e-17 cm/molecule, 0.7 %; the dipole moment was fitted to it.
    assert total / ABUNDANCE == pytest.approx(1.013e-17, rel=7e-3)


def rounding(value: float) -> float:
    """Largest relative error of a number printed with four figures."""
    return 0.5 * 10.0 ** (math.floor(math.log10(value)) - 3) / value


def test_einstein_coefficients_follow_from_strengths(sample: Lines) -> None:
    """A from S by the appendix of Rothman et al. 1998, JQSRT 60, 665, within the rounding of both."""
    for record in sample.values():
        boltzmann = math.exp(-C2 * record.lower_energy / 296.0) * -math.expm1(-C2 * record.wavenumber / 296.0)
        front = 8.0 * math.pi * LIGHT_SPEED * record.wavenumber**2 * PARTITION_SUM_296
        found = front * record.strength / (ABUNDANCE * record.upper_g * boltzmann)
        # Q(296 K) above has five figures: 1e-5 for it and for the energy's rounding.
        bound = rounding(record.strength) + rounding(record.einstein_a) + 1e-5
        assert found == pytest.approx(record.einstein_a, rel=bound)


def test_hot_band_follows_the_harmonic_rule(sample: Lines) -> None:
    """A of 2-1 over A of 1-0 is 2 (nu/nu)^3, for the same J'' and branch."""
    for j in range(1, 51):
        for branch in "PR":
            hot, cold = sample[1, branch, j], sample[0, branch, j]
            wanted = 2.0 * (hot.wavenumber / cold.wavenumber) ** 3
            bound = rounding(hot.einstein_a) + rounding(cold.einstein_a) + 1e-8
            assert hot.einstein_a / cold.einstein_a == pytest.approx(wanted, rel=bound)


def worst(pairs: Iterable[tuple[float, float]], *, relative: bool) -> float:
    return max(abs(found - wanted) / (wanted if relative else 1.0) for found, wanted in pairs)


needs_real_lines = pytest.mark.skipif(not REAL_LINES, reason="OPACITY_REAL_LINES is not set")


@pytest.mark.real_lines
@needs_real_lines
@pytest.mark.parametrize(
    ("lower_v", "highest_m", "position", "strength", "count"),
    [(0, 20, 1.0e-4, 2.0e-3, 40), (0, 51, 5.8e-4, 6.0e-3, 101), (1, 51, 6.0e-4, 1.0e-2, 96)],
)
def test_real_lines(
    sample: Lines, real: Lines, lower_v: int, highest_m: int, position: float, strength: float, count: int
) -> None:
    """Against HITRAN (Gordon et al. 2022, JQSRT 277, 107949)."""
    both = [
        (sample[key], real[key])
        for key in sample
        if key in real and key[0] == lower_v and abs(sample[key].m) <= highest_m
    ]
    assert len(both) == count
    assert worst(((a.wavenumber, b.wavenumber) for a, b in both), relative=False) <= position
    assert worst(((a.strength, b.strength) for a, b in both), relative=True) <= strength


@pytest.mark.real_lines
@needs_real_lines
def test_real_widths(sample: Lines, real: Lines) -> None:
    """Between the lines whose widths were taken, the curve stays within 3 % (self has two figures only)."""
    both = [(sample[key], real[key]) for key in sample if key in real and abs(sample[key].m) <= 41]
    assert worst(((a.gamma_air, b.gamma_air) for a, b in both), relative=True) <= 0.01
    assert worst(((a.gamma_self, b.gamma_self) for a, b in both), relative=True) <= 0.03
    assert worst(((a.n_air, b.n_air) for a, b in both), relative=False) <= 0.015
