"""From input files to a line store, with bounded memory; an ingest that was interrupted goes on file by file."""

from __future__ import annotations

import functools
import shutil
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from opacity.errors import LineListError, ResourceError, problem
from opacity.line_list.batches import Batch, renumbered
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import StrengthBasis
from opacity.line_list.packed import PackedLines, join
from opacity.line_store.aside import aside
from opacity.line_store.assemble import assemble, weight
from opacity.line_store.layout import FORMAT_VERSION, PARTS, SEGMENT_LINES, Segment, sealed, unsealed
from opacity.line_store.lock import locked
from opacity.line_store.segment import write_segment
from opacity.molecule.isotopologue import Isotopologue
from opacity.provenance import file_sha256
from opacity.tables.atomic import write_atomically

BYTES_A_LINE = 120
"""Packed lines being joined, sorted and written: columns, their sorted copy, the file's image, and room to spare."""

Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class InputFile:
    """One file to ingest: `batches` reads it; `beside` are files that its lines depend on too (a header, states)."""

    path: Path
    batches: Callable[[], Iterator[Batch]]
    beside: tuple[Path, ...] = ()


def identity(one: InputFile) -> dict[str, Any]:
    """Name, size, time of change and sha256 of an input and of what lies beside it.

    Raises LineListError for a file that cannot be read, or that changes meanwhile.
    """
    return _identity(_at_rest(one))


def _at_rest(one: InputFile) -> list[tuple[Path, int, int]]:
    """Size and time of change of an input and of what lies beside it."""
    return [(path, *_size_and_time(path)) for path in (one.path, *one.beside)]


def _size_and_time(path: Path) -> tuple[int, int]:
    try:
        status = path.stat()
    except OSError as error:
        raise LineListError(problem(path, f"cannot be read ({error.strerror})")) from error
    return status.st_size, status.st_mtime_ns


def _identity(files: list[tuple[Path, int, int]]) -> dict[str, Any]:
    """The identity of files that had these sizes and times: a hash of anything else would vouch for other content."""
    entries = []
    for path, size, mtime_ns in files:
        sha256 = _sha256(path, size, mtime_ns)
        if _size_and_time(path) != (size, mtime_ns):
            raise _changed(path)
        entries.append({"file": path.name, "size": size, "mtime_ns": mtime_ns, "sha256": sha256})
    return {"files": entries}


def _changed(path: Path) -> LineListError:
    return LineListError(problem(path, "changed while it was read", remedy="build again when it is at rest"))


@functools.lru_cache(maxsize=256)
def _sha256(path: Path, size: int, mtime_ns: int) -> str:
    """A file's hash, once for all inputs that lie beside the same states."""
    del size, mtime_ns
    return file_sha256(path)


def same_content(one: InputFile, known: dict[str, Any]) -> bool:
    """Whether an input is what it was: sizes and times of change, or failing the times its sha256."""
    paths, before = (one.path, *one.beside), known.get("files", [])
    if len(paths) != len(before):
        return False
    for path, entry in zip(paths, before, strict=True):
        try:
            status = path.stat()
        except OSError:
            return False
        if path.name != entry.get("file") or status.st_size != entry.get("size"):
            return False
        if status.st_mtime_ns == entry.get("mtime_ns"):
            continue
        if _sha256(path, status.st_size, status.st_mtime_ns) != entry.get("sha256"):
            return False
    return True


def ingest(
    folder: Path,
    inputs: list[InputFile],
    key: str,
    memory: int,
    progress: Progress,
    facts: Callable[[], dict[str, Any]] = dict,
) -> None:
    """Make the store in `folder` from the inputs.

    `key` says how the inputs are read; `memory` bounds what is held, in bytes; `progress(records, bytes read)` is
    called as records are read; `facts` gives plain values to keep beside the lines, such as a partition function
    summed over the states.  Raises LineListError for what can't be right, ResourceError where the disk refuses.
    """
    at_once = max(memory // 3 // BYTES_A_LINE, 1 << 14)
    parts = folder / PARTS
    _make_folder(folder)
    with locked(folder) as lock:
        _make_folder(parts)
        manifests = []
        for number, one in enumerate(inputs):
            manifests.append(_ingest_file(parts, number, one, key, at_once, progress))
            lock.check()
        for one, manifest in zip(inputs, manifests, strict=True):  # files beside several may have changed between them
            _refuse_changed(one, manifest["identity"])
        assemble(folder, manifests, key, at_once, facts(), lock.check)
        shutil.rmtree(parts, ignore_errors=True)


def _make_folder(path: Path) -> None:
    try:
        path.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise ResourceError(problem(path, f"the line store's folder cannot be made ({error.strerror})")) from error


def _kept(manifest_path: Path, one: InputFile, key: str) -> dict[str, Any] | None:
    """The manifest of an interrupted ingest, if it is of the same input and all its parts are there."""
    kept = _read_json(manifest_path)
    if kept is None or (kept.get("format_version"), kept.get("key")) != (FORMAT_VERSION, key):
        return None
    if not same_content(one, kept.get("identity", {})):
        return None
    for segment in kept["segments"]:
        try:
            whole = (manifest_path.parent / segment["file"]).stat().st_size == segment["bytes"]
        except OSError:
            whole = False
        if not whole:
            return None
    return kept


def _ingest_file(
    parts: Path, number: int, one: InputFile, key: str, weight_at_once: int, progress: Progress
) -> dict[str, Any]:
    """The manifest of one file's sorted parts, made anew unless it is there from an interrupted ingest."""
    manifest_path = parts / f"{number:05d}.json"
    kept = _kept(manifest_path, one, key)
    if kept is not None:
        progress(int(kept["ledger"]["read"]), one.path.stat().st_size)
        return kept
    try:
        manifest_path.unlink(missing_ok=True)
    except OSError as error:
        raise ResourceError(problem(manifest_path, f"cannot be removed ({error.strerror})")) from error
    hashing = aside(functools.partial(_identity, _at_rest(one)))
    known: list[tuple[Isotopologue, StrengthBasis]] = []
    segments: list[Segment] = []
    ledger = Ledger()
    names: set[str] = set()
    waiting: list[PackedLines] = []
    position = 0
    for batch in one.batches():
        ledger.add(batch.ledger)
        pairs = list(zip(batch.isotopologues, batch.basis, strict=True))
        known += [pair for pair in pairs if pair not in known]
        waiting.append(renumbered(batch.packed, [known.index(pair) for pair in pairs], number))
        names |= set(batch.packed.classes.broadeners)
        if sum(weight(part) for part in waiting) >= weight_at_once:
            segments += _write_run(parts, f"{number:05d}-{len(segments):06d}", waiting)
            waiting = []
        progress(batch.ledger.read, max(batch.read - position, 0))
        position = max(batch.read, position)
    segments += _write_run(parts, f"{number:05d}-{len(segments):06d}", waiting)
    before = hashing()
    _refuse_changed(one, before)
    if not ledger.adds_up():
        raise LineListError(problem(one.path, "the account of its records does not add up", found=ledger.as_dict()))
    manifest = {
        "format_version": FORMAT_VERSION,
        "key": key,
        "identity": before,
        "ledger": ledger.as_dict(),
        "isotopologues": [iso.__dict__ for iso, _ in known],
        "basis": [basis.__dict__ for _, basis in known],
        "broadeners": sorted(names),
        "segments": [segment.as_dict() for segment in segments],
    }
    write_atomically(manifest_path, sealed(manifest))
    return manifest


def _refuse_changed(one: InputFile, before: dict[str, Any]) -> None:
    if not same_content(one, before):
        raise _changed(one.path)


def _write_run(parts: Path, name: str, waiting: list[PackedLines]) -> list[Segment]:
    """One sorted run as segments."""
    if not waiting or not sum(len(part) for part in waiting):
        return []
    run = join(waiting)
    waiting.clear()
    pieces = range(0, len(run), SEGMENT_LINES)
    return [
        write_segment(parts, f"{name}-{k:04d}.part", run.select(slice(start, start + SEGMENT_LINES)))
        for k, start in enumerate(pieces)
    ]


def _read_json(path: Path) -> dict[str, Any] | None:
    """A manifest as it was written; one that is damaged is no manifest."""
    try:
        return unsealed(path.read_bytes())
    except (OSError, ValueError, RecursionError):
        return None
