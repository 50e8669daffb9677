"""The line store: what goes in comes out by window, whatever the order, the memory and the interruptions."""

from __future__ import annotations

import json
from collections.abc import Iterator
from functools import partial
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.line_list.batches import Batch, record_batches
from opacity.line_list.model import LineList
from opacity.line_list.packed import pack
from opacity.line_list.read import merge, read_lines
from opacity.line_list.records import ReadOptions
from opacity.line_store import assemble as assemble_module
from opacity.line_store import ingest as ingest_module
from opacity.line_store.ingest import InputFile, ingest
from opacity.line_store.layout import INDEX, PARTS
from opacity.line_store.store import LineStore, is_current, read_index

SAMPLES = Path(__file__).parents[2] / "data-samples"


def quiet(records: int, position: int) -> None:
    assert records >= 0
    assert position >= 0


def sample(name: str = "carbon-monoxide.data") -> InputFile:
    path = SAMPLES / name
    format = "hapi" if path.suffix == ".data" else "hitran"
    return InputFile(path, partial(record_batches, path, format, ReadOptions(), False, None, None))


def shuffled(lines: LineList, pieces: int, seed: int) -> list[LineList]:
    """The lines in random order in pieces, each sorted, as batches of an unsorted file are."""
    order = np.random.default_rng(seed).permutation(len(lines))
    return [lines.select(np.sort(part)) for part in np.array_split(order, pieces)]


def of_batches(path: Path, parts: list[LineList]) -> InputFile:
    def batches() -> Iterator[Batch]:
        for part in parts:
            yield Batch(pack(part), part.isotopologues, part.basis, part.ledger)

    return InputFile(path, batches)


def counted(parts: list[LineList]) -> list[LineList]:
    """Parts whose ledgers account for their own lines only."""
    for part in parts:
        part.ledger.read = part.ledger.kept = len(part)
    return parts


def same_lines(found: LineList, expected: LineList) -> None:
    assert np.array_equal(found.wavenumber, expected.wavenumber)
    np.testing.assert_allclose(found.strength, expected.strength, rtol=6e-8)
    np.testing.assert_allclose(found.lower_energy, expected.lower_energy, atol=1.3e-5)
    assert np.array_equal(found.isotopologue, expected.isotopologue)
    for name, one in expected.broadeners.items():
        for kind in ("gamma", "exponent", "shift"):
            assert np.array_equal(getattr(found.broadeners[name], kind), getattr(one, kind), equal_nan=True)


@pytest.mark.parametrize("memory", [10**9, 10**5])
def test_windows_equal_a_brute_force_filter(tmp_path: Path, memory: int) -> None:
    lines = read_lines(SAMPLES / "carbon-monoxide.data")
    ingest(tmp_path / "store", [sample()], "key", memory, quiet)
    with LineStore(tmp_path / "store") as store:
        same_lines(store.window(0.0, 1e9), lines)
        rng = np.random.default_rng(1)
        for low, high in np.sort(rng.uniform(1900.0, 2400.0, (50, 2)), axis=1):
            inside = (lines.wavenumber >= low) & (lines.wavenumber <= high)
            same_lines(store.window(low, high), lines.select(inside))
        edge = float(lines.wavenumber[17])
        assert len(store.window(edge, edge)) == 1
        assert len(store.window(3000.0, 4000.0)) == 0
        assert not (tmp_path / "store" / PARTS).exists()
        assert store.index.ledger.as_dict() == lines.ledger.as_dict()


@pytest.mark.parametrize("at_once", [40, 400, 10**6])
def test_an_unsorted_list_comes_out_sorted(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, at_once: int) -> None:
    """Many runs, merged in small stretches."""
    lines = read_lines(SAMPLES / "invented-molecule.par", options=ReadOptions(formula="Vl", mass=40.0))
    monkeypatch.setattr(ingest_module, "SEGMENT_LINES", at_once)
    monkeypatch.setattr(assemble_module, "SEGMENT_LINES", at_once)
    monkeypatch.setattr(ingest_module, "BYTES_A_LINE", 3 * 10**9 // max(at_once, 1))
    parts = counted(shuffled(lines, 23, seed=2))
    ingest(tmp_path / "store", [of_batches(SAMPLES / "invented-molecule.par", parts)], "key", 10**9, quiet)
    with LineStore(tmp_path / "store") as store:
        assert store.index.lines == len(lines)
        found = store.window(0.0, 1e9)
        assert np.all(np.diff(found.wavenumber) >= 0.0)
        order, expected = np.lexsort((found.record, found.wavenumber)), np.lexsort((lines.record, lines.wavenumber))
        same_lines(found.select(order), lines.select(expected))
        stretched = merge(list(store.stretches(0.0, 1e9)))
        assert np.array_equal(stretched.wavenumber, found.wavenumber)


def test_a_store_takes_at_most_24_bytes_a_line_beside_its_classes(tmp_path: Path) -> None:
    lines = read_lines(SAMPLES / "invented-molecule.par", options=ReadOptions(formula="Vl", mass=40.0))
    many = merge([lines] * 200)
    many.ledger.read = many.ledger.kept = len(many)
    path = SAMPLES / "invented-molecule.par"
    ingest(tmp_path / "store", [of_batches(path, [many])], "key", 10**9, quiet)
    index = read_index(tmp_path / "store")
    assert index is not None
    assert index.bytes / index.lines <= 24.0


def test_an_interrupted_ingest_goes_on_file_by_file(tmp_path: Path) -> None:
    read: list[str] = []
    records = (SAMPLES / "carbon-monoxide.par").read_bytes().splitlines(keepends=True)
    paths = tmp_path / "a.par", tmp_path / "b.par"
    for k, path in enumerate(paths):
        path.write_bytes(b"".join(records[k::2]))

    def watched(path: Path, fails: bool) -> InputFile:
        def batches() -> Iterator[Batch]:
            read.append(path.name)
            yield from record_batches(path, "hitran", ReadOptions(), False, None, None)
            if fails:
                raise KeyboardInterrupt

        return InputFile(path, batches)

    store, again = tmp_path / "store", tmp_path / "again"
    with pytest.raises(KeyboardInterrupt):
        ingest(store, [watched(paths[0], False), watched(paths[1], True)], "key", 10**9, quiet)
    assert read_index(store) is None
    ingest(store, [watched(path, False) for path in paths], "key", 10**9, quiet)
    assert read == ["a.par", "b.par", "b.par"]
    ingest(again, [watched(path, False) for path in paths], "key", 10**9, quiet)
    for file in sorted(again.glob("*.h5")):
        assert file.read_bytes() == (store / file.name).read_bytes()


def test_a_store_knows_whether_it_is_current(tmp_path: Path) -> None:
    path = tmp_path / "a.par"
    path.write_bytes((SAMPLES / "carbon-monoxide.par").read_bytes())
    one = InputFile(path, partial(record_batches, path, "hitran", ReadOptions(), False, None, None))
    ingest(tmp_path / "store", [one], "key", 10**9, quiet)
    index = read_index(tmp_path / "store")
    assert index is not None
    assert is_current(index, [one], "key")
    assert not is_current(index, [one], "other key")
    assert not is_current(index, [one, one], "key")
    text = path.read_bytes()
    path.write_bytes(text)  # a new time, the same content
    assert is_current(index, [one], "key")
    path.write_bytes(text.replace(b"2147.0811", b"2147.0812", 1))
    assert not is_current(index, [one], "key")
    path.unlink()
    assert not is_current(index, [one], "key")


def test_damage_is_named(tmp_path: Path) -> None:
    folder = tmp_path / "store"
    ingest(folder, [sample()], "key", 10**9, quiet)
    segment = next(folder.glob("*.h5"))
    good = segment.read_bytes()
    for change in (good[:-1], good[:100] + bytes([good[100] ^ 1]) + good[101:], b""):
        segment.write_bytes(change)
        with LineStore(folder) as store, pytest.raises(LineListError, match=rf"{segment.name}: segment .* damaged"):
            store.window(0.0, 1e9)
    segment.unlink()
    with LineStore(folder) as store, pytest.raises(LineListError, match=rf"{segment.name}: segment .* missing"):
        store.window(0.0, 1e9)
    index = (folder / INDEX).read_text(encoding="utf-8")
    changed = index.replace('"mass": 2', '"mass": 1', 1)
    assert changed != index
    for text in (changed, "", "{}", "[1]", '{"format": "opacity line store", "format_version": 99}', "\x00"):
        (folder / INDEX).write_text(text, encoding="utf-8")
        with pytest.raises(LineListError, match=r"^[^\n]*index\.json: [^\n]*$"):
            read_index(folder)


def test_a_bad_record_stops_the_ingest_and_leaves_no_store(tmp_path: Path) -> None:
    path = tmp_path / "bad.par"
    path.write_bytes((SAMPLES / "carbon-monoxide.par").read_bytes() + b" 51 short\n")
    one = InputFile(path, partial(record_batches, path, "hitran", ReadOptions(), False, None, None))
    with pytest.raises(LineListError, match=r"bad\.par:203: record of the wrong length"):
        ingest(tmp_path / "store", [one], "key", 10**9, quiet)
    assert read_index(tmp_path / "store") is None


def test_the_index_is_plain_json(tmp_path: Path) -> None:
    ingest(tmp_path / "store", [sample()], "key", 10**9, quiet)
    values = json.loads((tmp_path / "store" / INDEX).read_text(encoding="utf-8"))
    assert values["ledger"]["read"] == values["ledger"]["kept"] == 202
    assert values["inputs"][0]["files"][0]["file"] == "carbon-monoxide.data"
