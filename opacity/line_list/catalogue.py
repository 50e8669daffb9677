"""Catalogue records of the JPL and CDMS format (.cat): positions, strengths at 300 K, lower-state energies.

Layout, units and equations as printed in the documentation sheets of the CDMS catalogue, after Pickett et al. 1998,
JQSRT 60, 883.  Strengths are those of the isotopologue alone: no abundance is included.

A trap that no reader can see in one record: answers saved from the CDMS query page may hold log10 of the Einstein A in
the place of the intensity.  As saved they have other columns, so that they are refused; turned into .cat records they
look like a catalogue.  Nothing here guards against these: `looks_like_einstein_a`, for callers that have the
partition function of the same entry, finds some.
"""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.constants import LIGHT_SPEED, SECOND_RADIATION
from opacity.errors import InputError, LineListError, excerpt, problem
from opacity.grids import FloatArray
from opacity.kernels.text import BLANK, READ, read_fixed_column
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.text import TextChunk, read_chunks
from opacity.molecule.isotopologue import Isotopologue, named_isotopologue

CATALOGUE_TEMPERATURE = 300.0
"""Temperature of the intensities, K."""

MHZ = LIGHT_SPEED * 1e-4
"""One cm-1 in MHz: 29979.2458."""

NM2_MHZ = 2.99792458e18
"""One cm per molecule in nm2 MHz (Pickett et al. 1998, eq. 4 as printed in the CDMS sheet)."""

EINSTEIN_FACTOR = 2.7964e-16
"""A = I nu^2 (Q/g') / (exp(-E''/kT) - exp(-E'/kT)) x 2.7964e-16 s-1, I in nm2 MHz, nu in MHz (CDMS sheet, eq. 5)."""

DIPOLE_FACTOR = 1.16395e-20
"""A = 1.16395e-20 nu^3 S mu^2 / g' s-1, nu in MHz, mu in debye (CDMS sheet, eq. 6)."""

# Name: first byte and the byte after the last, from 0 (F13.4, F8.4, F8.4, I2, F10.4, I3, I7).
LAYOUT = {
    "frequency": (0, 13),
    "frequency error": (13, 21),
    "intensity": (21, 29),
    "lower-state energy": (31, 41),
    "upper weight": (41, 44),
    "tag": (44, 51),
}
RECORD_LENGTH = 51
"""Bytes up to the tag; the quantum numbers behind it are not read."""

_NUMBER_COLUMNS = tuple(name for name in LAYOUT if name != "upper weight")
_HIGHEST_FREQUENCY = 1e10
_LOWEST_LOG, _HIGHEST_LOG = -300.0, 10.0
_LOWEST_ENERGY, _HIGHEST_ENERGY = -1.0, 1e6
_HIGHEST_WEIGHT = 3599.0
_LARGEST_DIPOLE = 100.0
"""Debye; no molecule that is in a catalogue has a larger dipole moment (about 10 for salts)."""


@dataclass(frozen=True)
class CatalogueLines:
    """Lines of one catalogue file, sorted by wavenumber; every array is (n_lines,).

    `wavenumber` and its `uncertainty` cm-1; `strength` cm/molecule at 300 K, without abundance; `lower_energy` cm-1
    above the lowest level; `upper_weight` g', common factors of the nuclear spin often divided out, as in the
    partition function of the same entry; `tag` of the species; `measured` where the position is a
    laboratory value; `record` the line number in the file.
    """

    path: str
    wavenumber: FloatArray
    uncertainty: FloatArray
    strength: FloatArray
    lower_energy: FloatArray
    upper_weight: FloatArray
    tag: NDArray[np.int64]
    measured: NDArray[np.bool_]
    record: NDArray[np.int64]
    ledger: Ledger

    def __len__(self) -> int:
        return int(self.wavenumber.size)


def catalogue_lines(
    path: Path, *, formula: str, isotopologue: str, mass: float | None, bad_records: str = "stop"
) -> LineList:
    """A catalogue file as a `LineList` of one isotopologue: strengths at 300 K, without abundance, no widths.

    Raises LineListError as `read_catalogue`, and where hapi does not know the isotopologue and no `mass` is given.
    """
    found = read_catalogue(path, bad_records=bad_records)
    return as_line_list(found, catalogue_isotopologue(path, formula, isotopologue, mass))


def catalogue_isotopologue(path: Path, formula: str, isotopologue: str, mass: float | None) -> Isotopologue:
    """The isotopologue that a catalogue is said to be of.  Raises LineListError where no mass of it is known."""
    one = named_isotopologue(formula, isotopologue, mass)
    if one is None:
        raise LineListError(
            problem(
                path,
                f"no mass of {isotopologue} is known",
                expected="an isotopologue by hapi's formula or number, or the molecule's mass (g/mol)",
            )
        )
    return one


def as_line_list(found: CatalogueLines, one: Isotopologue) -> LineList:
    """Lines of a catalogue as a `LineList` of an isotopologue."""
    nothing = np.full(len(found), np.nan)
    return LineList(
        wavenumber=found.wavenumber,
        strength=found.strength,
        lower_energy=found.lower_energy,
        einstein_a=nothing,
        upper_weight=found.upper_weight,
        lower_weight=nothing,
        isotopologue=np.zeros(len(found), dtype=np.int16),
        isotopologues=(one,),
        basis=(StrengthBasis(CATALOGUE_TEMPERATURE, True, 1.0),),
        broadeners={},
        record=found.record,
        file=np.zeros(len(found), dtype=np.int16),
        files=(found.path,),
        ledger=found.ledger,
    )


def read_catalogue(path: Path, *, bad_records: str = "stop") -> CatalogueLines:
    """Read a .cat file, plain, .gz or .bz2.

    `bad_records` is "stop" (a record that can't be right is an error) or "leave-out" (it is counted and left out).
    A position is in cm-1 where its error is negative (-0.0000 too), else in MHz: a zero error is counted,
    because the CDMS sheet also says "less or equal to zero", which its own files do not follow.
    Raises LineListError naming file and line, InputError for another `bad_records`.
    """
    if bad_records not in ("stop", "leave-out"):
        raise InputError(problem("bad_records", "unknown", expected='"stop" or "leave-out"', found=f'"{bad_records}"'))
    ledger = Ledger()
    parts = [_read_chunk(path, chunk, bad_records == "leave-out", ledger) for chunk in read_chunks(path)]
    if ledger.read == 0:
        raise LineListError(problem(path, "holds no record", expected="lines", remedy="fetch the file again"))
    columns = {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}
    return _build(path, columns, ledger)


def catalogue_part(path: Path, chunk: TextChunk, leave_out: bool) -> CatalogueLines:
    """Some lines of a .cat file, with an account of their own; errors as those of `read_catalogue`."""
    ledger = Ledger()
    return _build(path, _read_chunk(path, chunk, leave_out, ledger), ledger)


def einstein_a(lines: CatalogueLines, partition300: float) -> FloatArray:
    """Einstein A (n_lines,), s-1, from the strengths and the partition function at 300 K of the same entry.

    Eq. 5 and 7 of the CDMS sheet; infinite beyond the range of f8.  Raises InputError unless Q is above 0.
    """
    with np.errstate(over="ignore", under="ignore"):
        return np.asarray(10.0 ** _log_einstein_a(lines, partition300))


def looks_like_einstein_a(lines: CatalogueLines, partition300: float) -> bool:
    """Whether the intensities can't be intensities, but could be Einstein A.

    True only if they would need a transition dipole above 100 debye, which no molecule has, while the same numbers
    taken as log10 A need none: then they must not be used.  False proves nothing: lists whose levels all
    lie within a few kT at 300 K pass either way.
    """
    if not len(lines):
        return False
    frequency = lines.wavenumber * MHZ
    weakest = math.log10(DIPOLE_FACTOR) + 3.0 * np.log10(frequency) + 2.0 * math.log10(_LARGEST_DIPOLE)
    as_intensity = _log_einstein_a(lines, partition300) - weakest
    with np.errstate(divide="ignore"):
        as_einstein_a = np.log10(lines.strength * NM2_MHZ) - weakest
    return bool(np.max(as_intensity) > 0.0 and np.max(as_einstein_a) <= 0.0)


def _log_einstein_a(lines: CatalogueLines, partition300: float) -> FloatArray:
    if not (math.isfinite(partition300) and partition300 > 0.0):
        raise InputError(problem("partition300", "impossible", expected="Q(300 K), above 0", found=partition300))
    x = SECOND_RADIATION / CATALOGUE_TEMPERATURE
    with np.errstate(divide="ignore"):
        intensity = np.log10(lines.strength * NM2_MHZ)
    # exp(-E''/kT) (1 - exp(-h nu/kT)), in the form that keeps its digits for small nu.
    population = (-x * lines.lower_energy + np.log(-np.expm1(-x * lines.wavenumber))) / math.log(10.0)
    weight = np.log10(partition300 / lines.upper_weight)
    factor = math.log10(EINSTEIN_FACTOR)
    return np.asarray(intensity + 2.0 * np.log10(lines.wavenumber * MHZ) + weight - population + factor)


def _read_chunk(path: Path, chunk: TextChunk, leave_out: bool, ledger: Ledger) -> dict[str, NDArray[np.float64]]:
    """The columns of a chunk's good records in the catalogue's own units, with the line numbers as "record"."""
    whole = chunk.stops - chunk.starts >= RECORD_LENGTH
    starts = np.where(whole, chunk.starts, -1)
    numbers, status = {}, {}
    for name in _NUMBER_COLUMNS:
        numbers[name], status[name] = np.empty(len(chunk)), np.empty(len(chunk), dtype=np.uint8)
        read_fixed_column(chunk.buffer, starts, *LAYOUT[name], numbers[name], status[name])
    numbers["upper weight"], status["upper weight"] = _read_weights(chunk, starts)
    good = np.ones(len(chunk), dtype=bool)
    first: tuple[int, str, str] | None = None
    for reason, expected, bad in _faults(chunk, whole, numbers, status):
        fresh = bad & good
        if fresh.any():
            ledger.left_out[reason] += int(fresh.sum())
            good &= ~bad
            row = int(np.argmax(fresh))
            first = min(first, (row, reason, expected)) if first is not None else (row, reason, expected)
    if first is not None and not leave_out:
        raise LineListError(_problem_of(path, chunk, first, int((~good).sum())))
    ledger.read += len(chunk)
    ledger.kept += int(good.sum())
    columns = {name: values[good] for name, values in numbers.items()}
    columns["record"] = chunk.line[good].astype(np.float64)
    return columns


def _read_weights(chunk: TextChunk, starts: NDArray[np.int64]) -> tuple[FloatArray, NDArray[np.uint8]]:
    """Upper weights of three characters; a capital letter in front counts hundreds from 10 (A00 is 1000).

    That code is printed for quantum numbers (A0 is 100); its use for weights of 1000 and more is from memory.
    """
    first, last = LAYOUT["upper weight"]
    values, status = np.empty(starts.size), np.empty(starts.size, dtype=np.uint8)
    letter, digit = (chunk.buffer[np.where(starts >= 0, starts + first + k, 0)].astype(np.int64) for k in range(2))
    letter -= ord("A")
    coded = (starts >= 0) & (letter >= 0) & (letter < 26) & (digit >= ord("0")) & (digit <= ord("9"))
    read_fixed_column(chunk.buffer, starts + coded, first, last - 1, values, status)
    tens, tens_status = values.copy(), status.copy()
    read_fixed_column(chunk.buffer, starts, first, last, values, status)
    values = np.where(coded, 1000.0 + 100.0 * letter + tens, values)
    return values, np.where(coded, tens_status, status)


def _faults(
    chunk: TextChunk,
    whole: NDArray[np.bool_],
    numbers: dict[str, FloatArray],
    status: dict[str, NDArray[np.uint8]],
) -> Iterator[tuple[str, str, NDArray[np.bool_]]]:
    yield "record of the wrong length", f"{RECORD_LENGTH} characters or more", ~whole
    yield "record with bytes that are no text", "printable ASCII characters", ~chunk.plain
    for name, (_, stop) in LAYOUT.items():
        yield f"{name} is missing", "a number", status[name] == BLANK
        yield f"{name} is not a number", "digits", status[name] != READ
        # Numbers stand at the right end of their columns: a record that lost a character shows there.
        last = chunk.buffer[np.where(whole, chunk.starts + stop - 1, 0)]
        yield f"{name} is not in its column", f"a digit in column {stop}", (last < ord("0")) | (last > ord("9"))
    frequency, error = numbers["frequency"], numbers["frequency error"]
    limits = f"above 0, to {_HIGHEST_FREQUENCY:g}"
    yield "frequency is impossible", limits, ~((frequency > 0.0) & (frequency <= _HIGHEST_FREQUENCY))
    yield "frequency error is impossible", "a finite number", ~(np.abs(error) <= _HIGHEST_FREQUENCY)
    for name, lowest, highest in (
        ("intensity", _LOWEST_LOG, _HIGHEST_LOG),
        ("lower-state energy", _LOWEST_ENERGY, _HIGHEST_ENERGY),
    ):
        values = numbers[name]
        yield f"{name} is impossible", f"{lowest:g} to {highest:g}", ~((values >= lowest) & (values <= highest))
    weight, tag = numbers["upper weight"], numbers["tag"]
    yield (
        "upper weight is impossible",
        f"a whole number from 1 to {_HIGHEST_WEIGHT:g}",
        ~((weight > 0.0) & (weight <= _HIGHEST_WEIGHT) & (weight == np.floor(weight))),
    )
    yield "tag is impossible", "a whole number, not 0", ~((tag != 0.0) & (np.abs(tag) < 1e7) & (tag == np.floor(tag)))


def _problem_of(path: Path, chunk: TextChunk, first: tuple[int, str, str], bad: int) -> str:
    row, reason, expected = first
    return problem(
        f"{path}:{chunk.line[row]}",
        reason,
        expected=expected,
        found=f'"{excerpt(chunk.record(row), 70)}"',
        remedy=f'{bad} of {len(chunk)} records are unusable: mend the list, or set bad_records = "leave-out"',
    )


def _build(path: Path, columns: dict[str, FloatArray], ledger: Ledger) -> CatalogueLines:
    error, energy = columns["frequency error"], columns["lower-state energy"]
    unit = np.where(np.signbit(error), 1.0, MHZ)
    wavenumber = columns["frequency"] / unit
    order = np.argsort(wavenumber, kind="stable")
    notes: Counter[str] = Counter(
        {
            "frequency error 0: frequency taken as MHz": int(np.sum((error == 0.0) & ~np.signbit(error))),
            "lower-state energy below 0: used as it stands": int(np.sum(energy < 0.0)),
            "out of order in wavenumber: sorted": int(np.sum(np.diff(wavenumber) < 0.0)),
        }
    )
    ledger.notes.update({text: count for text, count in notes.items() if count})
    tag = columns["tag"][order].astype(np.int64)
    return CatalogueLines(
        path=str(path),
        wavenumber=wavenumber[order],
        uncertainty=(np.abs(error) / unit)[order],
        strength=(10.0 ** columns["intensity"] / NM2_MHZ)[order],
        lower_energy=energy[order],
        upper_weight=columns["upper weight"][order],
        tag=np.abs(tag),
        measured=tag < 0,
        record=columns["record"][order].astype(np.int64),
        ledger=ledger,
    )
