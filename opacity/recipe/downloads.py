"""Where a recipe says that the files of its line lists come from; the files need not be there yet.

Keys of a `[[line_list]]`, all optional:

    urls = ["https://host/x.trans.bz2"]        # each saved under its last path part, in the folder of files[0]
    sha256 = { "x.trans.bz2" = "hexadecimal" }
    hitran = { molecule = 5, isotopologues = [1, 2], range = [1900.0, 2300.0], parameters = ["gamma_h2"] }
"""

from __future__ import annotations

import fnmatch
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from urllib.parse import unquote, urlsplit

from opacity.errors import RecipeError
from opacity.recipe.document import parse, read_text
from opacity.recipe.faults import Faults, nearest, shown
from opacity.recipe.formats import FORMATS
from opacity.recipe.positions import KeyPath
from opacity.recipe.table import Bounds, Table, checked_text

DOWNLOAD_KEYS = ("urls", "sha256", "hitran")
BESIDE = (".part", ".part.json", ".sha256")
"""Endings of what a download leaves beside a file: no file of a line list has them, and no pattern means them."""

_HITRAN_KEYS = ("molecule", "isotopologues", "range", "parameters")
_WAVENUMBER = Bounds(0.0, 1e6, "cm-1")
_URL = "an http or https URL that ends in a file name"
_SHA256 = re.compile(r"[0-9a-fA-F]{64}")
_PARAMETER = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,60}")
_PATTERN = frozenset("*?[")


@dataclass(frozen=True)
class UrlDownload:
    """One file of a URL; `sha256` in lower-case hexadecimal, None where the recipe gives none."""

    url: str
    path: Path
    sha256: str | None = None


@dataclass(frozen=True)
class HitranDownload:
    """A query of HITRAN: molecule and local isotopologue numbers, range (cm-1), columns beyond the 160 characters.

    `path` is the file of lines; `header` the one that describes it, None for plain 160-character records.
    """

    molecule: int
    isotopologues: tuple[int, ...]
    range: tuple[float, float]
    parameters: tuple[str, ...]
    path: Path
    header: Path | None
    sha256: str | None = None


Download = UrlDownload | HitranDownload


@dataclass(frozen=True)
class ListDownloads:
    """What is to be had for one `[[line_list]]`; `files` as written in the recipe, looked for from `folder`."""

    files: tuple[str, ...]
    folder: Path
    downloads: tuple[Download, ...]


def load_downloads(path: str | Path) -> tuple[ListDownloads, ...]:
    """The downloads of a recipe, one entry for each line list.  Only the keys that they need are looked at.

    Raises RecipeError with one line for each fault, as `load_recipe` does.
    """
    path = Path(path)
    document, lines = parse(path, read_text(path))
    faults = Faults(str(path), lines)
    tables = document.get("line_list")
    if not isinstance(tables, list) or not all(isinstance(one, dict) for one in tables):
        faults.add(("line_list",), "missing or not an array of tables", expected="one or more [[line_list]] tables")
        tables = []
    made = []
    for index, values in enumerate(tables):
        table = Table(faults, ("line_list", index), values, _watched(values))
        if "hitran" in table and "urls" not in table:
            table.choice("format", FORMATS)
        made.append(ListDownloads(_files(table), path.parent, read_downloads(table, path.parent)))
    refuse_twice(faults, [one.downloads for one in made])
    problems = faults.problems()
    if problems:
        raise RecipeError(problems)
    return tuple(made)


def _watched(values: Mapping[str, Any]) -> tuple[str, ...]:
    """The keys that pass here: any but slips of the pen for a key of a download."""
    absent = [key for key in DOWNLOAD_KEYS if key not in values]
    return (*(name for name in values if name in DOWNLOAD_KEYS or nearest(name, absent) is None), *absent)


def read_downloads(table: Table, folder: Path) -> tuple[Download, ...]:
    """The downloads of one `[[line_list]]` table; what does not fit becomes a fault of the table's."""
    before = len(table.faults)
    hashes = _hashes(table)
    if "urls" in table and "hitran" in table:
        table.faults.add(table.path("hitran"), "a second origin of the same files", expected="either urls or hitran")
        return ()
    downloads: tuple[Download, ...] = ()
    if "urls" in table:
        downloads = _url_downloads(table, folder, hashes)
    elif "hitran" in table:
        downloads = _hitran_download(table, folder, hashes)
    # A file that only a fault keeps from being downloaded is no second fault.
    if len(table.faults) == before and not (table.misspelt("urls") or table.misspelt("hitran")):
        _refuse_idle_hashes(table, hashes, {download.path.name for download in downloads})
    return downloads


def means(folder: Path, name: str, download: Download) -> bool:
    """Whether an entry of `files`, a name or a pattern looked for from `folder`, means a file that is downloaded."""
    path = folder / name
    if path.parent != download.path.parent:
        return False
    try:
        return path.name == download.path.name or fnmatch.fnmatchcase(download.path.name, path.name)
    except re.error:  # a pattern with a range that is none
        return False


def _files(table: Table) -> tuple[str, ...]:
    value = table.values.get("files")
    expected = "a list of file names or patterns"
    if not isinstance(value, list) or not value:
        table.faults.add(table.path("files"), "missing or no list of files", expected=expected)
        return ()
    return tuple(
        checked_text(table.faults, table.path("files", i), name, "a file name") for i, name in enumerate(value)
    )


def _first_file(table: Table) -> str | None:
    """The first entry of `files` if it is text; its lack is another reader's fault to report."""
    value = table.values.get("files")
    return value[0] if isinstance(value, list) and value and isinstance(value[0], str) else None


def _hashes(table: Table) -> dict[str, str]:
    values = table.table("sha256", 'a table such as { "x.trans.bz2" = "hexadecimal" }', required=False) or {}
    hashes = {}
    for name, value in values.items():
        expected = "64 hexadecimal digits"
        hashes[name] = checked_text(table.faults, table.path("sha256", name), value, expected, _SHA256).lower()
    return hashes


def _refuse_idle_hashes(table: Table, hashes: dict[str, str], names: set[str]) -> None:
    """A checksum under a name that is not downloaded checks nothing: most likely a slip of the pen."""
    for name in hashes:
        if name not in names:
            meant = nearest(name, names)
            remedy = f"did you mean {shown(meant)}?" if meant else None
            table.faults.add(
                table.path("sha256", name), "no file of this name is downloaded", found=shown(name), remedy=remedy
            )


def _url_downloads(table: Table, folder: Path, hashes: dict[str, str]) -> tuple[UrlDownload, ...]:
    value = table.values["urls"]
    if not isinstance(value, list) or not value:
        table.faults.add(table.path("urls"), "no list of URLs", expected="a list of URLs", found=shown(value))
        return ()
    place = Path(_first_file(table) or ".").parent
    if _PATTERN & set(str(place)):
        table.faults.add(
            table.path("files", 0),
            "no folder to save to",
            expected="a folder without *, ? or [, because urls are saved there",
            found=shown(str(place)),
        )
    made = []
    for index, one in enumerate(value):
        key = table.path("urls", index)
        url = checked_text(table.faults, key, one, _URL)
        name = _name_of(table.faults, key, url) if url else ""
        if name:
            made.append(UrlDownload(url, folder / place / name, hashes.get(name)))
    return tuple(made)


def _name_of(faults: Faults, key: KeyPath, url: str) -> str:
    """The file name that a URL stands for; empty after a fault."""
    wrong = url_fault(url)
    if wrong is None:
        name = unquote(urlsplit(url).path.rpartition("/")[2], errors="replace")
        wrong = _name_fault(name)
        if wrong is None:
            return name
    faults.add(key, wrong, expected=_URL, found=shown(url))
    return ""


def url_fault(url: str) -> str | None:
    """What keeps a URL from being fetched, None if nothing does."""
    if not url.isascii() or not url.isprintable() or " " in url:
        return "a URL with characters that have to be percent-encoded"
    try:
        parts = urlsplit(url)
        host, port = parts.hostname, parts.port
    except ValueError as error:
        return f"not a URL ({error})"
    if parts.scheme.lower() not in ("http", "https"):
        return "not an http or https URL"
    if not host or port == 0:
        return "a URL without a host"
    if parts.username is not None or parts.password is not None:
        return "a URL with a user name or a password, which a recipe must not hold"
    return None


def _name_fault(name: str) -> str | None:
    if not name:
        return "a URL without a file name at its end"
    if name.startswith((".", "-", "~")) or any(c in '/\\:*?[]"<>|' or not c.isprintable() or c == "�" for c in name):
        return "a URL whose last part is no plain file name"
    if name.endswith(BESIDE):
        return f"one of the endings that downloads keep for themselves ({', '.join(BESIDE)})"
    return None


def _hitran_download(table: Table, folder: Path, hashes: dict[str, str]) -> tuple[HitranDownload, ...]:
    values = table.table("hitran", "a table such as { molecule = 5, isotopologues = [1], range = [1900.0, 2300.0] }")
    if values is None:
        return ()
    asked = Table(table.faults, table.path("hitran"), values, _HITRAN_KEYS)
    form = table.values.get("format")
    if form in FORMATS and form not in ("hitran", "hapi"):
        asked.faults.add(
            asked.key, "no origin for a list of this format", expected='format "hitran" or "hapi"', found=shown(form)
        )
    path = _single_file(table, folder, ".data" if form == "hapi" else "")
    molecule = asked.count("molecule", 1, 999)
    isotopologues = _isotopologues(asked)
    interval = asked.interval("range", _WAVENUMBER, required=True)
    parameters = _parameters(asked, form)
    if path is None or interval is None or not molecule or not isotopologues:
        return ()
    header = path.with_suffix(".header") if form == "hapi" else None
    return (HitranDownload(molecule, isotopologues, interval, parameters, path, header, hashes.get(path.name)),)


def _single_file(table: Table, folder: Path, ending: str) -> Path | None:
    files = table.values.get("files")
    name = _first_file(table)
    wanted = f"one file name{f' that ends in {ending}' if ending else ''}, where the lines are saved"
    if name is None or not name.strip() or not isinstance(files, list):
        return None
    compressed = name.endswith((".gz", ".bz2"))
    if len(files) != 1 or _PATTERN & set(name) or not name.endswith(ending) or compressed or name.endswith(BESIDE):
        table.faults.add(table.path("files"), "no place for the lines of hitran", expected=wanted, found=shown(name))
        return None
    return folder / name


def _isotopologues(asked: Table) -> tuple[int, ...]:
    expected = "a list of different local numbers such as [1, 2]"
    if "isotopologues" not in asked:
        asked.missing("isotopologues", expected)
        return ()
    value = asked.values["isotopologues"]
    fits = isinstance(value, list) and all(type(one) is int and 1 <= one <= 99 for one in value)
    if not fits or not value or len(set(value)) != len(value):
        asked.faults.add(asked.path("isotopologues"), "impossible value", expected=expected, found=shown(value))
        return ()
    return tuple(value)


def _parameters(asked: Table, form: object) -> tuple[str, ...]:
    value = asked.values.get("parameters", [])
    key = asked.path("parameters")
    if not isinstance(value, list):
        asked.faults.add(key, "not a list", expected='a list of names such as ["gamma_h2"]', found=shown(value))
        return ()
    if value and form == "hitran":
        asked.faults.add(key, "columns beyond the 160 characters", expected='format = "hapi" for them')
    names = [
        checked_text(asked.faults, asked.path("parameters", i), name, "a parameter such as gamma_h2", _PARAMETER)
        for i, name in enumerate(value)
    ]
    return tuple(dict.fromkeys(names))


def refuse_twice(faults: Faults, lists: Sequence[Sequence[Download]]) -> None:
    """Add a fault where two origins, of one line list or of several, bring one file: the second would overwrite it."""
    seen: set[Path] = set()
    for index, downloads in enumerate(lists):
        for download in downloads:
            real = Path(str(download.path.resolve()).casefold())
            if real in seen:
                key: KeyPath = ("line_list", index, "urls" if isinstance(download, UrlDownload) else "hitran")
                faults.add(
                    key, "a file that is downloaded twice", expected="each file once", found=shown(download.path.name)
                )
            seen.add(real)
