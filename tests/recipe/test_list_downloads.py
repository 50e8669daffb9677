"""Keys of downloads in a recipe that is loaded for a build: their faults, and files that have not come yet."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest

from opacity.recipe.load import load_recipe

Faults = Callable[..., list[str]]

FILES = 'files = ["lines/CO-*.par"]'
SHA256 = "0" * 64
QUERY = "hitran = { molecule = 5, isotopologues = [1], range = [1900.0, 2300.0] }"


def test_the_keys_change_nothing_where_the_files_are_there(folder: Path, full: str) -> None:
    (folder / "co.toml").write_text(full)
    before = load_recipe(folder / "co.toml").line_lists
    urls = 'urls = ["https://a.example/CO-a.par", "https://a.example/CO-b.par"]'
    keys = f'{FILES}\n{urls}\nsha256 = {{ "CO-a.par" = "{SHA256}" }}'
    (folder / "co.toml").write_text(full.replace(FILES, keys))
    source, *others = load_recipe(folder / "co.toml").line_lists
    assert {path.name: sha256 for path, sha256 in source.sha256.items()} == {"CO-a.par": SHA256}
    assert (replace(source, sha256={}), *others) == before


@pytest.mark.parametrize(
    "files, keys, expected",
    [
        (FILES, 'url = ["https://a.example/CO-a.par"]', "10: line_list[0].url: unknown key"),
        (
            FILES,
            f'url = ["https://a.example/CO-a.par"]\nsha256 = {{ "CO-a.par" = "{SHA256}" }}',
            "10: line_list[0].url: unknown key",
        ),
        (FILES, 'urls = ["ftp://a.example/CO-a.par"]', "10: line_list[0].urls[0]: not an http or https URL"),
        (
            FILES,
            f'urls = ["ftp://a.example/CO-a.par"]\nsha256 = {{ "CO-a.par" = "{SHA256}" }}',
            "10: line_list[0].urls[0]: not an http or https URL",
        ),
        (FILES, f'sha256 = {{ "CO-a.par" = "{SHA256}" }}', '10: line_list[0].sha256."CO-a.par": no file of this name'),
        (
            FILES,
            'urls = ["https://a.example/CO-a.par", "http://b.example/CO-a.par"]',
            "10: line_list[0].urls: a file that is downloaded twice",
        ),
        ('files = ["l*/CO-a.par"]', 'urls = ["https://a.example/x.par"]', "9: line_list[0].files[0]: no folder to"),
        ('files = ["none/*.par"]', QUERY, "9: line_list[0].files: no place for the lines of hitran"),
        ('files = [""]', QUERY, "9: line_list[0].files[0]: empty text"),
        (FILES, f'urls = ["https://a.example/x"]\n{QUERY}', "11: line_list[0].hitran: a second origin"),
    ],
)
def test_one_fault_gives_one_line(faults: Faults, files: str, keys: str, expected: str) -> None:
    (line,) = faults((FILES, f"{files}\n{keys}"))
    assert line.startswith(f"co.toml:{expected}")


def test_hitran_for_a_format_misspelt(faults: Faults) -> None:
    (line,) = faults(('format = "hitran"\n' + FILES, f'format = "hitrn"\nfiles = ["lines/CO-a.par"]\n{QUERY}'))
    assert line.startswith("co.toml:8: line_list[0].format: unknown value")


@pytest.mark.parametrize(
    "files, keys",
    [
        ("lines/none.par", 'urls = ["https://a.example/none.par"]'),
        ("lines/none*", 'urls = ["https://a.example/x.par", "https://a.example/none-1.par"]'),
        ("lines/none.par", QUERY),
    ],
)
def test_what_fetch_brings(faults: Faults, files: str, keys: str) -> None:
    assert faults((FILES, f'files = ["{files}"]\n{keys}')) == [
        f'co.toml:9: line_list[0].files[0]: no such file; expected a file in FOLDER, found "{files}"; '
        "`opacity fetch RECIPE` brings it"
    ]


def test_what_fetch_does_not_bring(faults: Faults) -> None:
    assert faults((FILES, 'files = ["lines/CO-c.par"]\nurls = ["https://a.example/CO-d.par"]')) == [
        'co.toml:9: line_list[0].files[0]: no such file; expected a file in FOLDER, found "lines/CO-c.par"; '
        'did you mean "CO-b.par"?'
    ]


def test_a_list_of_which_only_a_part_came_is_refused(faults: Faults) -> None:
    urls = ", ".join(f'"https://a.example/CO-{letter}.par"' for letter in "abcdefg")
    assert faults((FILES, f"{FILES}\nurls = [{urls}]")) == [
        "co.toml:10: line_list[0].urls: 5 of 7 files are not there yet; expected CO-c.par, CO-d.par, CO-e.par and 2 "
        "more; `opacity fetch RECIPE` brings them"
    ]


def test_a_part_of_a_data_set_is_not_said_to_lack_what_comes(faults: Faults, folder: Path) -> None:
    (folder / "lines" / "x.states").touch()
    old = 'format = "hitran"\n' + FILES
    new = 'format = "exomol"\nisotopologue = "1"\nfiles = ["lines/x*"]\nurls = ["https://a.example/x.trans"]'
    (line,) = faults((old, new))
    assert line == (
        "co.toml:11: line_list[0].urls: 1 of 1 files are not there yet; expected x.trans; "
        "`opacity fetch RECIPE` brings it"
    )


def test_one_file_from_two_lists_origins(faults: Faults) -> None:
    (line,) = faults(
        (FILES, f'{FILES}\nurls = ["https://a.example/spare.par"]'),
        ('isotopologue = "(12C)(16O)"', 'urls = ["https://b.example/spare.par"]'),
    )
    assert line.startswith("co.toml:19: line_list[1].urls: a file that is downloaded twice")
