"""What a list gives reason to warn of before a table is made of it: records said twice, more than a band holds.

Nothing is refused: a list may hold such lines for a reason, and whoever uses it should know.
"""

from __future__ import annotations

from collections.abc import Sequence

from opacity.check.list_bands import MORE, BandSums, ListBand, bands_of
from opacity.cross_sections.source import LINES_AT_ONCE
from opacity.line_list.duplicates import IN_ONE_FILE, IN_ONE_LIST, identical_pairs
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList
from opacity.line_store.store import LineStore
from opacity.pipeline.list_check import store_bands
from opacity.recipe.model import LineListSource, Recipe


def warnings_of_lines(lines: LineList, recipe: Recipe, source: LineListSource) -> tuple[str, ...]:
    """Warnings about a list held in memory."""
    share = ""
    if lines.ledger.notes[IN_ONE_FILE]:
        later, _ = identical_pairs(lines)
        part = float(lines.strength[later].sum()) / max(float(lines.strength.sum()), 1e-300)
        share = f", with {100.0 * part:.3g} % of the list's strength"
    sums = BandSums(bands_of(recipe.molecule.formula, recipe))
    sums.add(lines)
    return (*_repeated(lines.ledger, source, share), *_exceeded(sums.results(), source))


def warnings_of_store(store: LineStore, recipe: Recipe, source: LineListSource) -> tuple[str, ...]:
    """Warnings about a list in a line store; bands are looked at where the list is short (`ingest` does it always)."""
    bands = store_bands(store, recipe) if store.index.lines <= LINES_AT_ONCE else []
    return (*_repeated(store.index.ledger, source, ""), *_exceeded(bands, source))


def _repeated(ledger: Ledger, source: LineListSource, share: str) -> list[str]:
    count = ledger.notes[IN_ONE_FILE] + ledger.notes[IN_ONE_LIST]
    if not count:
        return []
    records = "record repeats" if count == 1 else "records repeat"
    return [f"{', '.join(source.files)}: {count} {records} another one{share}, and all of them count"]


def _exceeded(bands: Sequence[ListBand], source: LineListSource) -> list[str]:
    names = ", ".join(source.files)
    return [f"{names}: band {one.name}: {one.verdict}; {one.detail}" for one in bands if one.verdict == MORE]
