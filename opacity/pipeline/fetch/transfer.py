"""One URL to one file: resumed where it stopped, tried again, and verified before it gets its final name."""

from __future__ import annotations

import re
import time
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from opacity.errors import LineListError, problem
from opacity.pipeline.fetch.checksum import record_sha256
from opacity.pipeline.fetch.contents import COMPRESSED, HEAD, wrong_content
from opacity.pipeline.fetch.http import LONGEST_WAIT, TransferError, opened, stated_length
from opacity.pipeline.fetch.partial import PartFile
from opacity.pipeline.fetch.progress import ByteProgress, in_bytes
from opacity.recipe.downloads import UrlDownload
from opacity.recipe.line_lists import full_name

_PIECE = 1 << 18
_WORTH_GOING_ON = 1 << 20
"""An attempt that brought so many bytes is no failed one: attempts are counted anew."""
_CONTENT_RANGE = re.compile(r"bytes (\d{1,18})-(\d{1,18})/(\d{1,18}|\*)")


@dataclass(frozen=True)
class Patience:
    """Attempts without getting on, the first wait between them (s, then doubled), and the longest silence (s)."""

    attempts: int = 5
    first_wait: float = 1.0
    silence: float = 60.0


def download(wanted: UrlDownload, patience: Patience, name: str, quiet: bool = False) -> str:
    """Fetch one file under its final name and return its sha256; `name` stands before progress.

    A partial file is kept as `.part` when the transfer fails and gone on with the next time; one
    whose content or checksum is wrong is removed.  Raises LineListError for what the server does,
    ResourceError for what the disk does.
    """
    try:
        with PartFile(wanted.path, wanted.url) as part, ByteProgress(name, quiet) as progress:
            if part.length:
                progress.say(f"goes on after {in_bytes(part.length)}")
            _receive(part, wanted, patience, progress)
            digest = _verified(part, wanted)
            part.finish()
    except TransferError as failure:
        raise LineListError(problem(wanted.url, failure.what, remedy=by_hand(wanted))) from failure
    if wanted.sha256 is None:
        record_sha256(wanted.path, digest)
    return digest


def by_hand(wanted: UrlDownload) -> str:
    """What to do where a download does not succeed."""
    return f"download it by hand and save it as {full_name(wanted.path)}"


def _verified(part: PartFile, wanted: UrlDownload) -> str:
    """The checksum of the whole file; one that is not the recipe's removes the file."""
    _check_content(part)
    digest = part.sha256()
    if wanted.sha256 is not None and digest != wanted.sha256:
        part.discard()
        raise TransferError(f"wrong checksum, so it was removed; expected sha256 {wanted.sha256}, found {digest}")
    return digest


def _check_content(part: PartFile) -> None:
    wrong = wrong_content(part.path.name, part.head())
    if wrong is not None:
        part.discard()
        raise TransferError(f"the server sends {wrong}")


def _receive(part: PartFile, wanted: UrlDownload, patience: Patience, progress: ByteProgress) -> None:
    tries, wait, reached = 0, patience.first_wait, False
    while not part.complete:
        before = part.length
        try:
            _attempt(part, wanted, patience.silence, progress)
            return
        except TransferError as failure:
            if part.length - before >= _WORTH_GOING_ON:
                tries, wait = 0, patience.first_wait
            tries += 1
            reached = reached or failure.reached
            if not failure.transient or not reached or tries >= patience.attempts:
                again = f" ({tries} attempts)" if tries > 1 else ""
                raise TransferError(failure.what + again) from failure
            pause = wait if failure.wait is None else max(wait, failure.wait)
            progress.say(f"{failure.what}; next attempt in {pause:g} s")
            time.sleep(pause)
            wait = min(2.0 * wait, LONGEST_WAIT)


def _attempt(part: PartFile, wanted: UrlDownload, silence: float, progress: ByteProgress) -> None:
    asked = _range_headers(part, trusted=wanted.sha256 is not None)
    try:
        with opened(wanted.url, silence, asked) as response:
            _check_encoding(wanted.path.name, response.headers)
            if response.status == 206:
                _go_on(part, response.headers, bool(asked))
            elif response.status == 200:
                if part.length:
                    progress.say("begins anew: the file has changed, or the server sends whole files only")
                part.restart(stated_length(response.headers), _validator(response.headers))
            else:
                raise TransferError(f"the server answers {response.status} {response.reason}".rstrip())
            progress.start(part.length, part.size)
            _copy(part, response, progress)
    except TransferError as failure:
        if asked and failure.what.startswith("the server answers 416"):
            part.restart(None, None)
        raise
    if part.size is not None and part.length > part.size:
        part.restart(None, None)
        raise TransferError("the server sends more than it states", transient=True)
    if part.size is not None and part.length < part.size:
        raise TransferError(f"broke off after {part.length} of {part.size} bytes", transient=True)


def _copy(part: PartFile, response: Any, progress: ByteProgress) -> None:
    checked = False
    while data := response.read1(_PIECE):
        part.append(data)
        progress.received(len(data))
        if not checked and part.length >= HEAD:
            _check_content(part)
            checked = True


def _range_headers(part: PartFile, trusted: bool) -> dict[str, str]:
    """Ask for the rest of a partial file, if it is sure to be of the same file or a checksum will tell."""
    if part.length == 0 or (part.validator is None and not trusted):
        return {}
    headers = {"Range": f"bytes={part.length}-"}
    if part.validator is not None:
        headers["If-Range"] = part.validator
    return headers


def _go_on(part: PartFile, headers: Mapping[str, str], asked: bool) -> None:
    """Check that a partial answer is the rest of the file begun; otherwise drop it and begin anew."""
    found = _CONTENT_RANGE.fullmatch((headers.get("Content-Range") or "").strip())
    if not asked or found is None:
        part.restart(None, None)
        raise TransferError("the server answers with a part that was not asked for", transient=True)
    total = int(found[3]) if found[3] != "*" else part.size
    if int(found[1]) != part.length or _differs(part.size, total) or _differs(part.validator, _validator(headers)):
        part.restart(None, None)
        raise TransferError("the file has changed on the server", transient=True)
    part.size = total


def _differs(known: object, stated: object) -> bool:
    return known is not None and stated is not None and known != stated


def _validator(headers: Mapping[str, str]) -> str | None:
    """A strong entity tag, else the time of the last change."""
    tag = (headers.get("ETag") or "").strip()
    if len(tag) > 2 and tag.startswith('"') and tag.endswith('"') and tag.isprintable():
        return tag
    changed = (headers.get("Last-Modified") or "").strip()
    return changed if changed and changed.isprintable() else None


def _check_encoding(name: str, headers: Mapping[str, str]) -> None:
    """Refuse text that a server compresses on its way although it was asked not to."""
    encoding = (headers.get("Content-Encoding") or "").strip().lower()
    if encoding not in ("", "identity") and not name.lower().endswith(COMPRESSED):
        raise TransferError(f"the server sends it compressed ({encoding}) without being asked")
