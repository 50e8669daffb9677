"""The `[[line_list]]` tables of a recipe and the files that they name."""

from __future__ import annotations

import glob
import os
import re
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from opacity.errors import printable
from opacity.recipe.downloads import BESIDE, DOWNLOAD_KEYS, Download, means, read_downloads, refuse_twice
from opacity.recipe.faults import Faults, listed, nearest, shown
from opacity.recipe.formats import EXOMOL_ENDINGS, FORMATS, NAMELESS, exomol_kind, plain_name
from opacity.recipe.model import LineListSource
from opacity.recipe.positions import KeyPath
from opacity.recipe.table import Bounds, Table, checked_text

BAD_RECORDS = ("stop", "leave-out")
KEYS = ("format", "files", "range", "isotopologue", "reference", "bad_records", *DOWNLOAD_KEYS)

WAVENUMBER = Bounds(0.0, 1e6, "cm-1")
ISOTOPOLOGUE = re.compile(r"[A-Za-z0-9()+_-]+")
FETCH = "`opacity fetch RECIPE` brings {}"
_MOST_NAMED = 3
_FILES = 'a list of file names or patterns such as ["lines/*.par"]'

Seen = dict[str, tuple[KeyPath, str]]
"""By a file's real name without the ending of compression: where it was named, and its real name."""


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
    seen: Seen = {}
    read = [_read_one(faults, (*key, i), value, folder, seen) for i, value in enumerate(values)]
    refuse_twice(faults, [downloads for _, downloads in read])
    return tuple(source for source, _ in read)


def _read_one(
    faults: Faults, key: KeyPath, values: dict[str, Any], folder: Path, seen: Seen
) -> tuple[LineListSource, tuple[Download, ...]]:
    table = Table(faults, key, values, KEYS)
    form = table.choice("format", FORMATS)
    entries = _file_names(table)
    before = len(faults)
    downloads = read_downloads(table, folder)
    # With a fault in where the files come from, their lack would be the same fault again.
    paths = _find_all(table, form, entries, folder, downloads, seen) if len(faults) == before else []
    source = LineListSource(
        format=form,
        files=tuple(name for _, name in entries),
        paths=tuple(paths),
        range=table.interval("range", WAVENUMBER, required=False),
        isotopologue=table.text(
            "isotopologue", "an isotopologue such as (12C)(16O)", pattern=ISOTOPOLOGUE, required=form in NAMELESS
        ),
        reference=table.required_text("reference", "the publication of the list"),
        bad_records=table.choice("bad_records", BAD_RECORDS, default="stop"),
        sha256=_stated_hashes(paths, downloads),
    )
    return source, downloads


def _stated_hashes(paths: Sequence[Path], downloads: Sequence[Download]) -> dict[Path, str]:
    """What the recipe says of the sha256 of the files found."""
    stated = {os.path.realpath(one.path): one.sha256 for one in downloads if one.sha256 is not None}
    return {path: stated[real] for path in paths if (real := os.path.realpath(path)) in stated}


def _find_all(
    table: Table,
    form: str,
    entries: Sequence[tuple[int, str]],
    folder: Path,
    downloads: Sequence[Download],
    seen: Seen,
) -> list[Path]:
    """The files of a list, each once, and the faults of their names and of their lack."""
    faults, before, paths, found = table.faults, len(table.faults), [], []
    for index, name in entries:
        key = table.path("files", index)
        comes = any(means(folder, name, download) for download in downloads)
        matches = _find(faults, key, folder, name, comes)
        new = [path for path in matches if _is_new(faults, key, path, seen)]
        if form == "hapi":
            for path in new:
                _check_hapi(faults, key, path)
        elif form == "exomol":
            _check_endings(faults, key, new)
        found += [name] if matches else []
        paths += new
    _check_all_fetched(table, found, folder, downloads)
    if form == "exomol" and entries and len(entries) == len(table.values["files"]) and len(faults) == before:
        _check_data_set(table, paths)
    return paths


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


def _find(faults: Faults, key: KeyPath, folder: Path, pattern: str, comes: bool) -> list[Path]:
    """The files that a name or pattern stands for, sorted; `comes` says that a download brings such a file."""
    literal = folder / pattern
    try:
        if os.path.isfile(literal):
            if not pattern.endswith(BESIDE):
                return [literal]
            what = "what a download leaves beside a file, not a line list"
            faults.add(key, what, expected=f"no file that ends in {listed(BESIDE)}", found=shown(pattern))
            return []
        matches = sorted(Path(match) for match in glob.glob(os.path.join(glob.escape(str(folder)), pattern)))
        found = [path for path in matches if os.path.isfile(path) and not path.name.endswith(BESIDE)]
    except (OSError, ValueError, re.error) as error:
        faults.add(key, "cannot be looked for", found=shown(pattern), remedy=shown(str(error)))
        return []
    broken = [path for path in matches if os.path.islink(path) and not os.path.exists(path)]
    if broken:  # passed over, it would be a list that lacks a part
        faults.add(key, "a link to no file", expected="files", found=full_name(broken[0]), remedy="mend or remove it")
    elif not found:
        is_folder = any(os.path.isdir(path) for path in matches)
        remedy = None if any(character in pattern for character in "*?[") else _near(literal)
        faults.add(
            key,
            "a folder, not a file" if is_folder else "no such file",
            expected=f"a file in {full_name(folder)}",
            found=shown(pattern),
            remedy=FETCH.format("it") if comes and not is_folder else remedy,
        )
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


def _is_new(faults: Faults, key: KeyPath, path: Path, seen: Seen) -> bool:
    """Whether a file is named for the first time: read twice, also plain and compressed, its lines count twice."""
    real = os.path.realpath(path)
    plain = plain_name(real)
    if plain not in seen:
        seen[plain] = (key, real)
        return True
    first, other = seen[plain]
    beside = "" if other == real else f" as {printable(os.path.basename(other))}"
    what = f"file already named in line_list[{first[1]}]{beside}"
    faults.add(key, what, expected="each file once", found=printable(str(path)))
    return False


def _check_hapi(faults: Faults, key: KeyPath, path: Path) -> None:
    """A list in hapi's format is a .data file with a .header of the same name beside it."""
    if path.suffix != ".data":
        faults.add(key, "not a data file of this format", expected="a file that ends in .data", found=shown(path.name))
        return
    header = path.with_suffix(".header")
    if not os.path.isfile(header):
        faults.add(key, "no header beside the data file", expected=full_name(header))


def _check_endings(faults: Faults, key: KeyPath, paths: Sequence[Path]) -> None:
    """The files of a list in ExoMol format are told apart by their endings."""
    other = [path.name for path in paths if exomol_kind(path.name) is None]
    if other:
        expected = f"files that end in {listed(EXOMOL_ENDINGS)}, plain, .gz or .bz2"
        faults.add(key, "not a file of a list in ExoMol format", expected=expected, found=_first_of(other))


def _check_data_set(table: Table, paths: Sequence[Path]) -> None:
    """A list in ExoMol format has states, transitions, and no second file of what there is one of."""
    kinds: dict[str, list[str]] = {"def": [], "states": [], "trans": [], "pf": [], "broad": []}
    for path in paths:
        kinds[exomol_kind(path.name) or ""].append(path.name)
    lacking = [f".{kind}" for kind in ("states", "trans") if not kinds[kind]]
    if lacking:
        expected = "one .states file and one or more .trans files, plain, .gz or .bz2"
        table.faults.add(table.path("files"), f"no {listed(lacking)} file", expected=expected)
    for kind in ("def", "states", "pf"):
        if len(kinds[kind]) > 1:
            found = _first_of(kinds[kind])
            table.faults.add(table.path("files"), f"several .{kind} files", expected="one data set", found=found)


def _check_all_fetched(table: Table, found: Sequence[str], folder: Path, downloads: Sequence[Download]) -> None:
    """A pattern is content with the files that are there: a list of which only a part came would be used as whole."""
    meant = [download for download in downloads if any(means(folder, name, download) for name in found)]
    absent = [download.path.name for download in meant if not os.path.isfile(download.path)]
    if absent:
        what = f"{len(absent)} of {len(meant)} files are not there yet"
        remedy = FETCH.format("it" if len(absent) == 1 else "them")
        table.faults.add(table.path("urls"), what, expected=_first_of(absent), remedy=remedy)


def _first_of(names: Sequence[str]) -> str:
    more = f" and {len(names) - _MOST_NAMED} more" if len(names) > _MOST_NAMED else ""
    return printable(", ".join(names[:_MOST_NAMED])) + more
