"""From parsed columns to judged lines: what can't be right is an error naming file and line, or is left out.

This is the common second half of all readers; the first half only finds the columns in the text.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.constants import REFERENCE_TEMPERATURE, SECOND_RADIATION, STANDARD_ATMOSPHERE
from opacity.errors import LineListError, MoleculeError, excerpt, problem
from opacity.grids import FloatArray
from opacity.line_list.exomol.broadening import BroadeningTable
from opacity.line_list.foreign import ForeignRecords
from opacity.line_list.ledger import Ledger
from opacity.line_list.lower_j import fill_widths
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.text import TextChunk
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import (
    LOCAL_CODES,
    Isotopologue,
    isotopologue,
    isotopologues_of,
    molecule_is_known,
    molecule_name,
)

REQUIRED = ("molecule", "wavenumber", "strength", "lower_energy")
MAX_EXPONENT = 10.0
MAX_MOLECULE = 999
MAX_WIDTH = 1000.0
LOWEST_WAVENUMBER = 1e-6
STRONGEST = 1e-6
WEAKEST = 1e-170
HIGHEST_ENERGY = 100_000.0
UNKNOWN = "unknown isotopologue"
"""Reason for which a record is left out that hapi's tables do not know."""
_CODES = "a code 1-9, 0, A, B of an isotopologue that hapi's tables hold"


@dataclass
class ParsedColumns:
    """Columns of some records of a file, in the list's own units; masks say what could not be read.

    `numbers` by name (each (n,)): molecule, wavenumber, strength, einstein_a, lower_energy, upper_weight,
    lower_weight and, for each broadener b, gamma_b, exponent_b, shift_b (per atm).  `code` is the
    byte of the isotopologue's one-character code.  `whole` is false where the record has the wrong length.
    """

    path: Path
    text: TextChunk
    numbers: dict[str, FloatArray]
    unreadable: dict[str, NDArray[np.bool_]]
    code: NDArray[np.uint8]
    whole: NDArray[np.bool_]
    length_expected: str
    broadeners: tuple[str, ...]


@dataclass(frozen=True)
class ReadOptions:
    """What a recipe says of a list: its molecule's `formula` and `mass`, and the one `isotopologue` to take from it.

    For a molecule that hapi does not know `isotopologue` is the name of the list's only one.  `widths` by J'', by
    broadener, serve lines for which the list gives none.
    """

    formula: str | None = None
    mass: float | None = None
    isotopologue: str | None = None
    widths: Mapping[str, BroadeningTable] = field(default_factory=dict)


def judge(columns: ParsedColumns, options: ReadOptions, leave_out: bool, others: ForeignRecords) -> LineList:
    """The lines among some records of a file; its records of another molecule are entered in `others`.

    Raises LineListError for the first record that can't be right, unless left out.
    """
    ledger = Ledger(read=len(columns.text))
    good = np.ones(len(columns.text), dtype=bool)
    found: list[tuple[int, str, str]] = []
    for reason, expected, bad in _faults(columns):
        fresh = bad & good
        if fresh.any():
            found.append((int(np.flatnonzero(fresh)[0]), reason, expected))
            ledger.left_out[reason] += int(fresh.sum())
            good &= ~bad
    index, known, unknown, foreign = _isotopologues(columns, good, options)
    if unknown.any():
        found.append((int(np.flatnonzero(unknown)[0]), UNKNOWN, _CODES))
        ledger.left_out[UNKNOWN] += int(unknown.sum())
    good &= ~(unknown | foreign)
    others.add(columns.text, columns.numbers["molecule"], foreign, int(good.sum()), leave_out)
    if foreign.any():
        ledger.left_out["record of another molecule"] += int(foreign.sum())
    if found and not leave_out:
        raise LineListError(_first_problem(columns, min(found), int((~good).sum())))
    ledger.kept = int(good.sum())
    if options.widths:
        added, served = fill_widths(columns.path, columns.numbers, options.widths, columns.text, columns.whole, good)
        columns.broadeners = tuple(dict.fromkeys((*columns.broadeners, *added)))
        ledger.notes.update(served)
    ledger.notes.update(_notes(columns, good))
    return _build(columns, good, index, known, ledger)


def _first_problem(columns: ParsedColumns, first: tuple[int, str, str], bad: int) -> str:
    row, reason, expected = first
    return problem(
        f"{columns.path}:{columns.text.line[row]}",
        reason,
        expected=expected,
        found=f'"{excerpt(columns.text.record(row), 70)}"',
        remedy=f'{bad} of {len(columns.text)} records are unusable: mend the list, or set bad_records = "leave-out"',
    )


def _faults(columns: ParsedColumns) -> Iterator[tuple[str, str, NDArray[np.bool_]]]:
    numbers = columns.numbers
    yield "record of the wrong length", columns.length_expected, ~columns.whole
    yield "record with bytes that are no text", "printable ASCII characters", ~columns.text.plain
    for name, unreadable in columns.unreadable.items():
        yield f"{_words(name)} is not a number", "digits", unreadable
    for name in REQUIRED:
        yield f"{_words(name)} is missing", "a number", np.isnan(numbers[name])
    for name, values in numbers.items():
        yield f"{_words(name)} is not finite", "a finite number", np.isinf(values)
    molecule = numbers["molecule"]
    impossible = (molecule < 1.0) | (molecule > MAX_MOLECULE) | (molecule != np.floor(molecule))
    yield "molecule number is impossible", f"a whole number from 1 to {MAX_MOLECULE}", impossible
    lowest = f"at least {LOWEST_WAVENUMBER:g} cm-1"
    yield "wavenumber is not above 0", lowest, ~(numbers["wavenumber"] >= LOWEST_WAVENUMBER)
    yield "strength is negative", "0 or more", numbers["strength"] < 0.0
    # HITRAN writes -1 for an energy that is not known.
    energy = numbers["lower_energy"]
    limits = f"-1 to {HIGHEST_ENERGY:g} cm-1"
    yield "lower-state energy is impossible", limits, (energy < -1.0) | (energy > HIGHEST_ENERGY)
    strength = numbers["strength"]
    yield "strength is too small", f"0 or at least {WEAKEST:g}", (strength > 0.0) & (strength < WEAKEST)
    yield (
        "strength is impossible for its lower-state energy",
        "at most 1e-6 cm/molecule before population",
        _too_strong(numbers),
    )
    if "einstein_a" in numbers:
        yield "Einstein A is negative", "0 or more", numbers["einstein_a"] < 0.0
    for broadener in columns.broadeners:
        gamma, exponent = numbers[f"gamma_{broadener}"], numbers[f"exponent_{broadener}"]
        yield f"{broadener} width is negative", "0 or more", gamma < 0.0
        yield f"{broadener} width is impossible", f"at most {MAX_WIDTH:g} cm-1/atm", gamma > MAX_WIDTH
        shift = np.abs(numbers[f"shift_{broadener}"])
        yield f"{broadener} shift is impossible", f"at most {MAX_WIDTH:g} cm-1/atm", shift > MAX_WIDTH
        limit = f"-{MAX_EXPONENT:g} to {MAX_EXPONENT:g}"
        yield f"{broadener} temperature exponent is impossible", limit, np.abs(exponent) > MAX_EXPONENT


def _too_strong(numbers: dict[str, FloatArray]) -> NDArray[np.bool_]:
    """Lines whose S/exp(-c2 E''/T) is beyond any transition's: at high temperature they would swamp all others."""
    with np.errstate(divide="ignore", invalid="ignore"):
        log_intensity = np.log(numbers["strength"]) + SECOND_RADIATION / REFERENCE_TEMPERATURE * numbers["lower_energy"]
    return np.asarray(log_intensity > np.log(STRONGEST))


def _words(name: str) -> str:
    return name.replace("_", " ")


def _isotopologues(
    columns: ParsedColumns, good: NDArray[np.bool_], options: ReadOptions
) -> tuple[NDArray[np.int16], tuple[Isotopologue, ...], NDArray[np.bool_], NDArray[np.bool_]]:
    """Index into the isotopologues found (-1 where there is none), these, and masks of unknown and foreign records."""
    index = np.full(good.size, -1, dtype=np.int16)
    molecules = np.where(good, np.nan_to_num(columns.numbers["molecule"]), 0.0).astype(np.int64)
    known: list[Isotopologue] = []
    unknown = np.zeros(good.size, dtype=bool)
    foreign = np.zeros(good.size, dtype=bool)
    for number in np.unique(molecules[good]):
        for code in np.unique(columns.code[good & (molecules == number)]):
            rows = good & (molecules == number) & (columns.code == code)
            one = _one_isotopologue(int(number), chr(code), options)
            if one is None and _is_foreign(int(number), options):
                foreign |= rows
            elif one is None:
                unknown |= rows
            elif options.formula is not None and one.molecule_formula != options.formula:
                foreign |= rows
            else:
                known.append(one)
                index[rows] = len(known) - 1
    return index, tuple(known), unknown, foreign


def _is_foreign(molecule: int, options: ReadOptions) -> bool:
    """Whether records without a known isotopologue are of another molecule than the recipe's."""
    if options.formula is None:
        return False
    if molecule_is_known(molecule):
        return molecule_name(molecule) != options.formula
    return bool(isotopologues_of(options.formula))


def _one_isotopologue(molecule: int, code: str, options: ReadOptions) -> Isotopologue | None:
    local = LOCAL_CODES.get(code)
    if local is None:
        return None
    if molecule_is_known(molecule):
        try:
            return isotopologue(molecule, local)
        except MoleculeError:
            return None
    if options.mass is None or options.formula is None or local != 1:
        return None
    name = options.isotopologue or options.formula
    return Isotopologue(molecule, local, name, options.formula, options.mass, 1.0, known=False)


def _notes(columns: ParsedColumns, good: NDArray[np.bool_]) -> Counter[str]:
    notes: Counter[str] = Counter()
    numbers = columns.numbers
    for text, count in (
        ("strength 0: contributes nothing", np.count_nonzero((numbers["strength"] == 0.0) & good)),
        ("out of order in wavenumber: sorted", np.count_nonzero(np.diff(numbers["wavenumber"][good]) < 0.0)),
    ):
        if count:
            notes[text] = int(count)
    return notes


def _build(
    columns: ParsedColumns,
    good: NDArray[np.bool_],
    index: NDArray[np.int16],
    known: tuple[Isotopologue, ...],
    ledger: Ledger,
) -> LineList:
    numbers = columns.numbers
    rows = np.flatnonzero(good)
    order = rows[np.argsort(numbers["wavenumber"][rows], kind="stable")]
    nothing = np.full(good.size, np.nan)
    broadeners = {}
    for name in columns.broadeners:
        gamma, shift = numbers[f"gamma_{name}"][order], numbers[f"shift_{name}"][order]
        broadeners[name] = BroadenerColumns(
            # HITRAN gives widths and shifts per atm; 0 stands for a value that is not given.
            gamma=np.where(gamma == 0.0, np.nan, gamma / STANDARD_ATMOSPHERE),
            exponent=numbers[f"exponent_{name}"][order],
            shift=np.where(shift == 0.0, np.nan, shift / STANDARD_ATMOSPHERE),
        )
    return LineList(
        wavenumber=numbers["wavenumber"][order],
        strength=numbers["strength"][order],
        lower_energy=numbers["lower_energy"][order],
        einstein_a=numbers.get("einstein_a", nothing)[order],
        upper_weight=numbers.get("upper_weight", nothing)[order],
        lower_weight=numbers.get("lower_weight", nothing)[order],
        isotopologue=index[order],
        isotopologues=known,
        # Rothman et al. 1998: strengths at 296 K, weighted by terrestrial abundance.
        basis=tuple(StrengthBasis(REFERENCE_TEMPERATURE, True, one.abundance) for one in known),
        broadeners=broadeners,
        record=columns.text.line[order],
        file=np.zeros(order.size, dtype=np.int16),
        files=(str(columns.path),),
        ledger=ledger,
    )
