"""What every error line has in common."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from opacity.errors import LineListError, problem
from opacity.line_list.read import read_lines


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
