"""What has to be fetched for a recipe: what is there, what is missing, how much it is and whether it fits."""

from __future__ import annotations

import glob
import os
import re
import sys
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

from opacity.errors import LineListError, ResourceError, problem
from opacity.pipeline.fetch.checksum import promise_of, recorded_sha256
from opacity.pipeline.fetch.hitran import check_request, request_words
from opacity.pipeline.fetch.http import TransferError, size_of
from opacity.pipeline.fetch.partial import part_length
from opacity.pipeline.fetch.progress import in_bytes
from opacity.pipeline.resources import free_disk
from opacity.provenance import file_sha256
from opacity.recipe.downloads import BESIDE, Download, HitranDownload, ListDownloads, UrlDownload, load_downloads, means
from opacity.recipe.line_lists import full_name

PRESENT, TO_FETCH, WRONG = "present", "to fetch", "wrong"
_AT_ONCE = 8
_LONG_CHECK = 1 << 30


@dataclass(frozen=True)
class Item:
    """One download and its state; `size` (bytes) of the file that is there or on the server, `here` the part of it.

    `detail` says what was verified, or what is wrong, or what the server answered.
    """

    download: Download
    state: str
    detail: str = ""
    size: int | None = None
    here: int = 0

    @property
    def origin(self) -> str:
        """Where it comes from."""
        return self.download.url if isinstance(self.download, UrlDownload) else request_words(self.download)

    def as_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return {
            "file": str(self.download.path),
            "origin": self.origin,
            "state": self.state,
            "detail": self.detail,
            "size": self.size,
            "here": self.here,
        }


@dataclass(frozen=True)
class FetchPlan:
    """All downloads of a recipe; `missing` are files that it names, that are not there and that nothing brings."""

    recipe: Path
    items: tuple[Item, ...]
    missing: tuple[str, ...]
    notes: tuple[str, ...]
    disk_free: int | None

    @property
    def to_fetch(self) -> tuple[Item, ...]:
        """What is not there yet."""
        return tuple(item for item in self.items if item.state == TO_FETCH)

    @property
    def total(self) -> int:
        """Bytes still to come, as far as servers state them."""
        return sum(item.size - item.here for item in self.to_fetch if item.size is not None)

    @property
    def of_unknown_size(self) -> int:
        """Files to fetch whose size is not known."""
        return sum(item.size is None for item in self.to_fetch)

    def refuse_wrong(self) -> None:
        """Raise LineListError, one line a file, where a file that is there is not the one meant."""
        remedy = "move it away and fetch again"
        wrong = [item for item in self.items if item.state == WRONG]
        if wrong:
            lines = [problem(full_name(item.download.path), item.detail, remedy=remedy) for item in wrong]
            raise LineListError("\n".join(lines))

    def refuse_too_large(self) -> None:
        """Raise ResourceError where the disk has no room for what is to come."""
        if self.disk_free is not None and self.total > self.disk_free:
            folder = full_name(self.to_fetch[0].download.path.parent)
            found = f"{in_bytes(self.disk_free)} free"
            raise ResourceError(
                problem(folder, "not enough disk", expected=in_bytes(self.total), found=found, remedy="make room")
            )

    def as_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return {
            "recipe": str(self.recipe),
            "files": [item.as_dict() for item in self.items],
            "missing": list(self.missing),
            "notes": list(self.notes),
            "bytes_to_fetch": self.total,
            "files_of_unknown_size": self.of_unknown_size,
            "disk_free": self.disk_free,
        }


def plan_fetch(recipe: str | Path, quiet: bool = False) -> FetchPlan:
    """Look at the files of a recipe and ask servers for the sizes of those that are not there; fetches nothing.

    Raises RecipeError for a recipe whose downloads can't be right, LineListError for lines that
    HITRAN can't have.  A server that does not answer is no error yet.
    """
    lists = load_downloads(recipe)
    say: Callable[[str], None] = (lambda text: None) if quiet else lambda text: print(text, file=sys.stderr, flush=True)
    items = [_look(download, say) for one in lists for download in one.downloads]
    items = _with_sizes(items)
    folders = [item.download.path.parent for item in items if item.state == TO_FETCH]
    free = [free_disk(folder) for folder in folders or [Path(recipe).parent]]
    known = [one for one in free if one is not None]
    return FetchPlan(
        recipe=Path(recipe),
        items=tuple(items),
        missing=tuple(_missing(lists)),
        notes=tuple(_notes(lists)),
        disk_free=min(known) if known else None,
    )


def _look(download: Download, say: Callable[[str], None]) -> Item:
    path = download.path
    header = download.header if isinstance(download, HitranDownload) else None
    there = os.path.lexists(path)
    if not there:
        if isinstance(download, HitranDownload):
            check_request(download)
            return Item(download, TO_FETCH)
        return Item(download, TO_FETCH, here=part_length(path, download.url))
    if not path.is_file():
        return Item(download, WRONG, "there, but not a file")
    if header is not None and not header.is_file():
        return Item(download, WRONG, f"there, but without {header.name} beside it")
    return _verify(download, say)


def _verify(download: Download, say: Callable[[str], None]) -> Item:
    """A file that is there against the recipe's checksum, else against the one recorded when it was fetched."""
    path, size = download.path, download.path.stat().st_size
    recorded, request = recorded_sha256(path)
    if isinstance(download, HitranDownload) and recorded is not None and request != request_words(download):
        return Item(download, WRONG, f"fetched for another request ({request})", size)
    promise = promise_of(path, download.sha256)
    if promise is None:
        return Item(download, PRESENT, "no checksum to hold it against", size)
    if size >= _LONG_CHECK:
        say(f"{path.name}: checking {in_bytes(size)}")
    found = file_sha256(path)
    if found != promise.sha256:
        return Item(download, WRONG, promise.broken(found), size)
    return Item(download, PRESENT, f"sha256 as {'in the recipe' if promise.in_recipe else 'recorded'}", size)


def _with_sizes(items: Sequence[Item]) -> list[Item]:
    """Sizes of what is to be fetched, as the servers state them; a host that does not answer is not asked again."""
    silent: dict[str, str] = {}

    def ask(item: Item) -> Item:
        if item.state != TO_FETCH or not isinstance(item.download, UrlDownload):
            return item
        host = urlsplit(item.download.url).netloc
        if host in silent:
            return replace(item, detail=silent[host])
        try:
            size = size_of(item.download.url)
        except TransferError as failure:
            if failure.silent or not failure.reached:
                silent[host] = failure.what
            return replace(item, detail=failure.what)
        return replace(item, size=size, here=item.here if size is None or item.here <= size else 0)

    with ThreadPoolExecutor(_AT_ONCE) as pool:
        return list(pool.map(ask, items))


def _missing(lists: Sequence[ListDownloads]) -> list[str]:
    """Entries of `files` that are not there and that no download brings."""
    return [
        name
        for one in lists
        for name in one.files
        if not any(means(one.folder, name, download) for download in one.downloads) and not _there(one.folder, name)
    ]


def _there(folder: Path, name: str) -> bool:
    try:
        found = glob.glob(os.path.join(glob.escape(str(folder)), name))
    except re.error:  # a pattern with a range that is none
        found = []
    return (folder / name).is_file() or any(os.path.isfile(path) and not path.endswith(BESIDE) for path in found)


def _notes(lists: Sequence[ListDownloads]) -> list[str]:
    return [
        f"{download.path.name} is fetched, but no entry of `files` names it"
        for one in lists
        for download in one.downloads
        if not any(means(one.folder, name, download) for name in one.files)
    ]
