from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

Faults = Callable[..., list[str]]

LINE_LIST_FAULTS = [
    (
        'format = "hapi"',
        'format = "hpai"',
        '14: line_list[1].format: unknown value; expected "hitran", "hapi", "exomol" or "catalogue", '
        'found "hpai"; did you mean "hapi"?',
    ),
    (
        'format = "hapi"',
        "",
        '13: line_list[1].format: missing; expected "hitran", "hapi", "exomol" or "catalogue"',
    ),
    (
        '    "lines/hot.data",',
        '\n    "lines/cold*.data",',
        '17: line_list[1].files[0]: no such file; expected a file in FOLDER, found "lines/cold*.data"',
    ),
    (
        '    "lines/hot.data",',
        '    "lines/hto.data",',
        '16: line_list[1].files[0]: no such file; expected a file in FOLDER, found "lines/hto.data"; '
        'did you mean "hot.data"?',
    ),
    (
        '    "lines/hot.data",',
        '    "lines",',
        '16: line_list[1].files[0]: a folder, not a file; expected a file in FOLDER, found "lines"',
    ),
    (
        '    "lines/hot.data",',
        '    "lines/hot.header",',
        "16: line_list[1].files[0]: not a data file of this format; expected a file that ends in .data, "
        'found "hot.header"',
    ),
    (
        '    "lines/hot.data",',
        '    "lines/bare.data",',
        "16: line_list[1].files[0]: no header beside the data file; expected FOLDER/lines/bare.header",
    ),
    (
        '    "lines/hot.data",',
        '    "lines/hot.data", "lines/../lines/hot.data"',
        "16: line_list[1].files[1]: file already named in line_list[1]; expected each file once, "
        "found FOLDER/lines/../lines/hot.data",
    ),
    (
        '    "lines/hot.data",',
        "    7,",
        "16: line_list[1].files[0]: not text; expected a file name or pattern, found 7",
    ),
    (
        'files = ["lines/CO-*.par"]',
        'files = "lines/CO-*.par"',
        '9: line_list[0].files: no list of files; expected a list of file names or patterns such as ["lines/*.par"], '
        'found "lines/CO-*.par"',
    ),
    (
        "range = [0, 9000.0]",
        "range = [9000.0, 0]",
        "10: line_list[0].range: empty range; expected [lo, hi] cm-1 with 0 <= lo < hi <= 1e+06, found [9000, 0]",
    ),
    (
        "range = [0, 9000.0]",
        "range = [0, inf]",
        "10: line_list[0].range[1]: impossible value; expected a number from 0 to 1e+06 cm-1, found inf",
    ),
    (
        "range = [0, 9000.0]",
        "range = [0]",
        "10: line_list[0].range: not a range; expected [lo, hi] cm-1 with 0 <= lo < hi <= 1e+06, found a list of 1",
    ),
    (
        'isotopologue = "(12C)(16O)"',
        'isotopologue = "12 C"',
        '18: line_list[1].isotopologue: impossible value; expected an isotopologue such as (12C)(16O), found "12 C"',
    ),
    (
        'reference = "second"',
        'reference = ""',
        '19: line_list[1].reference: empty text; expected the publication of the list, found ""',
    ),
    (
        'bad_records = "leave-out"',
        'bad_records = "leave_out"',
        '20: line_list[1].bad_records: unknown value; expected "stop" or "leave-out", found "leave_out"; '
        'did you mean "leave-out"?',
    ),
]


@pytest.mark.parametrize("old, new, expected", LINE_LIST_FAULTS)
def test_one_fault_of_a_line_list_gives_one_line(faults: Faults, old: str, new: str, expected: str) -> None:
    assert faults((old, new)) == [f"co.toml:{expected}"]


def test_a_line_list_as_plain_table(faults: Faults, full: str) -> None:
    start, end = full.index("[[line_list]]"), full.index("[isotopologues]")
    text = full[:start] + "[line_list]\n" + full[end:]
    assert faults(text=text) == [
        "co.toml:7: line_list: not an array of tables; expected one or more [[line_list]] tables, "
        "found an empty table; write [[line_list]]"
    ]


def test_the_same_file_in_two_lists(faults: Faults, folder: Path) -> None:
    (folder / "link.data").symlink_to(folder / "lines/CO-b.par")
    (folder / "link.header").touch()
    assert faults(('"lines/hot.data"', '"link.data"')) == [
        "co.toml:16: line_list[1].files[0]: file already named in line_list[0]; expected each file once, "
        "found FOLDER/link.data"
    ]


def test_a_link_to_no_file_is_not_passed_over(faults: Faults, folder: Path) -> None:
    (folder / "lines" / "CO-c.par").symlink_to("nowhere")
    what = "9: line_list[0].files[0]: a link to no file; expected files, found FOLDER/lines/CO-c.par; mend or remove it"
    assert faults() == [f"co.toml:{what}"]
