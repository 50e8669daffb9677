"""Texts of errors and of data in error lines: one line, whatever the bytes."""

from __future__ import annotations

import pytest

from opacity.errors import excerpt, one_line, printable


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
