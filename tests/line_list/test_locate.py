"""Records found again by their line numbers."""

from __future__ import annotations

import bz2
from pathlib import Path

import pytest

from opacity.errors import LineListError
from opacity.line_list import locate
from opacity.line_list import text as text_module
from opacity.line_list.locate import find_records


def anything(number: int, record) -> str:
    return record.record(0).decode()


@pytest.fixture
def many(tmp_path: Path) -> Path:
    path = tmp_path / "lines.txt.bz2"
    text = "".join(f"record {number}\n" if number % 10 else "\n" for number in range(1, 5001)) + "record last"
    path.write_bytes(bz2.compress(text.encode()))
    return path


def test_records_come_in_the_order_asked_for_whatever_the_blocks(many: Path, monkeypatch: pytest.MonkeyPatch):
    read = locate.read_raw
    for size in (64, 1 << 20):
        monkeypatch.setattr(locate, "read_raw", lambda path, size=size: read(path, size))
        wanted = [4999, 1, 5001, 2501]
        found = find_records(many, wanted, anything)
        assert found == [(4999, "record 4999"), (1, "record 1"), (5001, "record last"), (2501, "record 2501")]


def test_two_lines_of_one_record_are_both_found(many: Path):
    assert find_records(many, [7, 7], anything) == [(7, "record 7"), (7, "record 7")]


def test_numbers_count_modulo_and_the_record_decides(many: Path, monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(locate, "NUMBERS", 1024)
    read = locate.read_raw
    monkeypatch.setattr(locate, "read_raw", lambda path: read(path, 64))

    def look(number: int, record) -> bool | None:
        return True if record.record(0) == b"record 2051" else None

    assert find_records(many, [2051 % 1024], look) == [(2051, True)]


def test_what_is_not_there_is_refused(many: Path):
    with pytest.raises(LineListError, match=r"lines\.txt\.bz2: the record of line 10 is no longer there"):
        find_records(many, [3, 10], anything)
    with pytest.raises(LineListError, match="the record of line 3 is no longer there"):
        find_records(many, [3], lambda number, record: None)


def test_no_more_is_read_than_needed(many: Path, monkeypatch: pytest.MonkeyPatch):
    def endless(path: Path):
        yield from text_module.read_raw(path)
        pytest.fail("read on")

    monkeypatch.setattr(locate, "read_raw", endless)
    assert find_records(many, [], anything) == []
    with pytest.raises(pytest.fail.Exception):
        find_records(many, [9999], anything)
