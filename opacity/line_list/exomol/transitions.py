"""Transitions of a list in ExoMol format: id of the upper state, of the lower one, A, and sometimes the wavenumber
(Tennyson et al. 2016, J. Mol. Spectrosc. 327, 73).  Wavenumbers are taken from the states' energies.
"""

from __future__ import annotations

import math
import re
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.constants import REFERENCE_TEMPERATURE
from opacity.errors import LineListError, problem
from opacity.grids import FloatArray
from opacity.kernels import transitions as kernel
from opacity.kernels.text import read_rows
from opacity.line_list.batches import Batch, in_order, not_empty
from opacity.line_list.exomol.broadening import KINDS, BroadeningTable, match_rows, served_notes, widths_of
from opacity.line_list.exomol.states import States
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import StrengthBasis
from opacity.line_list.packed import (
    ENERGY_OFFSET,
    HIGHEST_ENERGY,
    LOG_OFFSET,
    PackedLines,
    WidthClasses,
    encode_energy,
    encode_intensity,
)
from opacity.line_list.records import STRONGEST
from opacity.line_list.text import RawText, TextChunk, read_raw
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import Isotopologue

_FAULTS = {
    kernel.NO_UPPER: ("upper state is not in the states file", "an id of the states file"),
    kernel.NO_LOWER: ("lower state is not in the states file", "an id of the states file"),
    kernel.NO_WAVENUMBER: ("both states have the same energy: wavenumber 0", "states of different energy"),
    kernel.SWAPPED: ("upper state lies below the lower one", "upper id, lower id"),
    kernel.BAD_A: ("Einstein A is impossible", "a finite number, 0 or more"),
    kernel.BAD_ENERGY: ("lower-state energy out of range", f"{ENERGY_OFFSET:g} to {HIGHEST_ENERGY:.0f} cm-1"),
    kernel.BAD_STRENGTH: ("strength out of range", f"1e-173 to {STRONGEST:g} cm/molecule before population and Q"),
}
_ENERGIES = (ENERGY_OFFSET, HIGHEST_ENERGY)
_LOG_INTENSITIES = (LOG_OFFSET, math.log(STRONGEST))
_ENDINGS = re.compile(r"\.broad(\.gz|\.bz2)?$", re.IGNORECASE)
_UNREADABLE = ("row cannot be read", "upper id, lower id, A and perhaps the wavenumber")
WAVENUMBER_AGREES = 0.01
"""A wavenumber given beside A may differ this much (cm-1) from the states' before it is noted."""


@dataclass(frozen=True)
class StateJoin:
    """What all transition files of a data set share.

    `twice_j` (n_states,) 2J; `classes` the widths of every (2J'', J' - J''), by `width_key` of the kernel;
    `served` by broadener the name of its file and, by `width_key` too, the kind of row that serves.
    """

    states: States
    twice_j: NDArray[np.int32]
    classes: WidthClasses
    isotopologue: Isotopologue
    served: Mapping[str, tuple[str, NDArray[np.uint8]]]


def state_join(states: States, broadening: Mapping[str, BroadeningTable], isotopologue: Isotopologue) -> StateJoin:
    """Prepare the join: widths of all J'' and branches that the states allow, by broadener in lower case."""
    twice_j = np.rint(2.0 * states.j).astype(np.int32)
    keys = np.arange((int(twice_j.max(initial=0)) + 1) * kernel.BRANCHES)
    lower = keys // kernel.BRANCHES
    upper = np.maximum(lower + keys % kernel.BRANCHES - 4, 0)
    nothing = np.full(keys.size, np.nan)
    columns, served = {}, {}
    for name, table in broadening.items():
        match = match_rows(table, 0.5 * lower, 0.5 * upper)
        served[name] = (table.path, match.kind)
        gamma, exponent = widths_of(table, match)
        columns[name.lower()] = BroadenerColumns(gamma, exponent, nothing)
    zeros = np.zeros(keys.size, dtype=np.int16)
    return StateJoin(states, twice_j, WidthClasses(zeros, zeros, columns), isotopologue, served)


def transition_batches(
    path: Path, join: StateJoin, leave_out: bool, range: tuple[float, float] | None, executor: Executor | None
) -> Iterator[Batch]:
    """The lines of one .trans file, plain or compressed.

    Raises LineListError for the first row that can't be right unless `leave_out`, or for a file without rows.
    """

    def work(raw: RawText) -> Batch | None:
        chunk = raw.lines()
        return _batch(path, chunk, join, leave_out, range) if len(chunk) else None

    yield from not_empty(in_order(work, read_raw(path), executor), path, "transition")


def _batch(path: Path, chunk: TextChunk, join: StateJoin, leave_out: bool, range: tuple[float, float] | None) -> Batch:
    n = len(chunk)
    ids, numbers = np.empty((n, 2), dtype=np.int64), np.empty((n, 2))
    fields = np.empty(n, dtype=np.uint8)
    read_rows(chunk.buffer, chunk.starts, chunk.stops, ids, numbers, fields)
    readable = (fields == 3) | (fields == 4)
    wavenumber, log_intensity = np.zeros(n), np.zeros(n)
    key, status = np.zeros(n, dtype=np.int64), np.empty(n, dtype=np.uint8)
    upper = join.states.rows_of(np.where(readable, ids[:, 0], -1))
    lower = join.states.rows_of(np.where(readable, ids[:, 1], -1))
    states = join.states
    kernel.join_states(
        upper, lower, np.ascontiguousarray(numbers[:, 0]), states.energy, states.total_weight, join.twice_j,
        _ENERGIES, _LOG_INTENSITIES, wavenumber, log_intensity, key, status,
    )  # fmt: skip
    ledger = _account(path, chunk, readable, status, leave_out)
    good = readable & (status == kernel.GOOD)
    if range is not None:
        inside = (wavenumber >= range[0]) & (wavenumber <= range[1])
        ledger.leave_out("outside the range asked for", int(np.count_nonzero(good & ~inside)))
        good &= inside
    ledger.notes.update(_notes(numbers[:, 1], wavenumber, log_intensity, good))
    order = np.flatnonzero(good)
    ledger.notes.update(_served(join, key[order]))
    packed = PackedLines(
        wavenumber=wavenumber[order],
        intensity=encode_intensity(log_intensity[order]),
        lower_energy=encode_energy(states.energy[lower[order]]),
        width_class=key[order].astype(np.uint32),
        record=(chunk.line[order] % 2**32).astype(np.uint32),
        classes=join.classes,
    )
    basis = StrengthBasis(REFERENCE_TEMPERATURE, False, 1.0)
    return Batch(packed, (join.isotopologue,), (basis,), ledger, chunk.read)


def _notes(
    given: FloatArray, wavenumber: FloatArray, log_intensity: FloatArray, good: NDArray[np.bool_]
) -> dict[str, int]:
    with np.errstate(invalid="ignore"):
        differ = int(np.count_nonzero(good & (np.abs(given - wavenumber) > WAVENUMBER_AGREES)))
    text = f"wavenumber given differs by over {WAVENUMBER_AGREES:g} cm-1 from the states' energies, which are used"
    nothing = int(np.count_nonzero(good & np.isneginf(log_intensity)))
    return {note: n for note, n in ((text, differ), ("strength 0: contributes nothing", nothing)) if n}


def _served(join: StateJoin, key: NDArray[np.int64]) -> Counter[str]:
    """How many of the lines have their widths from which file."""
    notes: Counter[str] = Counter()
    lines = np.bincount(key, minlength=len(join.classes))
    for name, (path, kind) in join.served.items():
        notes.update(served_notes(name, path, np.bincount(kind, lines, KINDS).astype(np.int64)))
    return notes


def _account(
    path: Path, chunk: TextChunk, readable: NDArray[np.bool_], status: NDArray[np.uint8], leave_out: bool
) -> Ledger:
    """The account of a chunk; LineListError for the first bad row unless they are to be left out."""
    ledger = Ledger(read=len(chunk), kept=int(np.count_nonzero(readable & (status == kernel.GOOD))))
    found: list[tuple[int, tuple[str, str]]] = []
    unreadable = np.flatnonzero(~readable)
    if unreadable.size:
        found.append((int(unreadable[0]), _UNREADABLE))
        ledger.left_out[_UNREADABLE[0]] += int(unreadable.size)
    for code, fault in _FAULTS.items():
        rows = np.flatnonzero(readable & (status == code))
        if rows.size:
            found.append((int(rows[0]), fault))
            ledger.left_out[fault[0]] += int(rows.size)
    if found and not leave_out:
        row, (what, expected) = min(found)
        text = "".join(chr(byte) if 32 <= byte < 127 else "?" for byte in chunk.record(row)[:60])
        raise LineListError(
            problem(
                f"{path}:{chunk.line[row]}",
                what,
                expected=expected,
                found=f'"{text}"',
                remedy='mend the list, or set bad_records = "leave-out"',
            )
        )
    return ledger


def default_names(files: Sequence[Path]) -> dict[str, Path]:
    """Broadener by name from files called <isotopologue>__<broadener>.broad, plain, .gz or .bz2.

    Raises LineListError for a file that names no broadener.
    """
    names = {}
    for path in files:
        name = _ENDINGS.sub("", path.name).rpartition("__")
        if not (name[1] and name[2]):
            raise LineListError(
                problem(
                    path,
                    "no broadener in the name of the file",
                    expected="a name like X__H2.broad",
                    remedy="name it so, or use [broadening] files",
                )
            )
        names[name[2]] = path
    return names
