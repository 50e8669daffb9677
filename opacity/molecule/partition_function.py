"""Partition functions Q(T), each with the range in which it can be trusted.

TIPS (Gamache et al. 2021, JQSRT 271, 107713; Gamache et al. 2025, JQSRT 345, 109568) comes
through hapi.  Its tables were examined for smoothness: a value that a cubic through
its four neighbours misses by more than 0.15 % is a step, and beyond a step (seen from 296 K)
the ratio Q(T)/Q(296 K) is off by the step's size, so the range ends there.  Ranges that smoothness can't
find, but a comparison of the two editions or with levels does, are listed in `_LIMITS`.
"""

from __future__ import annotations

import bz2
import gzip
import zlib
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np
from scipy.interpolate import CubicSpline

from opacity.constants import REFERENCE_TEMPERATURE, SECOND_RADIATION
from opacity.errors import MoleculeError, excerpt, one_line, problem
from opacity.grids import FloatArray
from opacity.molecule.hapi_tables import hapi
from opacity.molecule.isotopologue import Isotopologue

TIPS_EDITIONS = {"TIPS-2021": 2021, "TIPS-2025": 2025}

TIPS_LOWEST = 20.0
"""Below 20 K hapi's interpolation of the tables is wrong: CO +0.3 % at 9.4 K, +11 % at 2.7 K (measured)."""

STEEPEST = 60.0
"""d ln Q / d ln T is the mean energy over kT plus 3/2: no molecule with a line list comes near this."""

CLOSEST = 1e-9
"""Rows nearer to each other than this in ln T are no table."""

STEP = 1.5e-3
"""A relative jump from its neighbours above which a tabulated Q counts as a step."""

ROUGH_BELOW = 60.0
"""Down there (K) rows 10 K apart are too far from each other for a cubic to follow ln Q: nothing can be said."""

# Upper ends (K), the last tabulated temperature at which an edition is within 1 % of the other, for the edition
# that is known to be wrong above: there its Q falls against that of a rigid rotor with harmonic oscillators, which
# a sum over all levels does not (measured; TIPS-2021 O2 is 32 % low and N2O 19 % low at 3000 K, TIPS-2025 CH4
# 11-29 % low at 2000-2250 K).  NO of TIPS-2021 rests on NASA polynomials, which TIPS-2025 meets; for H2CO above 1370 K
# it is not settled which edition is right, so neither its fall nor the other's is trusted for TIPS-2025.
_LIMITS = {
    ("TIPS-2021", 4, 1): 1710.0,
    ("TIPS-2021", 7, 1): 750.0,
    ("TIPS-2021", 8, 1): 2480.0,
    ("TIPS-2021", 8, 2): 2450.0,
    ("TIPS-2021", 8, 3): 2420.0,
    ("TIPS-2021", 11, 1): 1960.0,
    ("TIPS-2021", 11, 2): 940.0,
    ("TIPS-2021", 22, 1): 3460.0,
    ("TIPS-2021", 22, 2): 3370.0,
    ("TIPS-2025", 6, 1): 1610.0,
    ("TIPS-2025", 6, 2): 1610.0,
    ("TIPS-2025", 7, 2): 1790.0,
    ("TIPS-2025", 7, 3): 1800.0,
    ("TIPS-2025", 13, 3): 900.0,
    ("TIPS-2025", 20, 1): 1370.0,
}

# Wrong at all temperatures against a rigid rotor with harmonic oscillators, which the other edition meets within
# 1 % at 200-1000 K: Q(1000 K)/Q(296 K) of GeH4 is 66 % low, that of CS2 44 % high (measured).
_UNUSABLE = {
    ("TIPS-2021", 52, 1),
    ("TIPS-2021", 52, 2),
    ("TIPS-2021", 52, 3),
    ("TIPS-2021", 52, 4),
    ("TIPS-2021", 52, 5),
    ("TIPS-2021", 53, 1),
    ("TIPS-2021", 53, 4),
}


@dataclass(frozen=True)
class PartitionFunction:
    """Q(T) of one isotopologue.  `source` names where it came from; `lowest` and `highest` bound its use (K).

    `steps`: temperatures (K) of a file's rows that do not lie smoothly between their neighbours.
    """

    source: str
    lowest: float
    highest: float
    steps: tuple[float, ...] = ()
    _spline: CubicSpline | None = None
    _tips: tuple[int, int, int] | None = None

    def holds(self, temperature: float) -> bool:
        """Whether the temperature (K) lies in the valid range."""
        return self.lowest <= temperature <= self.highest

    def __call__(self, temperature: float) -> float:
        """Q at a temperature (K).  Raises MoleculeError outside the valid range."""
        if not self.lowest <= temperature <= self.highest:
            raise MoleculeError(
                problem(
                    f"partition function {self.source}",
                    "temperature outside its valid range",
                    expected=f"{self.lowest:g} to {self.highest:g} K",
                    found=f"{temperature:g} K",
                    remedy="choose another source or other temperatures",
                )
            )
        if self._tips is not None:
            return tips_value(self._tips, temperature)
        assert self._spline is not None
        return float(np.exp(self._spline(np.log(temperature))))


def tips_value(key: tuple[int, int, int], temperature: float) -> float:
    """Q as hapi gives it, for (edition year, molecule, isotopologue), range not judged."""
    year, molecule, local = key
    return float(hapi().partitionSum(molecule, local, float(temperature), version=year))


def tips(edition: str, isotopologue: Isotopologue) -> PartitionFunction:
    """The TIPS partition function of an isotopologue.  Raises MoleculeError if the edition has no good one."""
    year = TIPS_EDITIONS[edition]
    table = _tips_table(year, isotopologue.molecule, isotopologue.local)
    if table is None or (edition, isotopologue.molecule, isotopologue.local) in _UNUSABLE:
        kind = "values" if table is None else "trustworthy values"
        raise MoleculeError(
            problem(
                "partition_function",
                f"{edition} has no {kind} for {isotopologue.formula} ({isotopologue.molecule_formula})",
                remedy="choose another edition or a file of T and Q",
            )
        ).about("partition_function")
    lowest, highest = _trusted_range(*table)
    highest = min(highest, _LIMITS.get((edition, isotopologue.molecule, isotopologue.local), highest))
    key = (year, isotopologue.molecule, isotopologue.local)
    return PartitionFunction(f"{edition} {isotopologue.formula}", lowest, highest, _tips=key)


@lru_cache(maxsize=512)
def _tips_table(year: int, molecule: int, local: int) -> tuple[FloatArray, FloatArray] | None:
    module = hapi()
    temperatures = getattr(module, f"TIPS_{year}_ISOT_HASH").get((molecule, local))
    values = getattr(module, f"TIPS_{year}_ISOQ_HASH").get((molecule, local))
    # TIPS-2025 holds zeros for the O atom: no values.
    if temperatures is None or values is None or not np.any(np.asarray(values) > 0.0):
        return None
    size = min(len(temperatures), len(values))
    return np.asarray(temperatures[:size], dtype=np.float64), np.asarray(values[:size], dtype=np.float64)


def _trusted_range(temperature: FloatArray, value: FloatArray) -> tuple[float, float]:
    """The stretch around 296 K without a step, not below 20 K."""
    lowest, highest = max(TIPS_LOWEST, float(temperature[0])), float(temperature[-1])
    bad = temperature[~(value > 0.0)]
    bad = np.concatenate([bad, temperature[2:-2][np.abs(neighbour_residuals(temperature, value)) > STEP]])
    bad = bad[bad > ROUGH_BELOW]
    above, below = bad[bad > REFERENCE_TEMPERATURE], bad[bad < REFERENCE_TEMPERATURE]
    if above.size:
        highest = float(temperature[temperature < above.min()][-1])
    if below.size:
        lowest = float(temperature[temperature > below.max()][0])
    return lowest, highest


def neighbour_residuals(temperature: FloatArray, value: FloatArray) -> FloatArray:
    """ln Q at each inner point less the cubic in ln T through its two neighbours on each side, (n - 4,)."""
    with np.errstate(divide="ignore", invalid="ignore"):
        log_t, log_q = np.log(temperature), np.log(value)
        offsets = (-2, -1, 1, 2)
        centre = log_t[2:-2]
        x = [log_t[2 + k : log_t.size - 2 + k] - centre for k in offsets]
        predicted = np.zeros_like(centre)
        for i, k in enumerate(offsets):
            weight = np.ones_like(centre)
            for j in range(4):
                if j != i:
                    weight = weight * x[j] / (x[j] - x[i])
            predicted = predicted + weight * log_q[2 + k : log_q.size - 2 + k]
        return np.asarray(log_q[2:-2] - predicted)


def editions_differ(isotopologue: Isotopologue, temperature: float) -> float:
    """Q(T)/Q(296 K) of TIPS-2021 over that of TIPS-2025, less 1; 0 where one of them has no value."""
    ratios = []
    for year in TIPS_EDITIONS.values():
        table = _tips_table(year, isotopologue.molecule, isotopologue.local)
        if table is None or not table[0][0] <= temperature <= table[0][-1]:
            return 0.0
        key = (year, isotopologue.molecule, isotopologue.local)
        ratios.append(tips_value(key, temperature) / tips_value(key, REFERENCE_TEMPERATURE))
    return ratios[0] / ratios[1] - 1.0


def from_file(path: Path) -> PartitionFunction:
    """A partition function from a text file of two columns, T (K) rising and Q (the ExoMol .pf layout).

    The file is plain, .gz or .bz2.  Interpolated as a cubic spline of ln Q in ln T, never beyond its ends.
    Raises MoleculeError naming the line that can't be right, or the file where it does not hold 296 K, to which the
    strengths of lists refer.
    """
    rows: list[tuple[float, float]] = []
    for number, line in enumerate(_text(path).split("\n"), start=1):
        if not line.strip():
            continue
        rows.append(_row(path, number, line, rows[-1][0] if rows else 0.0))
    if len(rows) < 4:
        raise MoleculeError(problem(path, "too few rows", expected="4 or more of T and Q", found=len(rows)))
    table = np.array(rows)
    temperature, value = table[:, 0], table[:, 1]
    lowest, highest = float(temperature[0]), float(temperature[-1])
    if not lowest <= REFERENCE_TEMPERATURE <= highest:
        what = "the partition function does not hold 296 K, to which the strengths refer"
        found = f"{lowest:g} to {highest:g} K"
        raise MoleculeError(problem(path, what, expected="rows from 296 K or below to 296 K or above", found=found))
    _refuse_jumps(path, temperature, value)
    rough = temperature[2:-2][np.abs(neighbour_residuals(temperature, value)) > STEP]
    steps = tuple(rough[rough > ROUGH_BELOW].tolist())
    spline = CubicSpline(np.log(temperature), np.log(value))
    return PartitionFunction(f"file {path.name}", lowest, highest, steps, _spline=spline)


def from_states(temperature: Sequence[float], value: Sequence[float], highest_energy: float) -> PartitionFunction:
    """A partition function summed over the states of a list, at some temperatures (K), as a spline of ln Q in ln T.

    It is trusted up to where the Boltzmann factor of the highest state (cm-1) is e^-10: what lies above is not there.
    Raises MoleculeError where the sum is 0 at nearly all temperatures: states without weight, or without the lowest.
    """
    t, q = np.asarray(temperature, dtype=np.float64), np.asarray(value, dtype=np.float64)
    # Without the ground state a sum is 0 when it is cold.
    t, q = t[q > 0.0], q[q > 0.0]
    if t.size < 4:
        what = "the sum over the states is 0"
        raise MoleculeError(problem("partition_function", what, remedy="fetch the states again")).about(
            "partition_function"
        )
    highest = min(float(t[-1]), SECOND_RADIATION * highest_energy / 10.0)
    return PartitionFunction("sum over states", float(t[0]), highest, _spline=CubicSpline(np.log(t), np.log(q)))


def _refuse_jumps(path: Path, temperature: FloatArray, value: FloatArray) -> None:
    """Raise MoleculeError where Q changes faster than any can, or rows are too near to each other to tell."""
    apart = np.diff(np.log(temperature))
    slope = np.abs(np.diff(np.log(value))) / np.maximum(apart, CLOSEST)
    steep = np.flatnonzero((slope > STEEPEST) | (apart < CLOSEST))
    if steep.size:
        ends = f"{temperature[steep[0]]:.12g} and {temperature[steep[0] + 1]:.12g} K"
        raise MoleculeError(
            problem(
                path,
                f"no partition function: it jumps between {ends}",
                expected=f"no more than T^{STEEPEST:g}",
                found=f"{value[steep[0]]:g} to {value[steep[0] + 1]:g}",
            )
        )


def _text(path: Path) -> str:
    """The text of a file, decompressed by its ending."""
    try:
        data = path.read_bytes()
        if path.suffix.lower() == ".gz":
            data = gzip.decompress(data)
        elif path.suffix.lower() == ".bz2":
            data = _bunzip2(data)
        return data.decode("ascii")
    except (OSError, ValueError, EOFError, zlib.error) as error:
        raise MoleculeError(problem(path, f"partition function cannot be read ({one_line(error)})")) from error


def _bunzip2(data: bytes) -> bytes:
    """All streams; the standard library's `bz2.decompress` passes over damage behind the first."""
    parts = []
    while data:
        stream = bz2.BZ2Decompressor()
        parts.append(stream.decompress(data))
        if not stream.eof:
            raise EOFError("it ends before its end mark")
        data = stream.unused_data
    return b"".join(parts)


def _row(path: Path, number: int, line: str, previous: float) -> tuple[float, float]:
    fields = line.split()
    try:
        # Python's float also reads 1_0.
        temperature, value = (float(field.replace("_", "?")) for field in fields[:2])
    except ValueError:
        temperature, value = np.nan, np.nan
    if not (previous < temperature < np.inf and 0.0 < value < np.inf):
        raise MoleculeError(
            problem(
                f"{path}:{number}",
                "not a row of a partition function",
                expected=f"T above {previous:g} K and Q above 0",
                found=f'"{excerpt(line.strip(), 40)}"',
            )
        )
    return temperature, value
