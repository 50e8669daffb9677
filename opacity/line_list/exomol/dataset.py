"""One data set in ExoMol format: which of its files is what, and what they say together.

Files are told apart by their endings, plain, .gz or .bz2: .def or .def.json, .states, .trans (many), .pf, .broad.
"""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator, Mapping, Sequence
from concurrent.futures import Executor
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from opacity.errors import LineListError, problem
from opacity.line_list.batches import Batch
from opacity.line_list.exomol.broadening import BroadeningTable, read_broadening
from opacity.line_list.exomol.definition import Definition, read_definition
from opacity.line_list.exomol.states import States, partition_sum, read_states
from opacity.line_list.exomol.transitions import StateJoin, default_names, state_join, transition_batches
from opacity.molecule.isotopologue import Isotopologue, named_isotopologue
from opacity.recipe.formats import EXOMOL_ENDINGS, exomol_kind

PARTITION_TEMPERATURES = np.geomspace(10.0, 10000.0, 400)
"""Temperatures (K) at which the sum over states is kept with the lines."""


@dataclass(frozen=True)
class DataSet:
    """The files of a data set; `broad` by broadener as the recipe writes it."""

    definition: Path | None
    states: Path
    transitions: tuple[Path, ...]
    partition: Path | None
    broad: Mapping[str, Path]
    formula: str
    isotopologue: str

    @property
    def beside(self) -> tuple[Path, ...]:
        """Files that every transition file's lines depend on."""
        first = (self.states,) if self.definition is None else (self.states, self.definition)
        return (*first, *(self.broad[name] for name in sorted(self.broad)))


def sort_files(
    files: Sequence[Path], where: str, formula: str, isotopologue: str, broad: Mapping[str, Path]
) -> DataSet:
    """Tell the files of a recipe's list apart.  `broad` are the broadening files that the recipe names.

    Raises LineListError naming what is missing or not understood.
    """
    kinds: dict[str, list[Path]] = {"def": [], "states": [], "trans": [], "pf": [], "broad": []}
    for path in files:
        kind = exomol_kind(path.name)
        if kind is None:
            expected = f"{', '.join(EXOMOL_ENDINGS)}, plain, .gz or .bz2"
            raise LineListError(problem(path, "not a file of a list in ExoMol format", expected=expected))
        kinds[kind].append(path)
    for kind in ("states", "trans"):
        if not kinds[kind]:
            raise LineListError(problem(where, f"no .{kind} file", expected=f"a .{kind} file under files"))
    for kind in ("def", "states", "pf"):
        if len(kinds[kind]) > 1:
            found = ", ".join(path.name for path in kinds[kind])
            raise LineListError(problem(where, f"several .{kind} files", expected="one", found=found))
    unnamed = [path for path in kinds["broad"] if path not in broad.values()]
    named = {**default_names(unnamed), **broad}
    return DataSet(
        definition=kinds["def"][0] if kinds["def"] else None,
        states=kinds["states"][0],
        transitions=tuple(sorted(kinds["trans"])),
        partition=kinds["pf"][0] if kinds["pf"] else None,
        broad=named,
        formula=formula,
        isotopologue=isotopologue,
    )


class OpenDataSet:
    """A data set whose states and widths are read when they are first needed, once for all its transitions."""

    def __init__(self, files: DataSet, mass: float | None) -> None:
        self.files, self._mass = files, mass

    @functools.cached_property
    def definition(self) -> Definition | None:
        """The definition, where there is one."""
        return None if self.files.definition is None else read_definition(self.files.definition)

    @functools.cached_property
    def states(self) -> States:
        """The states."""
        return read_states(self.files.states, self.definition)

    @functools.cached_property
    def join(self) -> StateJoin:
        """What the transitions are joined with."""
        tables: dict[str, BroadeningTable] = {name: read_broadening(path) for name, path in self.files.broad.items()}
        return state_join(self.states, tables, self.isotopologue)

    @functools.cached_property
    def isotopologue(self) -> Isotopologue:
        """The isotopologue: from hapi's tables by its formula there, otherwise from the definition or the recipe."""
        files = self.files
        mass = self._mass if self.definition is None else self.definition.mass
        found = named_isotopologue(files.formula, files.isotopologue, mass)
        if found is None:
            raise LineListError(
                problem(
                    files.states,
                    f"no mass of {files.isotopologue} is known",
                    expected="an isotopologue by hapi's formula, a .def file, or molecule.mass",
                )
            )
        return found

    def batches(
        self, path: Path, leave_out: bool, range: tuple[float, float] | None, executor: Executor | None
    ) -> Callable[[], Iterator[Batch]]:
        """What reads one of its transition files."""

        def read() -> Iterator[Batch]:
            return transition_batches(path, self.join, leave_out, range, executor)

        return read

    def facts(self) -> dict[str, Any]:
        """What is kept beside the lines as plain values: the definition's defaults, and Q summed over the states."""
        temperatures = PARTITION_TEMPERATURES
        highest = float(self.states.energy.max(initial=0.0))
        definition = self.definition
        return {
            "states": {
                "temperature": temperatures.tolist(),
                "partition": partition_sum(self.states, temperatures).tolist(),
                "highest_energy": highest,
                "count": len(self.states),
                "notes": dict(sorted(self.states.notes.items())),
            },
            "definition": None
            if definition is None
            else {
                "dataset": definition.dataset,
                "version": definition.version,
                "gamma": definition.gamma,
                "exponent": definition.exponent,
                "max_temperature": definition.max_temperature,
                "transitions": definition.transitions,
                "formula": definition.formula,
                "slug": definition.slug,
                "mass": definition.mass,
                "notes": list(definition.notes),
            },
            "broadening": {
                name: {"skipped": dict(table.skipped), "notes": dict(table.notes)}
                for name, table in ((name, read_broadening(path)) for name, path in self.files.broad.items())
            },
        }
