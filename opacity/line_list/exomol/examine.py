"""What the states and the broadening files of a data set say, apart from its transitions."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from opacity.constants import REFERENCE_TEMPERATURE
from opacity.errors import LineListError, MoleculeError
from opacity.line_list.exomol.broadening import CODES, read_broadening
from opacity.line_list.exomol.dataset import PARTITION_TEMPERATURES
from opacity.line_list.exomol.states import States, partition_sum
from opacity.molecule.isotopologue import Isotopologue
from opacity.molecule.partition_function import PartitionFunction, from_file, from_states, tips

_TEMPERATURES = 24
"""Temperatures at which two partition functions are compared."""


@dataclass
class Said:
    """Sentences for people, those about what seems wrong apart, and the same as plain values."""

    sentences: list[str] = field(default_factory=list)
    problems: list[str] = field(default_factory=list)
    values: dict[str, Any] = field(default_factory=dict)


def examine_states(states: States, partition: Path | None, isotopologue: Isotopologue) -> Said:
    """Number and energies of states, what cannot be right in them, and Q summed over them against other sources."""
    said = Said()
    energy, weight, j = states.energy, states.total_weight, states.j.astype(np.float64)
    lowest, highest = float(energy.min()), float(energy.max())
    said.values = {"count": len(states), "lowest": lowest, "highest": highest, "highest_j": float(j.max())}
    said.sentences.append(f"{len(states)} states up to {highest:.6g} cm-1 and J = {j.max():g}")
    counts = Counter(states.notes)
    counts["total weight 0: such a state adds nothing"] = int(np.count_nonzero(weight == 0.0))
    # The total weight is (2J + 1) times that of the nuclear spins, which is whole (Tennyson et al. 2016).
    share = weight / (2.0 * j + 1.0)
    counts["total weight is no whole multiple of 2J + 1"] = int(np.count_nonzero(np.abs(share - np.rint(share)) > 1e-6))
    said.values["notes"] = {what: count for what, count in counts.items() if count}
    said.problems += [f"states: {count}: {what}" for what, count in said.values["notes"].items()]
    if lowest > 1e-3:
        said.problems.append(f"the lowest energy is {lowest:g} cm-1, not 0: the ground state seems to be missing")
    _compare(said, states, partition, isotopologue)
    return said


def summed(states: States) -> PartitionFunction | None:
    """The partition function summed over the states, None where these have no weight or no low energies at all."""
    values = partition_sum(states, PARTITION_TEMPERATURES)
    try:
        return from_states(PARTITION_TEMPERATURES.tolist(), values.tolist(), float(states.energy.max()))
    except MoleculeError:
        return None


def _compare(said: Said, states: States, partition: Path | None, isotopologue: Isotopologue) -> None:
    """Q summed over the states against the .pf file and TIPS-2021."""
    whole = summed(states)
    if whole is None:
        said.problems.append("the sum over the states is 0: there is no Q of theirs")
        return
    own = float(partition_sum(states, [REFERENCE_TEMPERATURE])[0])
    said.values["partition_296"] = own
    said.sentences.append(f"Q(296 K) summed over the states: {own:.6g}")
    others: list[tuple[str, PartitionFunction]] = []
    try:
        if partition is not None:
            others.append((partition.name, from_file(partition)))
        if isotopologue.known:
            others.append(("TIPS-2021", tips("TIPS-2021", isotopologue)))
    except MoleculeError as error:
        said.sentences.append(f"Q not compared: {error}")
    if partition is None:
        said.sentences.append("no .pf file beside it: Q summed over the states is not held against one")
    said.values["partition"] = {}
    for name, other in others:
        low, high = max(other.lowest, whole.lowest), min(other.highest, whole.highest)
        if low >= high:
            said.sentences.append(f"Q not compared with {name}: the states reach only to {whole.highest:.4g} K")
            continue
        temperatures = np.clip(np.geomspace(low, high, _TEMPERATURES), low, high)
        off = partition_sum(states, temperatures) / np.array([other(t) for t in temperatures.tolist()]) - 1.0
        worst = int(np.argmax(np.abs(off)))
        largest, where = float(off[worst]), float(temperatures[worst])
        said.values["partition"][name] = {"largest_difference": largest, "temperature": where}
        said.sentences.append(
            f"Q summed over the states against {name}: largest difference {100.0 * largest:+.2g} % at {where:.4g} K,"
            f" from {low:.4g} to {high:.4g} K"
        )


def examine_broadening(broad: dict[str, Path]) -> Said:
    """Rows used by code, rows of other codes, and what was assumed, for each broadener's file."""
    said = Said()
    for name, path in sorted(broad.items()):
        try:
            table = read_broadening(path)
        except LineListError as error:
            said.problems.append(f"widths by {name}: {error}")
            said.values[name] = {"file": path.name, "error": str(error)}
            continue
        used = {code: int(np.count_nonzero(table.code == number)) for number, code in enumerate(CODES)}
        used = {code: count for code, count in used.items() if count}
        said.values[name] = {
            "file": path.name,
            "used": used,
            "skipped": dict(sorted(table.skipped.items())),
            "notes": dict(sorted(table.notes.items())),
        }
        words = f"{name}: {path.name}, rows used by code: {_counts(used)}"
        if table.skipped:
            words += f"; rows of codes that are not used: {_counts(table.skipped)}"
        said.sentences.append(words)
        said.sentences += [f"{name}: {count}: {note}" for note, count in sorted(table.notes.items())]
    return said


def _counts(counts: dict[str, int] | Counter[str]) -> str:
    return ", ".join(f"{count} of {code}" for code, count in sorted(counts.items()))
