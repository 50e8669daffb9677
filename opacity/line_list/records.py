"""From parsed columns to judged lines: what can't be right is an error naming file and line, or is left out.

This is the common second half of all readers; the first half only finds the columns in the text.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.constants import REFERENCE_TEMPERATURE, STANDARD_ATMOSPHERE
from opacity.errors import LineListError, MoleculeError, problem
from opacity.grids import FloatArray
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.text import TextChunk
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import LOCAL_CODES, Isotopologue, isotopologue, molecule_is_known

REQUIRED = ("molecule", "wavenumber", "strength", "lower_energy")
MAX_EXPONENT = 10.0
MAX_MOLECULE = 999
_NOT_TEXT = re.compile(rb"[^\t\x20-\x7e]")


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
    faults: list[tuple[str, str, NDArray[np.bool_]]] = field(default_factory=list)


@dataclass(frozen=True)
class ReadOptions:
    """How a reader treats its records; `formula` and `mass` are the recipe's molecule."""

    leave_out_bad: bool = False
    formula: str | None = None
    mass: float | None = None
    isotopologue: str | None = None


def judge(columns: ParsedColumns, options: ReadOptions) -> LineList:
    """The lines among some records.  Raises LineListError for the first record that can't be right, unless left out."""
    ledger = Ledger(read=len(columns.text))
    good = np.ones(len(columns.text), dtype=bool)
    found: list[tuple[int, str, str]] = []
    for reason, expected, bad in _faults(columns):
        fresh = bad & good
        if fresh.any():
            found.append((int(np.flatnonzero(fresh)[0]), reason, expected))
            ledger.left_out[reason] += int(fresh.sum())
            good &= ~bad
    index, known, extra = _isotopologues(columns, good, options)
    for reason, expected, bad in extra:
        fresh = bad & good
        if fresh.any():
            found.append((int(np.flatnonzero(fresh)[0]), reason, expected))
            ledger.left_out[reason] += int(fresh.sum())
            good &= ~bad
    if found and not options.leave_out_bad:
        raise LineListError(_first_problem(columns, min(found), int((~good).sum())))
    ledger.kept = int(good.sum())
    ledger.notes.update(_notes(columns, good))
    return _build(columns, good, index, known, ledger)


def _first_problem(columns: ParsedColumns, first: tuple[int, str, str], bad: int) -> str:
    row, reason, expected = first
    raw = columns.text.record(row)
    text = _NOT_TEXT.sub(b"?", raw[:70]).decode("ascii").replace("\t", " ")
    return problem(
        f"{columns.path}:{columns.text.line[row]}",
        reason,
        expected=expected,
        found=f'"{text}..."' if len(raw) > 70 else f'"{text}"',
        remedy=f'{bad} of {len(columns.text)} records are unusable: mend the list, or set bad_records = "leave-out"',
    )


def _faults(columns: ParsedColumns) -> Iterator[tuple[str, str, NDArray[np.bool_]]]:
    numbers = columns.numbers
    yield "record of the wrong length", columns.length_expected, ~columns.whole
    yield "record with bytes that are no text", "printable ASCII characters", ~columns.text.plain
    yield from columns.faults
    for name, unreadable in columns.unreadable.items():
        yield f"{_words(name)} is not a number", "digits", unreadable
    for name in REQUIRED:
        yield f"{_words(name)} is missing", "a number", np.isnan(numbers[name])
    for name, values in numbers.items():
        yield f"{_words(name)} is not finite", "a finite number", np.isinf(values)
    molecule = numbers["molecule"]
    impossible = (molecule < 1.0) | (molecule > MAX_MOLECULE) | (molecule != np.floor(molecule))
    yield "molecule number is impossible", f"a whole number from 1 to {MAX_MOLECULE}", impossible
    yield "wavenumber is not above 0", "a positive wavenumber", ~(numbers["wavenumber"] > 0.0)
    yield "strength is negative", "0 or more", numbers["strength"] < 0.0
    # HITRAN writes -1 for an energy that is not known.
    yield "lower-state energy is impossible", "-1 or more", numbers["lower_energy"] < -1.0
    if "einstein_a" in numbers:
        yield "Einstein A is negative", "0 or more", numbers["einstein_a"] < 0.0
    for broadener in columns.broadeners:
        gamma, exponent = numbers[f"gamma_{broadener}"], numbers[f"exponent_{broadener}"]
        yield f"{broadener} width is negative", "0 or more", gamma < 0.0
        limit = f"-{MAX_EXPONENT:g} to {MAX_EXPONENT:g}"
        yield f"{broadener} temperature exponent is impossible", limit, np.abs(exponent) > MAX_EXPONENT


def _words(name: str) -> str:
    return name.replace("_", " ")


def _isotopologues(
    columns: ParsedColumns, good: NDArray[np.bool_], options: ReadOptions
) -> tuple[NDArray[np.int16], tuple[Isotopologue, ...], list[tuple[str, str, NDArray[np.bool_]]]]:
    """Index into the isotopologues found (-1 where there is none), these, and the faults met."""
    index = np.full(good.size, -1, dtype=np.int16)
    molecules = np.where(good, np.nan_to_num(columns.numbers["molecule"]), 0.0).astype(np.int64)
    known: list[Isotopologue] = []
    allowed = "a code 1-9, 0, A, B of an isotopologue that hapi's tables hold"
    unknown = np.zeros(good.size, dtype=bool)
    foreign = np.zeros(good.size, dtype=bool)
    for number in np.unique(molecules[good]):
        for code in np.unique(columns.code[good & (molecules == number)]):
            rows = good & (molecules == number) & (columns.code == code)
            one = _one_isotopologue(int(number), chr(code), options)
            if one is None:
                unknown |= rows
            elif options.formula is not None and one.molecule_formula != options.formula:
                foreign |= rows
            else:
                known.append(one)
                index[rows] = len(known) - 1
    faults = [
        ("unknown isotopologue", allowed, unknown),
        ("record of another molecule", f"records of {options.formula}", foreign),
    ]
    return index, tuple(known), faults


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
    for text, mask in (
        ("lower-state energy below 0 (unknown): used as it stands", numbers["lower_energy"] < 0.0),
        ("strength 0: contributes nothing", numbers["strength"] == 0.0),
    ):
        count = int(np.count_nonzero(mask & good))
        if count:
            notes[text] = count
    if np.any(np.diff(numbers["wavenumber"][good]) < 0.0):
        notes["out of order in wavenumber: sorted"] = int(np.count_nonzero(np.diff(numbers["wavenumber"][good]) < 0.0))
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
