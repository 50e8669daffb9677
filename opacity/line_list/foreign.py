"""Records of another molecule than the recipe's: whether the list is the wrong one is known at the end of a file."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from opacity.errors import LineListError, problem
from opacity.grids import FloatArray
from opacity.line_list.text import TextChunk
from opacity.molecule.isotopologue import molecule_name


@dataclass(frozen=True)
class _Part:
    """Of a chunk: how many records were `read` and `kept`, how many are `foreign`, their first line and molecules."""

    read: int
    kept: int
    foreign: int
    line: int
    molecules: frozenset[int]


class ForeignRecords:
    """The records of another molecule than `formula` in one file, whose chunks may be judged by several threads."""

    def __init__(self, path: Path, formula: str | None) -> None:
        self._path, self._formula = path, formula
        self._parts: list[_Part] = []

    def add(
        self, text: TextChunk, molecule: FloatArray, foreign: NDArray[np.bool_], kept: int, leave_out: bool
    ) -> None:
        """Enter a chunk of which `kept` records are used.  Raises LineListError for a foreign one unless left out."""
        rows = np.flatnonzero(foreign)
        line = int(text.line[rows[0]]) if rows.size else 0
        molecules = frozenset(np.unique(molecule[rows]).astype(int).tolist())
        part = _Part(len(text), kept, int(rows.size), line, molecules)
        if rows.size and not leave_out:
            raise self._error([part])
        self._parts.append(part)

    def refuse_if_all(self) -> None:
        """Raise LineListError at the end of a file of which no record is used while some are foreign."""
        if any(part.foreign for part in self._parts) and not any(part.kept for part in self._parts):
            raise self._error(self._parts)

    def _error(self, parts: Sequence[_Part]) -> LineListError:
        """Whether the records or the formula are wrong is for the user to say: leaving all out would hide it."""
        first = min(part.line for part in parts if part.foreign)
        names = [molecule_name(number) for number in sorted(frozenset().union(*(part.molecules for part in parts)))]
        count, read = sum(part.foreign for part in parts), sum(part.read for part in parts)
        return LineListError(
            problem(
                "formula",
                f"{self._path}:{first} is a record of another molecule",
                expected=f"records of {self._formula}",
                found=f"{', '.join(names)} in {count} of {read} records",
                remedy="the formula or the list is wrong",
            )
        ).about("formula")
