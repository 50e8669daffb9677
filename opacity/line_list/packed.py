"""Lines in at most 24 bytes each, and back.

| column | bytes | what |
|---|---|---|
| wavenumber | 8 | cm-1, f8 |
| intensity | 4 | ln I in steps of 500/2^32 from -400; 0 stands for I = 0; relative error 6e-8 |
| lower_energy | 4 | cm-1 in steps of 2.5e-5 from -1; exact for four decimals |
| width_class | 4 (2 in files) | row of a table of isotopologue, file, and each broadener's width, exponent and shift |
| record | 4 | line number in the file, modulo 2^32 |

I = S / (exp(-c2 E/T0) [1 - exp(-c2 nu/T0)]), so that hot lines, whose S at 296 K underflows, lose nothing: kept as a
logarithm, it needs no exponential of its own when it meets the Boltzmann factor.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.constants import SECOND_RADIATION
from opacity.errors import LineListError, problem
from opacity.grids import FloatArray
from opacity.kernels.classes import classify
from opacity.kernels.sort import order_of
from opacity.line_list.model import LineList, StrengthBasis
from opacity.molecule.broadening import BroadenerColumns

ENERGY_STEP = 2.5e-5
ENERGY_OFFSET = -1.0
HIGHEST_ENERGY = 2**32 * ENERGY_STEP + ENERGY_OFFSET - 1.0
LOG_STEP = 500.0 / 2**32
LOG_OFFSET = -400.0

Codes = NDArray[np.uint32]


@dataclass(frozen=True)
class WidthClasses:
    """What lines of one class share, each (n_classes,): isotopologue, file, and widths by broadener (cm-1/bar)."""

    isotopologue: NDArray[np.int16]
    file: NDArray[np.int16]
    broadeners: Mapping[str, BroadenerColumns]

    def __len__(self) -> int:
        return int(self.isotopologue.size)

    def select(self, which: NDArray[np.int64]) -> WidthClasses:
        """Some of the classes."""
        return WidthClasses(
            self.isotopologue[which],
            self.file[which],
            {
                name: BroadenerColumns(one.gamma[which], one.exponent[which], one.shift[which])
                for name, one in self.broadeners.items()
            },
        )

    def rows(self, names: Sequence[str]) -> NDArray[np.uint64]:
        """The classes as bits, (n_classes, 2 + 3 n_broadeners), NaN all alike; absent broadeners as NaN."""
        columns = [self.isotopologue.astype(np.float64), self.file.astype(np.float64)]
        nothing = np.full(len(self), np.nan)
        for name in names:
            one = self.broadeners.get(name)
            columns += [nothing] * 3 if one is None else [one.gamma, one.exponent, one.shift]
        table = np.stack(columns, axis=1)
        table[np.isnan(table)] = np.nan
        return np.ascontiguousarray(table).view(np.uint64)


@dataclass(frozen=True)
class PackedLines:
    """Packed columns, each (n_lines,), and the table that `width_class` points into."""

    wavenumber: FloatArray
    intensity: Codes
    lower_energy: Codes
    width_class: Codes
    record: Codes
    classes: WidthClasses

    def __len__(self) -> int:
        return int(self.wavenumber.size)

    def select(self, which: slice | NDArray[np.intp]) -> PackedLines:
        """Some of the lines, with the same table of classes."""
        return PackedLines(
            self.wavenumber[which],
            self.intensity[which],
            self.lower_energy[which],
            self.width_class[which],
            self.record[which],
            self.classes,
        )


def encode_energy(energy: FloatArray) -> Codes:
    """Lower-state energies (cm-1) as steps.  Raises LineListError beyond the range."""
    if energy.size and not (energy.min() >= ENERGY_OFFSET and energy.max() < HIGHEST_ENERGY):
        found = f"{energy.min():g} to {energy.max():g}"
        raise LineListError(
            problem("lower-state energy", "out of range", expected=f"-1 to {HIGHEST_ENERGY:.0f} cm-1", found=found)
        )
    return np.rint((energy - ENERGY_OFFSET) / ENERGY_STEP).astype(np.uint32)


def decode_energy(codes: Codes) -> FloatArray:
    """Lower-state energies (cm-1) from steps."""
    return codes.astype(np.float64) * ENERGY_STEP + ENERGY_OFFSET


def encode_intensity(log_intensity: FloatArray) -> Codes:
    """ln I as steps; -inf as 0.  Raises LineListError beyond the range."""
    finite = np.isfinite(log_intensity)
    steps = np.rint((np.where(finite, log_intensity, LOG_OFFSET) - LOG_OFFSET) / LOG_STEP) + 1.0
    if np.any(steps < 1.0) or np.any(steps >= 2**32) or np.any(log_intensity == np.inf):
        raise LineListError(
            problem("strength", "out of range", expected="between 1e-173 and 1e43 cm/molecule before population")
        )
    return np.where(finite, steps, 0.0).astype(np.uint32)


def decode_intensity(codes: Codes) -> FloatArray:
    """ln I from steps, -inf for 0."""
    values = (codes - 1.0) * LOG_STEP + LOG_OFFSET
    return np.where(codes == 0, -np.inf, values)


def log_population(wavenumber: FloatArray, energy: FloatArray, temperature: FloatArray | float) -> FloatArray:
    """ln(exp(-c2 E/T) [1 - exp(-c2 nu/T)]), (n_lines,)."""
    emission = -np.expm1(-SECOND_RADIATION * wavenumber / temperature)
    return np.asarray(np.log(emission) - SECOND_RADIATION * energy / temperature)


def pack(lines: LineList) -> PackedLines:
    """Pack a list, in its order."""
    energy = encode_energy(lines.lower_energy)
    reference = np.array([one.temperature for one in lines.basis] or [1.0])[lines.isotopologue]
    with np.errstate(divide="ignore"):
        log_strength = np.log(lines.strength)
    # With the energy as it will be read, so that S at the reference temperature is kept.
    log_intensity = log_strength - log_population(lines.wavenumber, decode_energy(energy), reference)
    each = WidthClasses(lines.isotopologue, lines.file, lines.broadeners)
    index, first = classes_of(each.rows(sorted(lines.broadeners)))
    return PackedLines(
        wavenumber=lines.wavenumber,
        intensity=encode_intensity(log_intensity),
        lower_energy=energy,
        width_class=index,
        record=(lines.record % 2**32).astype(np.uint32),
        classes=each.select(first),
    )


def classes_of(rows: NDArray[np.uint64]) -> tuple[Codes, NDArray[np.int64]]:
    """Each row's class (n,), and the first row of each class (n_classes,)."""
    size = 1
    while size < 2 * rows.shape[0] + 2:
        size *= 2
    first, index = np.empty(rows.shape[0], dtype=np.int64), np.empty(rows.shape[0], dtype=np.uint32)
    count = classify(rows, np.full(size, -1, dtype=np.int64), first, index)
    return index, first[:count]


def unpack(
    packed: PackedLines, template: LineList, basis: Sequence[StrengthBasis], broadeners: Sequence[str]
) -> LineList:
    """A `LineList` of packed lines; isotopologues, files and ledger as in `template`, which has no lines."""
    index = packed.width_class
    energy = decode_energy(packed.lower_energy)
    isotopologue = packed.classes.isotopologue[index]
    reference = np.array([one.temperature for one in basis] or [1.0])[isotopologue]
    strength = np.exp(decode_intensity(packed.intensity) + log_population(packed.wavenumber, energy, reference))
    nothing = np.full(len(packed), np.nan)
    columns = {}
    for name in broadeners:
        one = packed.classes.broadeners.get(name)
        columns[name] = (
            BroadenerColumns(nothing, nothing, nothing)
            if one is None
            else BroadenerColumns(one.gamma[index], one.exponent[index], one.shift[index])
        )
    return replace(
        template,
        wavenumber=packed.wavenumber,
        strength=strength,
        lower_energy=energy,
        einstein_a=nothing,
        upper_weight=nothing,
        lower_weight=nothing,
        isotopologue=isotopologue,
        broadeners=columns,
        record=packed.record.astype(np.int64),
        file=packed.classes.file[index],
    )


def join(parts: Sequence[PackedLines]) -> PackedLines:
    """Several packed lists as one sorted by wavenumber; equal wavenumbers keep the order of the parts."""
    names = sorted({name for part in parts for name in part.classes.broadeners})
    tables = [part.classes for part in parts]
    rows = np.concatenate([table.rows(names) for table in tables])
    index, first = classes_of(rows)
    merged = _from_rows(rows[first], names)
    starts = np.cumsum([0, *(len(table) for table in tables)])
    width_class = np.concatenate([index[starts[i] + part.width_class] for i, part in enumerate(parts)])
    wavenumber = np.concatenate([part.wavenumber for part in parts])
    order = order_of(wavenumber).astype(np.intp)

    def sort(column: NDArray[Any]) -> NDArray[Any]:
        # All places exist, and a mode that cannot fail needs no buffer.
        return np.take(column, order, mode="clip")

    return PackedLines(
        wavenumber=sort(wavenumber),
        intensity=sort(np.concatenate([part.intensity for part in parts])),
        lower_energy=sort(np.concatenate([part.lower_energy for part in parts])),
        width_class=sort(width_class),
        record=sort(np.concatenate([part.record for part in parts])),
        classes=merged,
    )


@dataclass(frozen=True)
class Identical:
    """Lines identical to another: how many `within` one file, how many `across` files, and two such files' numbers."""

    within: int
    across: int
    files: tuple[int, int] | None


def count_identical(packed: PackedLines) -> Identical:
    """How many of the sorted lines agree with another in wavenumber, intensity, energy and isotopologue."""
    same = np.diff(packed.wavenumber) == 0.0
    beside = np.flatnonzero(np.concatenate([same, [False]]) | np.concatenate([[False], same]))
    index = packed.width_class[beside]
    isotopologue, file = packed.classes.isotopologue[index], packed.classes.file[index]
    columns = (packed.intensity[beside], packed.lower_energy[beside], isotopologue, packed.wavenumber[beside])
    order = np.lexsort((file, *columns))
    equal = np.ones(max(order.size - 1, 0), dtype=bool)
    for column in columns:
        equal &= column[order][1:] == column[order][:-1]
    file = file[order]
    across = np.flatnonzero(equal & (file[1:] != file[:-1]))
    files = (int(file[across[0]]), int(file[across[0] + 1])) if across.size else None
    return Identical(int(np.count_nonzero(equal)) - across.size, across.size, files)


def used_classes(packed: PackedLines) -> PackedLines:
    """The same lines with the classes that none of them uses dropped."""
    used = np.zeros(len(packed.classes), dtype=bool)
    used[packed.width_class] = True
    if used.all():
        return packed
    place = (np.cumsum(used) - 1).astype(np.uint32)
    return PackedLines(
        packed.wavenumber,
        packed.intensity,
        packed.lower_energy,
        place[packed.width_class],
        packed.record,
        packed.classes.select(np.flatnonzero(used)),
    )


def _from_rows(rows: NDArray[np.uint64], names: Sequence[str]) -> WidthClasses:
    table = np.ascontiguousarray(rows).view(np.float64)
    return WidthClasses(
        table[:, 0].astype(np.int16),
        table[:, 1].astype(np.int16),
        {
            name: BroadenerColumns(*(table[:, 2 + 3 * k + part].copy() for part in range(3)))
            for k, name in enumerate(names)
        },
    )
