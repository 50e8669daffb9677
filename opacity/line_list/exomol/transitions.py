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
from opacity.errors import LineListError, excerpt, problem
from opacity.grids import FloatArray
from opacity.kernels import transitions as kernel
from opacity.kernels.text import UNREADABLE
from opacity.kernels.transition_rows import read_transition_rows
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
from opacity.line_list.text import RawText, read_raw
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import Isotopologue

_FAULTS = {
    UNREADABLE: ("row cannot be read", "upper id, lower id, A and perhaps the wavenumber"),
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
_EVERYWHERE = (-math.inf, math.inf)
_ENDINGS = re.compile(r"\.broad(\.gz|\.bz2)?$", re.IGNORECASE)
_AT_A_TIME = 1 << 20
"""Bytes of a chunk: its columns stay in the processor's cache, and its memory is had again for the next one."""
WAVENUMBER_AGREES = 0.01
"""A wavenumber given beside A may differ this much (cm-1) from the states' before it is noted."""


@dataclass(frozen=True)
class StateJoin:
    """What all transition files of a data set share.

    `table` (n_states, 3) of the kernel; `classes` the widths of every (2J'', J' - J''), by `width_key` of the kernel;
    `served` by broadener the name of its file and, by `width_key` too, the kind of row that serves.
    """

    states: States
    table: FloatArray
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
    beside = np.empty((len(states), 3))
    kernel.state_table(states.energy, states.total_weight, twice_j, beside)
    return StateJoin(states, beside, WidthClasses(zeros, zeros, columns), isotopologue, served)


def transition_batches(
    path: Path, join: StateJoin, leave_out: bool, range: tuple[float, float] | None, executor: Executor | None
) -> Iterator[Batch]:
    """The lines of one .trans file, plain or compressed.

    Raises LineListError for the first row that can't be right unless `leave_out`, or for a file without rows.
    """

    def work(raw: RawText) -> Batch | None:
        return _batch(path, raw, join, leave_out, range)

    yield from not_empty(in_order(work, read_raw(path, _AT_A_TIME), executor), path, "transition")


def _batch(
    path: Path, raw: RawText, join: StateJoin, leave_out: bool, range: tuple[float, float] | None
) -> Batch | None:
    room = raw.newlines + 1
    upper, lower = np.empty(room, dtype=np.int64), np.empty(room, dtype=np.int64)
    einstein_a, given = np.empty(room), np.empty(room)
    wavenumber, log_intensity, energy = np.empty(room), np.empty(room), np.empty(room)
    number, key = np.empty(room, dtype=np.uint32), np.empty(room, dtype=np.uint32)
    status = np.empty(room, dtype=np.uint8)
    n = read_transition_rows(raw.buffer, raw.first, (upper, lower), (einstein_a, given), number, status)
    if not n:
        return None
    status = status[:n]
    kernel.join_states(
        join.states.rows_of(upper[:n]), join.states.rows_of(lower[:n]), einstein_a, join.table,
        (*_ENERGIES, *_LOG_INTENSITIES, *(range or _EVERYWHERE)), wavenumber, log_intensity, energy, key, status,
    )  # fmt: skip
    ledger = _account(path, raw, status, leave_out)
    # No copies where every line is a transition kept.  Else copies, as a view would hold all of a longer array.
    whole = ledger.kept == n >= raw.newlines
    kept: slice | NDArray[np.intp] = slice(n) if whole else np.flatnonzero(status == kernel.GOOD)
    packed = PackedLines(
        wavenumber=wavenumber[kept],
        intensity=encode_intensity(log_intensity[kept]),
        lower_energy=encode_energy(energy[kept]),
        width_class=key[kept],
        record=number[kept],
        classes=join.classes,
    )
    ledger.notes.update(_notes(given[kept], packed))
    ledger.notes.update(_served(join, packed.width_class))
    basis = StrengthBasis(REFERENCE_TEMPERATURE, False, 1.0)
    return Batch(packed, (join.isotopologue,), (basis,), ledger, raw.read)


def _notes(given: FloatArray, packed: PackedLines) -> dict[str, int]:
    with np.errstate(invalid="ignore"):
        differ = int(np.count_nonzero(np.abs(given - packed.wavenumber) > WAVENUMBER_AGREES))
    text = f"wavenumber given differs by over {WAVENUMBER_AGREES:g} cm-1 from the states' energies, which are used"
    nothing = packed.intensity.size - int(np.count_nonzero(packed.intensity))
    return {note: n for note, n in ((text, differ), ("strength 0: contributes nothing", nothing)) if n}


def _served(join: StateJoin, key: NDArray[np.uint32]) -> Counter[str]:
    """How many of the lines have their widths from which file."""
    notes: Counter[str] = Counter()
    lines = np.bincount(key, minlength=len(join.classes))
    for name, (path, kind) in join.served.items():
        notes.update(served_notes(name, path, np.bincount(kind, lines, KINDS).astype(np.int64)))
    return notes


def _account(path: Path, raw: RawText, status: NDArray[np.uint8], leave_out: bool) -> Ledger:
    """The account of a chunk; LineListError for the first bad row unless they are to be left out."""
    counts = np.bincount(status, minlength=kernel.OUTSIDE + 1)
    ledger = Ledger(read=status.size, kept=int(counts[kernel.GOOD]))
    found: list[tuple[int, tuple[str, str]]] = []
    for code, fault in _FAULTS.items():
        if counts[code]:
            found.append((int(np.argmax(status == code)), fault))
            ledger.left_out[fault[0]] += int(counts[code])
    if found and not leave_out:
        row, (what, expected) = min(found)
        chunk = raw.lines()
        raise LineListError(
            problem(
                f"{path}:{chunk.line[row]}",
                what,
                expected=expected,
                found=f'"{excerpt(chunk.record(row))}"',
                remedy='mend the list, or set bad_records = "leave-out"',
            )
        )
    if counts[kernel.OUTSIDE]:
        ledger.left_out["outside the range asked for"] += int(counts[kernel.OUTSIDE])
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
