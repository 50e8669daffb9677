"""A look at a list in parts says what a look at the whole of it says, in bounded memory."""

from __future__ import annotations

import tracemalloc
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.line_list.duplicates import IN_ONE_FILE, identical_pairs
from opacity.line_list.examine import Examination
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList
from opacity.line_list.read import read_lines
from opacity.line_list.records import ReadOptions
from opacity.line_list.stream import list_parts

SAMPLE = Path(__file__).parents[2] / "data-samples" / "carbon-monoxide.par"


def look(path: Path, size: int, options: ReadOptions | None = None) -> tuple[Examination, Ledger]:
    seen, ledger = Examination(), Ledger()
    for part in list_parts(path, options or ReadOptions(), None, size):
        ledger.add(part.ledger)
        seen.add(part)
    return seen, ledger


def whole(lines: LineList) -> Examination:
    seen = Examination()
    seen.add(lines)
    return seen


def by_hand(lines: LineList) -> dict[str, int]:
    """Counts of what is plain to count, of the whole list."""
    later, _ = identical_pairs(lines)
    found = {
        "identical to another record": later.size,
        "lower-state energy unknown (below 0)": int(np.sum(lines.lower_energy < 0.0)),
        "strength 0": int(np.sum(lines.strength == 0.0)),
    }
    for name, one in lines.broadeners.items():
        found[f"no width by {name}"] = int(np.isnan(one.gamma).sum())
        found[f"no temperature exponent for {name}"] = int((np.isnan(one.exponent) & ~np.isnan(one.gamma)).sum())
        found[f"no pressure shift by {name}"] = int(np.isnan(one.shift).sum())
    return {what: count for what, count in found.items() if count}


@pytest.fixture
def faulty(record, write_par) -> Path:
    """Records in order of wavenumber, a third of them three times, with all that a look should find."""
    rng = np.random.default_rng(5)
    records = []
    for nu in np.sort(rng.uniform(2000.0, 2200.0, 300)):
        values = {"wavenumber": nu, "strength": 10.0 ** rng.uniform(-28, -20), "lower_energy": rng.uniform(0, 3000)}
        if rng.random() < 0.2:
            values["gamma_self"] = 0.0
        if rng.random() < 0.1:
            values["delta_air"] = 0.0
        if rng.random() < 0.1:
            values["strength"] = 0.0
        if rng.random() < 0.1:
            values["lower_energy"] = -1.0
        values["code"] = str(rng.choice(["1", "2"]))
        records += [record(**values)] * (3 if rng.random() < 0.33 else 1)
    return write_par(records)


@pytest.mark.parametrize("size", [500, 4096, 1 << 22])
def test_parts_of_any_size_say_what_the_whole_list_says(faulty: Path, size: int) -> None:
    lines = read_lines(faulty)
    expected = whole(lines)
    seen, ledger = look(faulty, size)
    assert seen.complete
    assert seen.repeated == lines.ledger.notes.pop(IN_ONE_FILE) > 100
    assert ledger.as_dict() == lines.ledger.as_dict()
    assert {one.local for one in seen.isotopologues} == {1, 2}
    assert (seen.all.lines, seen.all.lowest, seen.all.highest) == (
        len(lines),
        lines.wavenumber[0],
        lines.wavenumber[-1],
    )
    found = {one.what: one for one in seen.findings()}
    assert set(found) == {one.what for one in expected.findings()}
    for one in expected.findings():
        assert found[one.what].lines == one.lines
        assert found[one.what].share == pytest.approx(one.share, rel=1e-12)
        assert found[one.what].detail == one.detail
    assert by_hand(lines).items() <= {what: one.lines for what, one in found.items()}.items()
    assert len(by_hand(lines)) >= 6


def test_repeats_across_the_border_of_two_parts_are_found(record, write_par) -> None:
    records = [record(wavenumber=2100.0 + 0.01 * k) for k in range(100)]
    path = write_par([*records[:50], records[49], *records[50:]])
    for size in (161, 50 * 161, 51 * 161, 1 << 20):
        seen, _ = look(path, size)
        assert {one.what: one.lines for one in seen.findings()}["identical to another record"] == 1
        assert seen.complete


def test_a_list_out_of_order_says_that_repeats_may_be_missed(record, write_par) -> None:
    records = [record(wavenumber=2100.0 + 0.01 * k) for k in range(100)]
    path = write_par([*records, records[3]])
    near, _ = look(path, 60 * 161)  # two parts, both held
    assert near.complete
    assert "identical to another record" in {one.what for one in near.findings()}
    far, _ = look(path, 20 * 161)
    assert not far.complete
    assert "identical to another record" not in {one.what for one in far.findings()}


def test_columns_that_a_part_lacks_are_counted_as_not_given() -> None:
    lines = read_lines(SAMPLE)
    seen = Examination()
    seen.add(lines.select(slice(0, 100)))
    seen.add(replace(lines.select(slice(100, None)), broadeners={}))
    found = {one.what: one.lines for one in seen.findings()}
    assert found["no width by air"] == 102
    assert found["no pressure shift by self"] == 202


def test_memory_does_not_grow_with_the_list(tmp_path: Path) -> None:
    text = SAMPLE.read_bytes()
    peaks = []
    for copies in (400, 1600):
        path = tmp_path / f"{copies}.par"
        path.write_bytes(text * copies)
        look(path, 1 << 20)  # what is compiled or cached at first is no matter of the list
        tracemalloc.start()
        seen, _ = look(path, 1 << 20)
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
        assert seen.all.lines == 202 * copies
    assert peaks[1] < 1.1 * peaks[0]


def test_what_is_no_list_is_refused_as_by_an_ingest(record, write_par, tmp_path: Path) -> None:
    empty = tmp_path / "empty.par"
    empty.write_bytes(b"\n\n")
    with pytest.raises(LineListError, match=r"empty\.par: holds no record; expected lines; fetch the file again"):
        look(empty, 1 << 20)
    with pytest.raises(LineListError, match=r"made\.par: every record was left out; found 2 strength is negative"):
        look(write_par([record(strength=-1.0)] * 2), 161)
    two = write_par([record(), record(molecule=1)])
    with pytest.raises(LineListError, match=r"made\.par: lines of several molecules; expected one .* found CO, H2O"):
        look(two, 161)
    with pytest.raises(LineListError, match=r"formula: .*made\.par:1 is a record of another molecule"):
        look(write_par([record()]), 161, ReadOptions(formula="H2O"))


def test_a_catalogue_is_looked_at_without_its_molecule(tmp_path: Path) -> None:
    path = tmp_path / "c028503.cat"
    records = [f"{mhz:13.4f}{0.0005:8.4f}{-5.0105:8.4f} 2{0.0:10.4f}  3 -28503" for mhz in (115271.2018, 115272.0)]
    path.write_text("\n".join([records[0], *records]) + "\n")
    seen, ledger = look(path, 1 << 20)
    assert ledger.kept == 3
    assert {item.what: item.lines for item in seen.findings()} == {"identical to another record": 1}
    assert not seen.isotopologues[0].known
    named, _ = look(path, 1 << 20, ReadOptions(formula="CO", isotopologue="(12C)(16O)"))
    assert named.isotopologues[0].formula == "(12C)(16O)"
