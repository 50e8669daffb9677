"""What is said of a file as a whole does not depend on where its chunks end."""

from __future__ import annotations

import pytest

from opacity.errors import InputError, LineListError
from opacity.line_list import text
from opacity.line_list.batches import record_batches
from opacity.line_list.read import read_lines
from opacity.line_list.records import ReadOptions

OTHER = "another isotopologue than the one chosen"


@pytest.fixture(autouse=True)
def one_record_a_chunk(monkeypatch):
    monkeypatch.setattr(text.read_raw, "__defaults__", (161,))
    monkeypatch.setattr(text.read_chunks, "__defaults__", (161,))


def batches(path, leave_out=False, **options):
    return list(record_batches(path, "hitran", ReadOptions(**options), leave_out, None, None))


def test_a_chunk_without_the_isotopologue_chosen_keeps_no_line(record, write_par):
    path = write_par([record(code="1"), record(code="2"), record(code="1")])
    found = batches(path, isotopologue="2")
    assert [len(one.packed) for one in found] == [0, 1, 0]
    assert [one.ledger.left_out[OTHER] for one in found] == [1, 0, 1]
    assert all(one.ledger.adds_up() for one in found)
    assert [iso.local for one in found for iso in one.isotopologues] == [2]


def test_a_file_without_the_isotopologue_chosen_is_refused_at_its_end(record, write_par):
    path = write_par([record(code="2"), record(code="1")])
    with pytest.raises(InputError, match=r"the list holds no line of 3; expected \S+ \(1\), \S+ \(2\)$"):
        batches(path, isotopologue="3")
    with pytest.raises(InputError, match="CO has no isotopologue 77"):
        batches(path, isotopologue="77")


@pytest.mark.parametrize("read", [batches, None])
def test_foreign_records_are_left_out_where_another_chunk_has_others(record, write_par, read):
    path = write_par([record(molecule=2), record(), record(molecule=1)])
    if read is None:
        ledgers = [read_lines(path, bad_records="leave-out", options=ReadOptions("CO")).ledger]
    else:
        ledgers = [one.ledger for one in read(path, True, formula="CO")]
    assert sum(one.left_out["record of another molecule"] for one in ledgers) == 2
    assert sum(one.kept for one in ledgers) == 1


def test_a_file_of_foreign_records_alone_is_refused_at_its_end(record, write_par):
    path = write_par([record(molecule=2), record(molecule=1), record(molecule=2)])
    words = r"made.par:1 is a record of another molecule; expected records of CO, found H2O, CO2 in 3 of 3 records"
    with pytest.raises(LineListError, match=words):
        batches(path, True, formula="CO")
    with pytest.raises(LineListError, match=words):
        read_lines(path, bad_records="leave-out", options=ReadOptions("CO"))
    with pytest.raises(LineListError, match=r"made.par:1 is a record .* found CO2 in 1 of 1 records"):
        batches(path, formula="CO")
