"""One file of records as lists of some lines each, in the order of the file, so that few are held at a time."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from concurrent.futures import Executor
from dataclasses import replace
from pathlib import Path

from opacity.errors import LineListError, problem
from opacity.line_list.batches import in_order
from opacity.line_list.catalogue import as_line_list, catalogue_isotopologue, catalogue_part
from opacity.line_list.foreign import ForeignRecords
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList
from opacity.line_list.read import is_catalogue, of_isotopologue, parser_of
from opacity.line_list.records import UNKNOWN, ReadOptions, judge
from opacity.line_list.text import CHUNK, RawText, TextChunk, read_raw
from opacity.molecule.isotopologue import Isotopologue

UNNAMED = Isotopologue(0, 1, "not named in the file", "a molecule that the file does not name", 1.0, 1.0, known=False)
"""What a catalogue's lines are of where nobody says it."""


def list_parts(path: Path, options: ReadOptions, executor: Executor | None, size: int = CHUNK) -> Iterator[LineList]:
    """The lines of a file by its ending, each part sorted by wavenumber, with an account of its own records.

    A part is what about `size` bytes of the text hold.  Records that can't be right are left out.
    Raises LineListError for a file that cannot be read or holds no record, and at its end where every record was left
    out; for lines of several molecules as soon as they are met.
    """
    others = ForeignRecords(path, options.formula)
    parse = _reader(path, options, others)

    def work(raw: RawText) -> LineList | None:
        chunk = raw.lines()
        return parse(chunk) if len(chunk) else None

    account, formulas, any_part = Ledger(), set[str](), False
    for part in in_order(work, read_raw(path, size), executor):
        if part is None:
            continue
        any_part = True
        account.add(part.ledger)
        formulas |= {one.molecule_formula for one in part.isotopologues}
        if len(formulas) > 1:
            found = ", ".join(sorted(formulas))
            raise LineListError(problem(path, "lines of several molecules", expected="one molecule", found=found))
        yield part
    if not any_part:
        raise LineListError(problem(path, "holds no record", expected="lines", remedy="fetch the file again"))
    others.refuse_if_all()
    nameless = options.formula is None and UNKNOWN in account.left_out
    account.refuse_nothing_kept(path, "`--recipe RECIPE` says what the list is of" if nameless else "mend the list")


def _reader(path: Path, options: ReadOptions, others: ForeignRecords) -> Callable[[TextChunk], LineList]:
    """What makes lines of some records of a file."""
    if is_catalogue(path, None):
        one = UNNAMED
        if options.formula is not None and options.isotopologue is not None:
            one = catalogue_isotopologue(path, options.formula, options.isotopologue, options.mass)
        return lambda chunk: as_line_list(catalogue_part(path, chunk, True), one)
    parse = parser_of(path, None)

    def records(chunk: TextChunk) -> LineList:
        # Widths by J'' are the recipe's, not the list's.
        lines = judge(parse(chunk), replace(options, widths={}), True, others)
        return lines if options.isotopologue is None else of_isotopologue(lines, options.isotopologue)

    return records
