"""What a table is made from, told by hashes: to know whether it is up to date no line needs to be read."""

from __future__ import annotations

import hashlib
import json
import os
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from opacity.line_list.hapi_table import header_of
from opacity.pipeline.fetch.checksum import refuse_other_content
from opacity.provenance import VERSION, file_sha256, package_versions
from opacity.recipe.model import LineListSource, Recipe


@dataclass(frozen=True)
class Fingerprint:
    """Versions and files behind a table as plain values for JSON, and one hash of these and of the recipe's text."""

    content: dict[str, Any]
    sha256: str
    stamps: tuple[tuple[str, int, int], ...] = ()
    """Path, size and time of change (ns) of every file, taken before it was hashed."""

    def still_of(self, recipe: Recipe) -> bool:
        """Whether it is that of a recipe still, as far as text, versions, sizes and times of change tell."""
        if recipe.species:
            return False
        versions = {"program": {"name": "opacity", "version": VERSION}, "packages": package_versions()}
        same = all(self.content[name] == value for name, value in versions.items())
        return same and _hashed(self.content, recipe) == self.sha256 and self.stamps == _stamps(recipe)

    @property
    def hashes(self) -> frozenset[str]:
        """The sha256 of every file behind the table."""
        files = [*self.content["line_lists"], *self.content["broadening_files"].values()]
        return frozenset(str(one["sha256"]) for one in files)

    @property
    def seed(self) -> int:
        """The audit's seed, made of the inputs."""
        return int(self.sha256[:12], 16)


def fingerprint(recipe: Recipe) -> Fingerprint:
    """The fingerprint of a recipe's table.

    Raises OpacityError for a file that cannot be read, LineListError for one whose sha256 is not that of the recipe
    or of the record beside it.
    """
    if recipe.species:
        return _of_mixture(recipe)
    choice, stamps = recipe.partition_function, _stamps(recipe)
    content: dict[str, Any] = {
        "program": {"name": "opacity", "version": VERSION},
        "packages": package_versions(),
        "line_lists": [_file_entry(path, source) for source in recipe.line_lists for path in _all_paths(source)],
        "partition_file": None,
        "broadening_files": {
            name: {"file": _file_name(path), "sha256": _checked_sha256(path)}
            for name, path in sorted(recipe.broadening.files.items())
        },
    }
    if choice.path is not None:
        content["partition_file"] = {"file": _file_name(choice.path), "sha256": _checked_sha256(choice.path)}
    return Fingerprint(content, _hashed(content, recipe), stamps)


def _hashed(content: dict[str, Any], recipe: Recipe) -> str:
    text = json.dumps({**content, "recipe": recipe.text}, sort_keys=True)
    return hashlib.sha256(text.encode("utf-8")).hexdigest()


def _stamps(recipe: Recipe) -> tuple[tuple[str, int, int], ...]:
    """Of files that cannot be looked at nothing, so that they are found out when they are read."""
    paths = [path for source in recipe.line_lists for path in _all_paths(source)]
    paths += [*recipe.broadening.files.values()]
    paths += [recipe.partition_function.path] if recipe.partition_function.path is not None else []
    stamps = []
    for path in paths:
        try:
            found = path.stat()
        except (OSError, ValueError):
            return ()
        stamps.append((str(path.absolute()), found.st_size, found.st_mtime_ns))
    return tuple(stamps)


def _of_mixture(recipe: Recipe) -> Fingerprint:
    """That of a recipe of several species, out of theirs."""
    parts = [fingerprint(one.recipe) for one in recipe.species]
    content: dict[str, Any] = {
        "program": {"name": "opacity", "version": VERSION},
        "packages": package_versions(),
        "line_lists": [entry for part in parts for entry in part.content["line_lists"]],
        "broadening_files": {
            f"{one.recipe.molecule.formula} {name}": entry
            for one, part in zip(recipe.species, parts, strict=True)
            for name, entry in part.content["broadening_files"].items()
        },
    }
    text = json.dumps({"species": [part.sha256 for part in parts], "recipe": recipe.text}, sort_keys=True)
    # Without stamps: it is hashed again wherever it is needed.
    return Fingerprint(content, hashlib.sha256(text.encode("utf-8")).hexdigest())


def _all_paths(source: LineListSource) -> list[Path]:
    paths = list(source.paths)
    if source.format == "hapi":
        paths += [header_of(path) for path in source.paths]
    return paths


def _file_entry(path: Path, source: LineListSource) -> dict[str, Any]:
    sha256 = _checked_sha256(path, source.sha256.get(path))
    return {"file": _file_name(path), "sha256": sha256, "reference": source.reference}


def _checked_sha256(path: Path, stated: str | None = None) -> str:
    found = file_sha256(path)
    refuse_other_content(path, stated, found)
    return found


def _file_name(path: Path) -> str:
    """A file name need not be text."""
    return os.fsencode(path.name).decode("utf-8", "backslashreplace")
