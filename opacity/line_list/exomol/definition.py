"""The definition of a line list in ExoMol format: isotopologue, mass, default widths, what the other files hold."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from opacity.errors import LineListError, problem
from opacity.line_list.exomol.definition_json import json_values
from opacity.line_list.exomol.definition_text import text_values
from opacity.line_list.exomol.definition_values import Values
from opacity.line_list.text import read_text

MAX_WIDTH = 100.0
"""No half-width is larger, cm-1/bar at 296 K (typical: 0.01 to 1)."""

MAX_EXPONENT = 10.0
MASS_AGREES = 1e-3
"""A definition's mass may differ this much, relative, from that of elsewhere without a word."""
_LIGHTEST, _HEAVIEST = 0.9, 1e5
_HOTTEST = 1e6
_HIGHEST_WAVENUMBER = 1e7


@dataclass(frozen=True)
class BroadenerFile:
    """A broadener that the definition lists, with the name of its .broad file."""

    name: str
    file: str


@dataclass(frozen=True)
class Definition:
    """What a definition says; None where it says nothing.

    `formula` such as "(12C)(16O)"; `slug` such as "12C-16O"; `mass` Da; `gamma` cm-1/bar at 296 K and `exponent` the
    default width of all lines; `max_temperature` K; `max_wavenumber` cm-1; `states`, `transitions` and
    `transition_files` are counts; `state_columns` the names of the columns of the .states file behind J, of which
    `has_uncertainty`, `has_lifetime` and `has_lande_g` stand first; `notes` what does not agree with itself.
    """

    path: str
    formula: str
    slug: str
    dataset: str
    version: str
    mass: float
    gamma: float | None
    exponent: float | None
    max_temperature: float | None
    max_wavenumber: float | None
    states: int | None
    transitions: int | None
    transition_files: int | None
    has_uncertainty: bool
    has_lifetime: bool
    has_lande_g: bool
    state_columns: tuple[str, ...]
    broadeners: tuple[BroadenerFile, ...]
    notes: tuple[str, ...] = ()


def mass_difference(mass: float, other: float, where: str) -> str:
    """What to say of a definition's mass (g/mol) and that of elsewhere, empty where they agree."""
    off = mass / other - 1.0
    if abs(off) <= MASS_AGREES:
        return ""
    return f"mass {mass:.8g} g/mol in the definition, {other:.8g} g/mol in {where} ({100.0 * off:+.2g} %)"


def read_definition(path: Path) -> Definition:
    """The definition in a .def or a .def.json file, plain, .gz or .bz2; the keys of the latter are from memory.

    Formula, slug, dataset, version and mass are needed.  A default half-width of 0 counts as not given.
    Raises LineListError naming the file, the line where there is one, and what is missing or impossible.
    """
    data = read_text(path)
    endings = [ending.lower() for ending in path.suffixes if ending.lower() not in (".bz2", ".gz")]
    is_json = endings[-1:] == [".json"] or data.lstrip()[:1] == b"{"
    return _build(json_values(path, data) if is_json else text_values(path, data))


def _build(values: Values) -> Definition:
    formula, slug = values.text("isotopologue formula"), values.text("isotopologue slug")
    dataset, version = values.text("dataset name"), values.text("version")
    values.text("mass")
    mass = values.number("mass", _LIGHTEST, _HEAVIEST)
    assert mass is not None
    flags = [values.flag(key) for key in ("uncertainty flag", "lifetime flag", "Lande flag")]
    known = [name for name, there in zip(("uncertainty", "lifetime", "Lande g"), flags, strict=True) if there]
    listed = values.count("number of broadeners")
    notes = list(values.notes)
    if listed is not None and listed != len(values.broadeners):
        notes.append(f"{listed} broadeners counted, {len(values.broadeners)} listed")
    return Definition(
        path=str(values.path),
        formula=formula,
        slug=slug,
        dataset=dataset,
        version=version,
        mass=mass,
        gamma=values.number("default half-width", 0.0, MAX_WIDTH) or None,
        exponent=values.number("default exponent", -MAX_EXPONENT, MAX_EXPONENT),
        max_temperature=values.number("maximum temperature", 0.0, _HOTTEST),
        max_wavenumber=values.number("maximum wavenumber", 0.0, _HIGHEST_WAVENUMBER),
        states=values.count("number of states"),
        transitions=values.count("number of transitions"),
        transition_files=values.count("number of transition files"),
        has_uncertainty=flags[0],
        has_lifetime=flags[1],
        has_lande_g=flags[2],
        state_columns=tuple(known + values.columns),
        broadeners=_broadeners(values),
        notes=tuple(notes),
    )


def _broadeners(values: Values) -> tuple[BroadenerFile, ...]:
    found: dict[str, BroadenerFile] = {}
    for name, file, where in values.broadeners:
        if name in found:
            raise LineListError(problem(where, f"broadener {name} listed twice", expected="each once"))
        found[name] = BroadenerFile(name, file)
    return tuple(found.values())
