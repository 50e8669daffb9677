"""Several files make one list; ranges and selections keep the account."""

from __future__ import annotations

import numpy as np
import pytest

from opacity.line_list.ledger import Ledger
from opacity.line_list.read import merge, read_lines


@pytest.fixture
def three(record, write_par):
    return [
        write_par([record(wavenumber=nu, code=code) for nu, code in content], name)
        for name, content in (
            ("a.par", [(300.0, "1"), (100.0, "2")]),
            ("b.par", [(200.0, "3"), (100.0, "1")]),
            ("c.par", [(150.0, "2")]),
        )
    ]


def test_files_are_merged_in_order_of_wavenumber(three):
    lines = read_lines(three)
    assert lines.wavenumber.tolist() == [100.0, 100.0, 150.0, 200.0, 300.0]
    assert lines.files == tuple(str(path) for path in three)
    assert lines.file.tolist() == [0, 1, 2, 1, 0]
    assert lines.record.tolist() == [2, 2, 1, 1, 1]
    assert [lines.isotopologues[i].local for i in lines.isotopologue] == [2, 1, 2, 3, 1]
    assert len(set(lines.isotopologues)) == len(lines.isotopologues) == 3
    assert (lines.ledger.read, lines.ledger.kept) == (5, 5)
    assert lines.ledger.adds_up()


def test_one_name_and_a_list_of_one_name_are_the_same(three):
    one, other = read_lines(str(three[0])), read_lines([three[0]])
    np.testing.assert_array_equal(one.wavenumber, other.wavenumber)
    assert one.files == other.files


def test_bad_records_of_all_files_are_accounted_for(record, write_par, three):
    bad = write_par([record(strength="x"), record(wavenumber=50.0)], "d.par")
    lines = read_lines([*three, bad], bad_records="leave-out")
    assert (lines.ledger.read, lines.ledger.kept) == (7, 6)
    assert lines.ledger.adds_up()
    assert lines.file[0] == 3


def test_a_file_of_which_nothing_is_left_does_no_harm(record, write_par, three):
    bad = write_par([record(strength="x")], "d.par")
    for order in ([bad, *three], [*three, bad], [three[0], bad, *three[1:]]):
        lines = read_lines(order, bad_records="leave-out")
        assert lines.wavenumber.tolist() == [100.0, 100.0, 150.0, 200.0, 300.0]
        assert sorted({lines.isotopologues[i].local for i in lines.isotopologue}) == [1, 2, 3]
        assert lines.ledger.adds_up()


def test_a_broadener_that_one_file_lacks_is_not_given_there(record, header, write_par, write_table):
    par = write_par([record(wavenumber=10.0)])
    table = write_table([record(wavenumber=5.0) + ",0.05,0.5"], header(("gamma_he", "n_he")))
    lines = read_lines([par, table])
    assert sorted(lines.broadeners) == ["air", "he", "self"]
    assert np.isnan(lines.broadeners["he"].gamma).tolist() == [False, True]
    assert lines.broadeners["he"].gamma[0] == pytest.approx(0.05 / 1.01325, rel=1e-15)
    assert not np.isnan(lines.broadeners["air"].gamma).any()


def test_the_range_keeps_its_ends_and_counts_the_rest(three):
    lines = read_lines(three, range=(100.0, 200.0))
    assert lines.wavenumber.tolist() == [100.0, 100.0, 150.0, 200.0]
    assert lines.ledger.as_dict()["left_out"] == {"outside the range asked for": 1}
    assert lines.ledger.kept == 4
    assert lines.ledger.adds_up()
    nothing = read_lines(three, range=(110.0, 120.0))
    assert len(nothing) == 0
    assert nothing.ledger.left_out["outside the range asked for"] == 5
    assert nothing.ledger.adds_up()


def test_selecting_picks_all_columns_together_and_leaves_the_first_list_alone(three):
    lines = read_lines(three)
    picked = lines.select(np.array([4, 2]))
    assert picked.wavenumber.tolist() == [300.0, 150.0]
    assert [picked.isotopologues[i].local for i in picked.isotopologue] == [1, 2]
    assert picked.file.tolist() == [0, 2]
    assert picked.broadeners["air"].gamma.size == 2
    counted = lines.select(lines.wavenumber > 120.0, "low")
    assert counted.ledger.as_dict()["left_out"] == {"low": 2}
    assert counted.ledger.adds_up()
    assert lines.ledger.as_dict()["left_out"] == {}


def test_merging_is_the_same_in_one_step_and_in_two(three):
    a, b, c = (read_lines(path) for path in three)
    one, two = merge([a, b, c]), merge([merge([a, b]), c])
    for name in ("wavenumber", "strength", "isotopologue", "file", "record"):
        np.testing.assert_array_equal(getattr(one, name), getattr(two, name))
    assert one.files == two.files
    assert one.isotopologues == two.isotopologues
    assert one.ledger == two.ledger


def test_a_ledger_that_does_not_add_up_says_so():
    ledger = Ledger(read=3, kept=2)
    assert not ledger.adds_up()
    ledger.left_out["lost"] += 1
    assert ledger.adds_up()
    ledger.leave_out("later", 2)
    assert ledger.as_dict() == {"read": 3, "kept": 0, "left_out": {"later": 2, "lost": 1}, "notes": {}}
    assert ledger.adds_up()
