"""The data set that a file belongs to, found by the names of the files beside it.

Names are `<isotopologue>__<data set>` with .def, .states or .pf behind it, .trans behind it or behind a further
`__<range>`, and `<isotopologue>__<broadener>.broad` (Tennyson et al. 2016, J. Mol. Spectrosc. 327, 73).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from opacity.errors import LineListError, problem
from opacity.line_list.exomol.definition import Definition, read_definition
from opacity.line_list.exomol.transitions import default_names
from opacity.recipe.formats import EXOMOL_ENDINGS, exomol_kind, plain_name

CHECKED = ("def", "states", "trans")
"""Kinds of files that lead to their data set."""

_REMEDY = "put the files of the data set into one folder, under the names that they came with"


@dataclass(frozen=True)
class FilesBeside:
    """The files of a data set in one folder; `absent` are those that its definition names and that are not there."""

    name: str
    definition: Path | None
    states: Path
    transitions: tuple[Path, ...]
    partition: Path | None
    broad: dict[str, Path]
    absent: tuple[str, ...] = ()


def stem_of(name: str) -> str:
    """A file's name without the endings of compression and kind."""
    plain = plain_name(name)
    for ending in sorted(EXOMOL_ENDINGS, key=len, reverse=True):
        if plain.lower().endswith(ending):
            return plain[: -len(ending)]
    return plain


def files_beside(target: Path) -> tuple[FilesBeside, Definition | None]:
    """The data set of a .def, .states or .trans file, plain or compressed, and its definition where there is one.

    Raises LineListError for a file that is not there, or without a .states file of its data set beside it, or where a
    definition's data set has no .trans file here.
    """
    if not target.is_file():
        raise LineListError(problem(target, "no such file", remedy="mend the name, or fetch the file"))
    kind = exomol_kind(target.name)
    here = {one: list(_of_kind(target.parent, one)) for one in ("def", "states", "trans", "pf", "broad")}
    bases = [stem_of(target.name)]
    definition: Definition | None = None
    if kind == "trans":
        bases = _stems_before(bases[0], [*here["states"], *here["def"]])
    elif kind == "def":
        definition = read_definition(target)
        bases.append(f"{definition.slug}__{definition.dataset}")
    states = target if kind == "states" else _first(here["states"], bases)
    if states is None:
        stem = bases[0] if bases else "__".join(stem_of(target.name).split("__")[:2])
        raise LineListError(
            problem(target, "its states are not beside it", expected=f"{stem}.states, plain or compressed",
                    found=_names(here["states"]), remedy=_REMEDY)
        )  # fmt: skip
    bases = list(dict.fromkeys([stem_of(states.name), *bases]))
    path = target if kind == "def" else _first(here["def"], bases)
    if path is not None and definition is None:
        definition = read_definition(path)
    transitions = tuple(one for one in here["trans"] if any(_belongs(stem_of(one.name), base) for base in bases))
    if kind == "def" and not transitions:
        raise LineListError(
            problem(target, "its transitions are not beside it", expected=f"{bases[0]}.trans or {bases[0]}__*.trans",
                    found=_names(here["trans"]), remedy=_REMEDY)
        )  # fmt: skip
    slug = definition.slug if definition is not None else bases[0].split("__")[0]
    broad, absent = _broad(here["broad"], slug, definition)
    found = FilesBeside(bases[0], path, states, transitions, _first(here["pf"], bases), broad, absent)
    return found, definition


def _of_kind(folder: Path, kind: str) -> Iterator[Path]:
    """The files of a kind, sorted by name; of one that lies there plain and compressed only the first."""
    seen = set()
    for path in sorted(folder.iterdir(), key=lambda one: one.name):
        plain = plain_name(path.name)
        if exomol_kind(path.name) == kind and plain not in seen and path.is_file():
            seen.add(plain)
            yield path


def _belongs(stem: str, base: str) -> bool:
    return stem == base or stem.startswith(f"{base}__")


def _stems_before(stem: str, paths: list[Path]) -> list[str]:
    """The stems of those files that a .trans file of this stem belongs to, longest first."""
    stems = {stem_of(path.name) for path in paths}
    return sorted((one for one in stems if _belongs(stem, one)), key=len, reverse=True)


def _first(paths: list[Path], bases: list[str]) -> Path | None:
    return next((path for base in bases for path in paths if stem_of(path.name) == base), None)


def _names(paths: list[Path]) -> str:
    shown = ", ".join(path.name for path in paths[:3])
    return shown + (f" and {len(paths) - 3} more" if len(paths) > 3 else "") if paths else "none"


def _broad(paths: list[Path], slug: str, definition: Definition | None) -> tuple[dict[str, Path], tuple[str, ...]]:
    """Broadening files by broadener, and the names of those that the definition lists and that are not there."""
    found = default_names([path for path in paths if path.name.startswith(f"{slug}__")])
    absent = []
    for one in definition.broadeners if definition is not None else ():
        there = [path for path in paths if plain_name(path.name) == plain_name(one.file)]
        if there:
            found = {name: path for name, path in found.items() if path not in there} | {one.name: there[0]}
        else:
            absent.append(one.file)
    return found, tuple(absent)
