"""A recipe's line lists as what an ingest takes, and the line stores made of them."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

from opacity.line_list.batches import record_batches
from opacity.line_list.exomol.broadening import read_broadening
from opacity.line_list.exomol.dataset import OpenDataSet, sort_files
from opacity.line_list.hapi_table import header_of
from opacity.line_list.records import ReadOptions
from opacity.line_store.ingest import InputFile, ingest
from opacity.line_store.store import LineStore, StoreIndex, is_current, read_index
from opacity.molecule.hapi_tables import hapi
from opacity.pipeline.fetch.checksum import refuse_other_content
from opacity.pipeline.progress import RecordProgress
from opacity.pipeline.resources import allowed_cpus
from opacity.provenance import package_versions
from opacity.recipe.model import LineListSource, Recipe

DEFAULT_MEMORY = 2_000_000_000
COMPRESSION = 8
"""How many bytes of text a compressed byte is taken to stand for."""
READING_VERSION = 1
"""To be raised when the rules of reading change: stores made by other rules are made again."""
SMALL_LIST = 64_000_000
"""Lists of records below this size (bytes) are read again for each build; larger ones go through a line store."""


@dataclass(frozen=True)
class ListInputs:
    """One `[[line_list]]` ready for ingest: its files, how they are read (`key`), and the facts kept with its lines."""

    inputs: tuple[InputFile, ...]
    key: str
    facts: Callable[[], dict[str, Any]]

    def folder(self, tables: Path, formula: str) -> Path:
        """Where its line store lies: beside the tables, named by what it is made of and how."""
        paths = [str(path.absolute()) for one in self.inputs for path in (one.path, *one.beside)]
        digest = hashlib.sha256(json.dumps([self.key, paths]).encode("utf-8", "surrogateescape")).hexdigest()
        return tables / "lines" / f"{formula}-{digest[:12]}"


def is_small(source: LineListSource) -> bool:
    """Whether a list is read into memory rather than kept in a store."""
    text = sum(_size(path) * (COMPRESSION if path.suffix in (".gz", ".bz2") else 1) for path in source.paths)
    return source.format == "catalogue" or (source.format in ("hitran", "hapi") and text < SMALL_LIST)


def _size(path: Path) -> int:
    try:
        return path.stat().st_size
    except OSError:  # said when it is read
        return 0


def list_inputs(recipe: Recipe, source: LineListSource, executor: ThreadPoolExecutor | None) -> ListInputs:
    """What an ingest of one list takes.  Raises LineListError for files that do not make a list."""
    leave_out = source.bad_records == "leave-out"
    molecule = recipe.molecule
    settings: dict[str, Any] = {
        "format": source.format,
        "range": source.range,
        "leave_out": leave_out,
        "isotopologue": source.isotopologue,
        "formula": molecule.formula,
        "mass": molecule.mass,
        "broad": sorted(recipe.broadening.files),
        "reading": READING_VERSION,
        "hapi": package_versions()["hitran-api"],
    }
    if source.format != "exomol":
        options = read_options(recipe, source)
        broad = [recipe.broadening.files[name] for name in sorted(recipe.broadening.files)]
        inputs = [
            InputFile(
                path,
                partial(record_batches, path, source.format, options, leave_out, source.range, executor),
                (*([header_of(path)] if source.format == "hapi" else []), *broad),
            )
            for path in source.paths
        ]
        return ListInputs(tuple(inputs), json.dumps(settings), dict)
    files = sort_files(
        source.paths, str(recipe.path), molecule.formula, source.isotopologue or "", recipe.broadening.files
    )
    data = OpenDataSet(files, molecule.mass)
    inputs = [
        InputFile(path, data.batches(path, leave_out, source.range, executor), files.beside)
        for path in files.transitions
    ]
    settings["broad"] = sorted(files.broad)
    return ListInputs(tuple(inputs), json.dumps(settings), data.facts)


def read_options(recipe: Recipe, source: LineListSource) -> ReadOptions:
    """What a recipe says of a list of records, widths by J'' among it."""
    molecule = recipe.molecule
    tables = {name: read_broadening(path) for name, path in recipe.broadening.files.items()}
    return ReadOptions(molecule.formula, molecule.mass, source.isotopologue, tables)


def ensure_store(
    recipe: Recipe,
    source: LineListSource,
    tables: Path,
    memory: int = DEFAULT_MEMORY,
    quiet: bool = False,
    hashes: frozenset[str] | None = None,
) -> tuple[LineStore, bool]:
    """The line store of a list, made if it is missing or no longer what its files say; whether it was made now.

    With the files' sha256 at hand (`hashes`) these decide, and not only sizes and times of change.
    Raises LineListError for files that do not make a list, or are not those that the recipe or the records beside
    them promise.
    """
    hapi()  # before any thread asks for it
    with ThreadPoolExecutor(allowed_cpus()) as executor:
        made = list_inputs(recipe, source, executor)
        folder = made.folder(tables, recipe.molecule.formula)
        index = read_index(folder)
        if index is not None and is_current(index, list(made.inputs), made.key):
            known = {str(file["sha256"]) for one in index.inputs for file in one["files"]}
            there = all(_size(folder / segment.file) == segment.bytes for segment in index.segments)
            if there and (hashes is None or known <= hashes):
                _refuse_other_content(source, made, index)
                return LineStore(folder), False
        total = sum(_size(one.path) for one in made.inputs)
        with RecordProgress(f"reading lines of {recipe.molecule.formula}", total, quiet) as progress:
            ingest(folder, list(made.inputs), made.key, memory, progress.add, made.facts)
    store = LineStore(folder)
    _refuse_other_content(source, made, store.index)
    return store, True


def _refuse_other_content(source: LineListSource, made: ListInputs, index: StoreIndex) -> None:
    """Raise LineListError where a store's files are not those that recipe or records promise; it hashed them itself."""
    for one, known in zip(made.inputs, index.inputs, strict=True):
        for path, file in zip((one.path, *one.beside), known["files"], strict=True):
            refuse_other_content(path, source.sha256.get(path), str(file["sha256"]))
