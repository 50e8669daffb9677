"""Merging: few and full segments whatever the number of parts, and memory within what was asked."""

from __future__ import annotations

import itertools
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from opacity.line_list.batches import Batch
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import StrengthBasis
from opacity.line_list.packed import PackedLines, WidthClasses
from opacity.line_store import assemble as assemble_module
from opacity.line_store.assemble import pieces, weight
from opacity.line_store.ingest import InputFile, ingest
from opacity.line_store.layout import Segment
from opacity.line_store.merge import merged
from opacity.line_store.segment import SegmentReader, write_segment
from opacity.line_store.store import LineStore
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import isotopologue


def quiet(records: int, position: int) -> None:
    del records, position


def generated(lines: int, seed: int, distinct: bool, decimals: int = 6) -> PackedLines:
    """Unsorted lines, each with a width of its own or all with one."""
    rng = np.random.default_rng(seed)
    count = lines if distinct else 1
    gamma, nothing = rng.uniform(0.01, 0.2, count), np.full(count, np.nan)
    number = np.zeros(count, dtype=np.int16)
    return PackedLines(
        wavenumber=np.round(rng.uniform(1.0, 10000.0, lines), decimals),
        intensity=rng.integers(1, 2**32, lines, dtype=np.uint32),
        lower_energy=rng.integers(0, 2**32, lines, dtype=np.uint32),
        width_class=np.arange(lines, dtype=np.uint32) if distinct else np.zeros(lines, dtype=np.uint32),
        record=np.arange(lines, dtype=np.uint32),
        classes=WidthClasses(number, number, {"h2": BroadenerColumns(gamma, gamma + 0.5, nothing)}),
    )


def batch_of(packed: PackedLines) -> Batch:
    basis = StrengthBasis(296.0, False, 1.0)
    return Batch(packed, (isotopologue(5, 1),), (basis,), Ledger(len(packed), len(packed)))


def of_packed(path: Path, packed: list[PackedLines]) -> InputFile:
    path.write_bytes(b"")
    return InputFile(path, lambda: (batch_of(one) for one in packed))


def sorted_part(folder: Path, name: str, packed: PackedLines) -> Segment:
    return write_segment(folder, name, packed.select(np.argsort(packed.wavenumber, kind="stable")))


def test_many_small_files_give_few_segments(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(assemble_module, "SEGMENT_LINES", 50_000)
    lists = [generated(700, seed, False) for seed in range(300)]
    inputs = [of_packed(tmp_path / f"{k}.trans", [one]) for k, one in enumerate(lists)]
    ingest(tmp_path / "store", inputs, "key", 10**8, quiet)
    every = np.sort(np.concatenate([one.wavenumber for one in lists]))
    with LineStore(tmp_path / "store") as store:
        sizes = [segment.lines for segment in store.index.segments]
        assert len(sizes) == 5
        assert min(sizes[:-1]) >= 50_000
        for low, high in [(0.0, 1e9), (5000.0, 5001.0), (store.edges()[1] - 1.0, store.edges()[1] + 1.0)]:
            found = store.window(low, high).wavenumber
            assert np.array_equal(found, every[(every >= low) & (every <= high)])


@pytest.mark.parametrize("distinct", [False, True])
def test_stretches_keep_to_their_weight(tmp_path: Path, distinct: bool) -> None:
    """More parts than stay open, over the same range: the weight counts classes too."""
    count, at_once = (10, 50_000) if distinct else (80, 100_000)
    parts = [sorted_part(tmp_path, f"{k}.part", generated(10_000, k, distinct)) for k in range(count)]
    stretches = [(len(one), weight(one)) for one in merged(tmp_path, parts, at_once)]
    assert sum(lines for lines, _ in stretches) == count * 10_000
    total = sum(weight for _, weight in stretches)
    assert max(weight for _, weight in stretches) <= 1.3 * at_once
    assert len(stretches) <= 1.7 * total / at_once


def test_equal_wavenumbers_stay_together(tmp_path: Path) -> None:
    parts = [sorted_part(tmp_path, f"{k}.part", generated(9000, k, False, decimals=-3)) for k in range(3)]
    parts.append(sorted_part(tmp_path, "3.part", replace(generated(9000, 3, False), wavenumber=np.full(9000, 2000.0))))
    ends = [(one.wavenumber[0], one.wavenumber[-1]) for one in merged(tmp_path, parts, 5000)]
    assert len(ends) > 3
    assert all(last < first for (_, last), (first, _) in itertools.pairwise(ends))
    whole = generated(1000, 1, False, decimals=-3)
    whole = whole.select(np.argsort(whole.wavenumber, kind="stable"))
    cut = list(pieces(whole, 30))
    assert sum(map(len, cut)) == 1000
    assert all(a.wavenumber[-1] < b.wavenumber[0] for a, b in itertools.pairwise(cut))


def test_a_segment_is_read_with_the_classes_that_are_used(tmp_path: Path) -> None:
    packed = generated(20_000, 1, True)
    packed = packed.select(np.argsort(packed.wavenumber, kind="stable"))
    reader = SegmentReader(tmp_path, write_segment(tmp_path, "a.part", packed))
    found = reader.read(5000.0, 5010.0)
    inside = packed.select((packed.wavenumber >= 5000.0) & (packed.wavenumber < 5010.0))
    assert len(found.classes) == len(found) == len(inside)
    for kind in ("gamma", "exponent"):
        values = getattr(found.classes.broadeners["h2"], kind)[found.width_class]
        assert np.array_equal(values, getattr(packed.classes.broadeners["h2"], kind)[inside.width_class])
    assert len(reader.read(20000.0, 30000.0)) == 0
    reader.close()


def peak_memory() -> int:
    text = Path("/proc/self/status").read_text(encoding="ascii")
    return next(int(line.split()[1]) * 1024 for line in text.splitlines() if line.startswith("VmHWM:"))


def whole_ingest(folder: Path, lines: int) -> None:
    """Print what an ingest of lines of distinct widths takes above what a small one takes."""

    def batches(count: int) -> Iterator[Batch]:
        for k in range(count // 50_000):
            yield batch_of(generated(50_000, k, True))

    (folder / "a.trans").write_bytes(b"")
    ingest(folder / "small", [InputFile(folder / "a.trans", lambda: batches(50_000))], "key", 10**8, quiet)
    base = peak_memory()
    ingest(folder / "store", [InputFile(folder / "a.trans", lambda: batches(lines))], "key", 10**8, quiet)
    print(peak_memory() - base)


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="peak memory is read from /proc")
def test_a_table_of_classes_as_long_as_the_list_stays_within_the_budget(tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, __file__, str(tmp_path), "1000000"], check=True, capture_output=True, text=True
    )
    assert int(done.stdout) < 200e6


if __name__ == "__main__":
    whole_ingest(Path(sys.argv[1]), int(sys.argv[2]))
