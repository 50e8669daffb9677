"""A look at a line list by itself, before anything is made of it: read once, with few lines held at a time."""

from __future__ import annotations

import contextlib
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from opacity.check.list_bands import BandSums, ListBand, bands_of
from opacity.errors import MoleculeError
from opacity.line_list.duplicates import IN_ONE_FILE
from opacity.line_list.examine import Examination, Finding
from opacity.line_list.ledger import Ledger
from opacity.line_list.records import ReadOptions
from opacity.line_list.stream import UNNAMED, list_parts
from opacity.line_store.store import LineStore
from opacity.molecule.hapi_tables import hapi
from opacity.molecule.partition_function import from_states
from opacity.pipeline.resources import allowed_cpus
from opacity.recipe.model import Recipe

_INCOMPLETE = (
    "the list is not in order of wavenumber: repeated records were looked for only among some thousand records that"
    " follow each other; `opacity ingest RECIPE`, which sorts the lines, counts them all"
)
_NAMELESS = "a catalogue does not name its molecule: with `--recipe RECIPE` it is held against published bands too"


@dataclass(frozen=True)
class ListReport:
    """What a look at a list gave.

    `reach` are the first and last wavenumber (cm-1), None without lines; `problems` and `remarks` are whole sentences,
    of what seems wrong and of what else to know; `rows` further ones with the word before each.
    """

    target: Path
    lines: int
    molecule: str
    isotopologues: tuple[str, ...]
    reach: tuple[float, float] | None
    ledger: Ledger
    findings: tuple[Finding, ...]
    problems: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()
    bands: tuple[ListBand, ...] = ()
    rows: tuple[tuple[str, str], ...] = ()
    facts: dict[str, Any] = field(default_factory=dict)

    def as_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return {
            "list": str(self.target),
            "lines": self.lines,
            "molecule": self.molecule,
            "isotopologues": list(self.isotopologues),
            "reach": self.reach,
            "ledger": self.ledger.as_dict(),
            "findings": [one.as_dict() for one in self.findings],
            "problems": list(self.problems),
            "remarks": list(self.remarks),
            "bands": [one.as_dict() for one in self.bands],
            **self.facts,
        }


def check_records(target: Path, recipe: Recipe | None = None) -> ListReport:
    """Look at a file of records, and hold it against published bands; bad records are left out and counted.

    A recipe says what the list is of, and may name further bands.  Raises LineListError for a file that is no list of
    one molecule.
    """
    hapi()  # before any thread asks for it
    seen, ledger = Examination(), Ledger()
    sums: BandSums | None = None
    with ThreadPoolExecutor(allowed_cpus()) as executor:
        for lines in list_parts(target, _options(target, recipe), executor):
            ledger.add(lines.ledger)
            seen.add(lines)
            if sums is None and len(lines):
                sums = BandSums(bands_of(lines.molecule_formula, recipe))
            if sums is not None:
                sums.add(lines)
    if seen.repeated:
        ledger.notes[IN_ONE_FILE] += seen.repeated
    remarks = [] if seen.complete else [_INCOMPLETE]
    if UNNAMED in seen.isotopologues:
        remarks.append(_NAMELESS)
    return ListReport(
        target=target,
        lines=seen.all.lines,
        molecule=seen.isotopologues[0].molecule_formula,
        isotopologues=tuple(one.formula for one in seen.isotopologues),
        reach=(seen.all.lowest, seen.all.highest),
        ledger=ledger,
        findings=tuple(seen.findings()),
        remarks=tuple(remarks),
        bands=tuple(sums.results()) if sums is not None else (),
    )


def _options(target: Path, recipe: Recipe | None) -> ReadOptions:
    """What a recipe says of a list, of its isotopologue where the list is one of its own."""
    if recipe is None:
        return ReadOptions()
    own = [source for source in recipe.line_lists if any(same_file(path, target) for path in source.paths)]
    isotopologue = own[0].isotopologue if own else None
    return ReadOptions(recipe.molecule.formula, recipe.molecule.mass, isotopologue)


def same_file(one: Path, other: Path) -> bool:
    """Whether two names are of one file that is there."""
    try:
        return one.samefile(other)
    except OSError:
        return False


def store_bands(store: LineStore, recipe: Recipe) -> list[ListBand]:
    """Published bands, and the recipe's, against the lines of a line store; only those in their ranges are read."""
    wanted = bands_of(recipe.molecule.formula, recipe)
    states = store.index.facts.get("states")
    partition = {}
    # States without weight have no partition function; that is said where it is needed.
    with contextlib.suppress(MoleculeError):
        if states:
            summed = from_states(states["temperature"], states["partition"], states["highest_energy"])
            partition = {one.formula: summed for one in store.index.isotopologues}
    sums = BandSums(wanted, partition)
    spans = store.spans()
    for one in store.index.isotopologues:
        if one.formula in spans:
            sums.reaches(one, *spans[one.formula])
    for low, high in _joined([one.band.range for one in wanted if one.band.range is not None]):
        for lines in store.stretches(low, high):
            sums.add(lines)
    return sums.results()


def _joined(ranges: Sequence[tuple[float, float]]) -> list[tuple[float, float]]:
    """Ranges that do not overlap, holding what the given ones hold."""
    found: list[tuple[float, float]] = []
    for low, high in sorted(ranges):
        if found and low <= found[-1][1]:
            found[-1] = (found[-1][0], max(found[-1][1], high))
        else:
            found.append((low, high))
    return found
