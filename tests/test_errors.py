"""Texts of errors and of data in error lines: one line, whatever the bytes."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from opacity.errors import LineListError, excerpt, one_line, printable, problem
from opacity.line_list.read import read_lines


@pytest.mark.parametrize(
    "text, expected",
    [
        ("plain", "plain"),
        ("two\nlines\r\n  and\ta tab", "two lines and a tab"),
        ("bell\x07 and \x85next", "bell\\x07 and next"),
        ("", ""),
    ],
)
def test_what_an_exception_says_is_put_on_one_line(text, expected):
    assert one_line(ValueError(text)) == expected


def test_what_cannot_be_printed_is_escaped():
    assert printable("a\nb\x1b[0m\u2028é") == "a\\nb\\x1b[0m\\u2028é"


@pytest.mark.parametrize(
    "text, most, expected",
    [
        ("x" * 60, 60, "x" * 60),
        ("x" * 61, 60, "x" * 60 + "..."),
        (b"a\tb\xff\x00c", 60, "a b??c"),
        ("é\n", 60, "??"),
        (b"0123456789", 4, "0123..."),
    ],
)
def test_an_excerpt_is_short_and_plain(text, most, expected):
    assert excerpt(text, most) == expected


def test_a_line_with_all_its_parts() -> None:
    line = problem("a.par:3", "too long", expected=160, found="161", remedy="mend it")
    assert line == "a.par:3: too long; expected 160, found 161; mend it"
    assert problem("", "too long") == "too long"


def test_what_does_not_print_is_escaped() -> None:
    found = "\x1b[2J \xfc \u2028"
    assert problem("a\nb.par", "bad\r", found=found) == "a\\nb.par: bad\\r; found \\x1b[2J \xfc \\u2028"
    assert problem(os.fsdecode(b"a\xff.par"), "bad") == "a\\udcff.par: bad"


def test_a_file_whose_name_has_a_line_end_is_named_in_one_line(tmp_path: Path) -> None:
    path = tmp_path / "a\n b.par"
    path.write_bytes(b"short\n")
    with pytest.raises(LineListError) as caught:
        read_lines(path)
    assert str(caught.value).startswith(f"{tmp_path}/a\\n b.par:1: record of the wrong length; ")
    assert str(caught.value).isprintable()
