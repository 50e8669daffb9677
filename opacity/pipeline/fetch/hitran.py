"""Lines straight from HITRAN, through hapi's own download, moved to their names only when they are whole."""

from __future__ import annotations

import contextlib
import io
import json
import os
import shutil
import socket
import tempfile
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from opacity.errors import LineListError, MoleculeError, OpacityError, printable, problem
from opacity.molecule.hapi_tables import hapi
from opacity.molecule.isotopologue import isotopologue
from opacity.pipeline.fetch.checksum import record_sha256
from opacity.pipeline.fetch.partial import disk_work, sync_folder
from opacity.provenance import file_sha256
from opacity.recipe.downloads import HitranDownload
from opacity.recipe.faults import nearest
from opacity.recipe.line_lists import full_name

SILENCE = 300.0
"""How long HITRAN may send nothing (s): a large query takes minutes before its first line."""

_RECORD = 160


def request_words(wanted: HitranDownload) -> str:
    """What is asked for, in one line."""
    numbers = ", ".join(str(one) for one in wanted.isotopologues)
    columns = f", with {', '.join(wanted.parameters)}" if wanted.parameters else ""
    low, high = wanted.range
    return f"HITRAN molecule {wanted.molecule}, isotopologues {numbers}, {low:g} to {high:g} cm-1{columns}"


def check_request(wanted: HitranDownload) -> None:
    """Raise LineListError for isotopologues or parameters that hapi does not know; asks nobody."""
    for local in wanted.isotopologues:
        try:
            isotopologue(wanted.molecule, local)
        except MoleculeError as error:
            raise LineListError(str(error)) from error
    known = {str(name).lower() for name in hapi().PARAMETER_META}
    for name in wanted.parameters:
        if name.lower() not in known:
            meant = nearest(name, known)
            remedy = f"did you mean {meant}?" if meant else None
            raise LineListError(
                problem(request_words(wanted), "unknown parameter", expected="one of hapi's", found=name, remedy=remedy)
            )


def download_hitran(wanted: HitranDownload) -> str:
    """Fetch the lines (and their header) under their final names and return the sha256 of the lines.

    Raises LineListError for what HITRAN or the network does, ResourceError for what the disk does.
    """
    check_request(wanted)
    folder = wanted.path.parent
    with disk_work(wanted.path):
        folder.mkdir(parents=True, exist_ok=True)
        temporary = Path(tempfile.mkdtemp(prefix=".fetch-", dir=folder))
    try:
        _query(wanted, temporary)
        data, header = temporary / f"{wanted.path.stem}.data", temporary / f"{wanted.path.stem}.header"
        _check_answer(wanted, data, header)
        digest = file_sha256(data)
        if wanted.sha256 is not None and digest != wanted.sha256:
            raise _failed(wanted, f"wrong checksum; expected sha256 {wanted.sha256}, found {digest}")
        # The header first: only with both are the lines there.
        for source, target in ((header, wanted.header), (data, wanted.path)):
            if target is not None:
                with disk_work(target):
                    _sync(source)
                    os.replace(source, target)
        sync_folder(folder)
    finally:
        shutil.rmtree(temporary, ignore_errors=True)
    record_sha256(wanted.path, digest, request_words(wanted))
    return digest


def _query(wanted: HitranDownload, folder: Path) -> None:
    """Let hapi write its two files into a folder; its many lines on stdout are dropped."""
    numbers = [hapi().ISO[(wanted.molecule, local)][hapi().ISO_INDEX["id"]] for local in wanted.isotopologues]
    try:
        with _hapi_in(folder, wanted.path.stem) as module:
            module.fetch_by_ids(wanted.path.stem, numbers, *wanted.range, Parameters=list(wanted.parameters))
    except OpacityError:
        raise
    except Exception as error:  # hapi raises plain Exception
        lines = str(error).strip().splitlines() or [type(error).__name__]
        raise _failed(wanted, printable(lines[0])) from error


@contextlib.contextmanager
def _hapi_in(folder: Path, table: str) -> Iterator[Any]:
    """hapi with another folder as its database, silent and with a time limit; afterwards as it was before.

    The table that it loads is dropped from its memory again.
    """
    module = hapi()
    kept = module.LOCAL_TABLE_CACHE.pop(table, None)
    before, limit = module.VARIABLES["BACKEND_DATABASE_NAME"], socket.getdefaulttimeout()
    socket.setdefaulttimeout(SILENCE)
    module.VARIABLES["BACKEND_DATABASE_NAME"] = str(folder)
    try:
        with contextlib.redirect_stdout(io.StringIO()):
            yield module
    finally:
        module.VARIABLES["BACKEND_DATABASE_NAME"] = before
        socket.setdefaulttimeout(limit)
        loaded = module.LOCAL_TABLE_CACHE.pop(table, None) or {}
        if loaded.get("filehandler") is not None:
            loaded["filehandler"].close()
        if kept is not None:
            module.LOCAL_TABLE_CACHE[table] = kept


def _check_answer(wanted: HitranDownload, data: Path, header: Path) -> None:
    """Refuse an answer that holds no lines, lines of another molecule, or that breaks off."""
    try:
        first, last = _first_and_last(data)
        content = json.loads(header.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise _failed(wanted, "no answer that can be read") from error
    if not first.strip():
        raise _failed(wanted, "no lines in this range")
    if first[:2].strip() != str(wanted.molecule).encode():
        raise _failed(wanted, f"an answer that holds no lines: {printable(first[:60].decode('ascii', 'replace'))}")
    extra = content.get("extra") if isinstance(content, dict) else None
    columns = len(extra) if isinstance(extra, list) else 0
    if len(last) < _RECORD or last.count(b",", _RECORD) < columns:
        raise _failed(wanted, "an answer that breaks off in its last line")


def _first_and_last(path: Path) -> tuple[bytes, bytes]:
    with open(path, "rb") as stream:
        first = stream.readline(10_000)
        stream.seek(max(stream.seek(0, os.SEEK_END) - 10_000, 0))
        lines = stream.read().rstrip(b"\r\n").split(b"\n")
    return first, lines[-1].rstrip(b"\r")


def _failed(wanted: HitranDownload, what: str) -> LineListError:
    both = f" and its header as {wanted.header.name}" if wanted.header is not None else " in 160-character format"
    remedy = f"download it by hand (hitran.org, line-by-line) and save it as {full_name(wanted.path)}{both}"
    return LineListError(problem(request_words(wanted), what, remedy=remedy))


def _sync(path: Path) -> None:
    with open(path, "rb") as stream:
        os.fsync(stream.fileno())
