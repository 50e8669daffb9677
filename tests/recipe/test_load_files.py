from __future__ import annotations

import os
import re
from pathlib import Path

import pytest

from opacity.errors import RecipeError
from opacity.recipe import document
from opacity.recipe.load import load_recipe


def problem_of(path: str | Path) -> str:
    with pytest.raises(RecipeError) as caught:
        load_recipe(path)
    (line,) = caught.value.problems
    assert len(line.splitlines()) == 1
    assert caught.value.exit_code == 2
    return line


def problem_of_bytes(folder: Path, data: bytes) -> str:
    path = folder / "co.toml"
    path.write_bytes(data)
    return problem_of(path).replace(f"{folder}/", "")


def test_missing_file(tmp_path: Path) -> None:
    assert problem_of(tmp_path / "no.toml") == (
        f"{tmp_path}/no.toml: no such file; expected a recipe; `opacity new FORMULA` writes a recipe to fill in"
    )


def test_folder(tmp_path: Path) -> None:
    assert problem_of(tmp_path) == f"{tmp_path}: not a file; expected a recipe, found a folder"


def test_device() -> None:
    assert problem_of("/dev/zero") == "/dev/zero: not a file; expected a recipe, found something else"


def test_unreadable_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "co.toml"
    path.write_text("x = 1\n")

    def refuse(*args: object, **kwargs: object) -> None:
        raise PermissionError(13, "Permission denied")

    # Permissions do not hold root back, so the refusal is played.
    monkeypatch.setattr(Path, "open", refuse)
    assert problem_of(path) == f"{path}: cannot be read (Permission denied); expected a recipe"


@pytest.mark.parametrize("name", ["a\0b.toml", "x" * 5000, "a\nb.toml", ""])
def test_impossible_names(name: str) -> None:
    assert re.search(r"no such file|cannot be read|not a file", problem_of(name))


@pytest.mark.parametrize("data", [b"", b"\n \r\n", b"\t"])
def test_empty_file(tmp_path: Path, data: bytes) -> None:
    assert problem_of_bytes(tmp_path, data).startswith("co.toml: empty file; expected a recipe")


def test_not_utf8(tmp_path: Path) -> None:
    assert problem_of_bytes(tmp_path, b"a = 1\nb = '\xe9'\n") == (
        "co.toml:2: not UTF-8 text; expected UTF-8, found byte 0xe9; save it as UTF-8"
    )
    assert problem_of_bytes(tmp_path, "a = 1\n".encode("utf-16")).startswith("co.toml:1: not UTF-8 text")


def test_nul_byte(tmp_path: Path) -> None:
    assert problem_of_bytes(tmp_path, b"a = 1\n\nb = '\0'\n").startswith("co.toml:3: a NUL byte")


def test_too_long(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(document, "MAX_BYTES", 10)
    assert problem_of_bytes(tmp_path, b"a = 1 # xxx") == "co.toml: too long for a recipe; expected at most 10 bytes"


@pytest.mark.parametrize(
    "text, expected",
    [
        ("a = 1\nb = hitran\n", "co.toml:2: not valid TOML: Invalid value (column 5)"),
        ("a = 1\r\n\r\nb = hitran\r\n", "co.toml:3: not valid TOML: Invalid value (column 5)"),
        ("a = [1,\n2\n\n", "co.toml:2: not valid TOML: Unclosed array; found the end of the file"),
        ("[a]\n\n[a]\n", "co.toml:3: not valid TOML: Cannot declare ('a',) twice (column 3)"),
        ("a = 1\na = 2\n", "co.toml:2: not valid TOML: Cannot overwrite a value (column 6)"),
        ("a = " + "[" * 5000 + "]" * 5000, "co.toml: not valid TOML; found values nested too deeply"),
    ],
)
def test_toml_errors(tmp_path: Path, text: str, expected: str) -> None:
    assert problem_of_bytes(tmp_path, text.encode()) == expected


def test_too_many_digits(tmp_path: Path) -> None:
    assert problem_of_bytes(tmp_path, b"a = " + b"9" * 5000).startswith("co.toml: not valid TOML: Exceeds the limit")


def test_names_are_shown_as_given(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (folder / "co.toml").write_text("a =\n")
    monkeypatch.chdir(folder)
    assert problem_of("./co.toml").startswith("co.toml:1: not valid TOML")
    assert problem_of(os.path.join("lines", "..", "co.toml")).startswith("lines/../co.toml:1: not valid TOML")
