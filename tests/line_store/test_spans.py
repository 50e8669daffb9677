"""Between which wavenumbers each isotopologue of a store has lines, also for a store of an earlier version."""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.line_list.batches import Batch
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.packed import pack
from opacity.line_list.read import read_lines
from opacity.line_store import assemble as assemble_module
from opacity.line_store import ingest as ingest_module
from opacity.line_store.ingest import InputFile, ingest
from opacity.line_store.layout import INDEX, sealed, unsealed
from opacity.line_store.store import LineStore, read_index
from opacity.molecule.isotopologue import isotopologue

SAMPLE = Path(__file__).parents[2] / "data-samples" / "carbon-monoxide.par"
VERSION_1 = Path(__file__).parent / "data" / "version-1"


def two_isotopologues() -> LineList:
    """The sample with its lines between 2100 and 2150 cm-1 given to (13C)(16O)."""
    lines = read_lines(SAMPLE)
    other = isotopologue(5, 2)
    return replace(
        lines,
        isotopologue=((lines.wavenumber > 2100.0) & (lines.wavenumber < 2150.0)).astype(np.int16),
        isotopologues=(*lines.isotopologues, other),
        basis=(*lines.basis, StrengthBasis(296.0, True, other.abundance)),
    )


def spans_by_hand(lines: LineList) -> dict[str, tuple[float, float]]:
    found = {}
    for number, one in enumerate(lines.isotopologues):
        own = lines.wavenumber[lines.isotopologue == number]
        found[one.formula] = (float(own.min()), float(own.max()))
    return found


def store_of(folder: Path, lines: LineList, pieces: int = 1) -> Path:
    """A store of the lines, read from an unsorted file in some pieces."""
    order = np.random.default_rng(3).permutation(len(lines))
    parts = [lines.select(np.sort(part)) for part in np.array_split(order, pieces)]
    for part in parts:
        part.ledger.read = part.ledger.kept = len(part)

    def batches() -> Iterator[Batch]:
        for part in parts:
            yield Batch(pack(part), part.isotopologues, part.basis, part.ledger)

    ingest(folder, [InputFile(SAMPLE, batches)], "key", 10**9, lambda records, position: None)
    return folder


@pytest.mark.parametrize("at_once", [17, 10**6])
def test_each_isotopologue_has_its_own_ends(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, at_once: int) -> None:
    monkeypatch.setattr(ingest_module, "SEGMENT_LINES", at_once)
    monkeypatch.setattr(assemble_module, "SEGMENT_LINES", at_once)
    lines = two_isotopologues()
    with LineStore(store_of(tmp_path / "store", lines, pieces=7)) as store:
        assert store.spans() == spans_by_hand(lines)
        assert store.index.spans is not None
        assert store.spans()["(13C)(16O)"] != store.spans()["(12C)(16O)"]


def test_an_isotopologue_without_lines_has_no_ends(tmp_path: Path) -> None:
    lines = two_isotopologues()
    kept = lines.select(lines.isotopologue == 0)
    bare = replace(kept, isotopologues=lines.isotopologues, basis=lines.basis)
    with LineStore(store_of(tmp_path / "store", replace(bare, isotopologue=kept.isotopologue))) as store:
        assert list(store.spans()) == ["(12C)(16O)"]


def test_a_store_of_version_1_is_gone_through_for_its_ends() -> None:
    index = read_index(VERSION_1)
    assert index is not None
    assert index.spans is None
    with LineStore(VERSION_1) as store:
        assert store.spans() == spans_by_hand(two_isotopologues())


@pytest.mark.parametrize("version", [0, 3])
def test_another_version_is_refused_in_one_line(tmp_path: Path, version: int) -> None:
    folder = tmp_path / "store"
    shutil.copytree(VERSION_1, folder)
    values = unsealed((folder / INDEX).read_bytes())
    (folder / INDEX).write_bytes(sealed({**values, "format_version": version}))
    expected = rf"index\.json: a line store of another version; expected version 1 to 2, found {version}; remove the"
    with pytest.raises(LineListError, match=expected):
        read_index(folder)


@pytest.mark.parametrize("spans", [[], [[1.0]], [None], "x", [[1.0, "a"], None]])
def test_damaged_ends_are_named(tmp_path: Path, spans: object) -> None:
    folder = store_of(tmp_path / "store", two_isotopologues())
    values = unsealed((folder / INDEX).read_bytes())
    assert len(values["spans"]) == 2
    (folder / INDEX).write_bytes(sealed({**values, "spans": spans}))
    with pytest.raises(LineListError, match=r"^[^\n]*not the index of a line store[^\n]*$"):
        read_index(folder)


def test_the_index_stays_plain_json(tmp_path: Path) -> None:
    folder = store_of(tmp_path / "store", two_isotopologues())
    assert json.loads((folder / INDEX).read_text(encoding="utf-8"))["format_version"] == 2
