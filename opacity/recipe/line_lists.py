"""The `[[line_list]]` tables of a recipe and the files that they name."""

from __future__ import annotations

import glob
import os
import re
from pathlib import Path
from typing import Any

from opacity.recipe.faults import Faults, nearest, printable, shown
from opacity.recipe.model import LineListSource
from opacity.recipe.positions import KeyPath
from opacity.recipe.table import Bounds, Table, checked_text

FORMATS = ("hitran", "hapi")
LATER_FORMATS = ("exomol",)
BAD_RECORDS = ("stop", "leave-out")
KEYS = ("format", "files", "range", "isotopologue", "reference", "bad_records")

WAVENUMBER = Bounds(0.0, 1e6, "cm-1")
ISOTOPOLOGUE = re.compile(r"[A-Za-z0-9()+-]+")
_FILES = 'a list of file names or patterns such as ["lines/*.par"]'


def read_line_lists(root: Table, folder: Path) -> tuple[LineListSource, ...]:
    """All `[[line_list]]` of a recipe, their files looked for from the recipe's folder."""
    faults, key = root.faults, root.path("line_list")
    expected = "one or more [[line_list]] tables"
    if "line_list" not in root:
        root.missing("line_list", expected)
        return ()
    values = root.values["line_list"]
    if not isinstance(values, list) or not values or not all(isinstance(value, dict) for value in values):
        remedy = "write [[line_list]]" if isinstance(values, dict) else None
        faults.add(key, "not an array of tables", expected=expected, found=shown(values), remedy=remedy)
        return ()
    seen: dict[str, KeyPath] = {}
    return tuple(_read_one(faults, (*key, i), value, folder, seen) for i, value in enumerate(values))


def _read_one(
    faults: Faults, key: KeyPath, values: dict[str, Any], folder: Path, seen: dict[str, KeyPath]
) -> LineListSource:
    table = Table(faults, key, values, KEYS)
    form = table.choice("format", FORMATS, later=LATER_FORMATS)
    files = _file_names(table)
    paths: list[Path] = []
    for index, name in files:
        for path in _find(faults, table.path("files", index), folder, name):
            if _is_new(faults, table.path("files", index), path, seen):
                paths.append(path)
                if form == "hapi":
                    _check_hapi(faults, table.path("files", index), path)
    return LineListSource(
        format=form,
        files=tuple(name for _, name in files),
        paths=tuple(paths),
        range=table.interval("range", WAVENUMBER, required=False),
        isotopologue=table.text(
            "isotopologue", "an isotopologue such as (12C)(16O)", pattern=ISOTOPOLOGUE, required=False
        ),
        reference=table.required_text("reference", "the publication of the list"),
        bad_records=table.choice("bad_records", BAD_RECORDS, default="stop"),
    )


def _file_names(table: Table) -> list[tuple[int, str]]:
    """The well-formed entries of `files` with their index."""
    if "files" not in table:
        table.missing("files", _FILES)
        return []
    value = table.values["files"]
    if not isinstance(value, list) or not value:
        table.faults.add(table.path("files"), "no list of files", expected=_FILES, found=shown(value))
        return []
    names = [
        (index, checked_text(table.faults, table.path("files", index), name, "a file name or pattern"))
        for index, name in enumerate(value)
    ]
    return [(index, name) for index, name in names if name]


def _find(faults: Faults, key: KeyPath, folder: Path, pattern: str) -> list[Path]:
    """The files that a name or pattern stands for, sorted."""
    literal = folder / pattern
    try:
        if os.path.isfile(literal):
            return [literal]
        matches = sorted(Path(match) for match in glob.glob(os.path.join(glob.escape(str(folder)), pattern)))
        found = [path for path in matches if os.path.isfile(path)]
    except (OSError, ValueError, re.error) as error:
        faults.add(key, "cannot be looked for", found=shown(pattern), remedy=shown(str(error)))
        return []
    if not found:
        what = "a folder, not a file" if matches else "no such file"
        remedy = None if any(character in pattern for character in "*?[") else _near(literal)
        faults.add(key, what, expected=f"a file in {full_name(folder)}", found=shown(pattern), remedy=remedy)
    return found


def _near(literal: Path) -> str | None:
    """A hint to a file of almost the same name in the same folder."""
    try:
        beside = [entry.name for entry in literal.parent.iterdir()]
    except OSError:
        return None
    meant = nearest(literal.name, beside)
    return f"did you mean {shown(meant)}?" if meant and meant != literal.name else None


def full_name(path: Path) -> str:
    """A file's or folder's whole name, on one line."""
    return printable(os.path.abspath(path))


def _is_new(faults: Faults, key: KeyPath, path: Path, seen: dict[str, KeyPath]) -> bool:
    """Whether a file is named for the first time: read twice, its lines would count twice."""
    real = os.path.realpath(path)
    if real in seen:
        first = f"line_list[{seen[real][1]}]"
        faults.add(key, f"file already named in {first}", expected="each file once", found=printable(str(path)))
        return False
    seen[real] = key
    return True


def _check_hapi(faults: Faults, key: KeyPath, path: Path) -> None:
    """A list in hapi's format is a .data file with a .header of the same name beside it."""
    if path.suffix != ".data":
        faults.add(key, "not a data file of this format", expected="a file that ends in .data", found=shown(path.name))
        return
    header = path.with_suffix(".header")
    if not os.path.isfile(header):
        faults.add(key, "no header beside the data file", expected=full_name(header))
