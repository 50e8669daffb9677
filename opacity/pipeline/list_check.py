"""A look at a line list by itself, before anything is made of it: read once, with few lines held at a time."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from opacity.line_list.duplicates import IN_ONE_FILE
from opacity.line_list.examine import Examination, Finding
from opacity.line_list.ledger import Ledger
from opacity.line_list.records import ReadOptions
from opacity.line_list.stream import list_parts
from opacity.molecule.hapi_tables import hapi
from opacity.pipeline.resources import allowed_cpus

_INCOMPLETE = (
    "the list is not in order of wavenumber: repeated records were looked for only among some thousand records that"
    " follow each other; `opacity ingest RECIPE`, which sorts the lines, counts them all"
)


@dataclass(frozen=True)
class ListReport:
    """What a look at a list gave.

    `reach` are the first and last wavenumber (cm-1), None without lines; `remarks` are whole sentences.
    """

    target: Path
    lines: int
    molecule: str
    isotopologues: tuple[str, ...]
    reach: tuple[float, float] | None
    ledger: Ledger
    findings: tuple[Finding, ...]
    remarks: tuple[str, ...] = ()
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
            "remarks": list(self.remarks),
            **self.facts,
        }


def check_records(target: Path, options: ReadOptions | None = None) -> ListReport:
    """Look at a file of records; bad ones are left out and counted.

    `options` are what a recipe says of the list.  Raises LineListError for a file that is no list of one molecule.
    """
    hapi()  # before any thread asks for it
    seen, ledger = Examination(), Ledger()
    with ThreadPoolExecutor(allowed_cpus()) as executor:
        for lines in list_parts(target, options or ReadOptions(), executor):
            ledger.add(lines.ledger)
            seen.add(lines)
    if seen.repeated:
        ledger.notes[IN_ONE_FILE] += seen.repeated
    return ListReport(
        target=target,
        lines=seen.all.lines,
        molecule=seen.isotopologues[0].molecule_formula,
        isotopologues=tuple(one.formula for one in seen.isotopologues),
        reach=(seen.all.lowest, seen.all.highest),
        ledger=ledger,
        findings=tuple(seen.findings()),
        remarks=() if seen.complete else (_INCOMPLETE,),
    )
