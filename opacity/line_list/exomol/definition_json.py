"""The .def.json file, the newer form of the definition.

Its keys are from memory.  They are looked for by name wherever they stand in the document, upper and lower case and
underscores set aside, so that a key may move between sections; a document without the needed ones is refused.
"""

from __future__ import annotations

import json
import re
from collections import deque
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from opacity.errors import LineListError, excerpt, problem
from opacity.line_list.exomol.definition_values import Values, checked_word

# By key of a definition: name in this document, with the section in which alone it means that, where there is one.
_KEYS = {
    "isotopologue formula": ("isoformula", "isotopologueformula", "isotopologue.formula"),
    "isotopologue slug": ("isoslug", "isotopologueslug", "isotopologue.slug"),
    "mass": ("massinda", "isotopologue.massda", "isotopologue.mass", "isotopologuemass"),
    "dataset name": ("dataset.name", "datasetname", "dataset"),
    "version": ("dataset.version", "datasetversion"),
    "maximum temperature": ("maxtemperature", "maximumtemperature"),
    "number of broadeners": ("numpressurebroadeners", "numberofpressurebroadeners"),
    "lifetime flag": ("lifetimeavailable", "lifetimesavailable", "lifetimeavailability"),
    "Lande flag": ("landegavailable", "landegfactoravailable", "landegfactoravailability"),
    "uncertainty flag": ("uncertaintiesavailable", "uncertaintyavailable", "uncertaintyavailability"),
    "number of states": ("numberofstates", "numstates", "nstates"),
    "number of transitions": ("numberoftransitions", "totalnumberoftransitions", "numtransitions"),
    "number of transition files": ("numberoftransitionfiles", "numtransitionfiles"),
    "maximum wavenumber": ("maxwavenumber", "maximumwavenumber"),
    "default half-width": ("defaultgammal", "defaultgamma", "defaultlorentzianhalfwidth", "defaulthalfwidth"),
    "default exponent": ("defaultnl", "defaultn", "defaultnexp", "defaulttemperatureexponent", "defaultexponent"),
}
_FIELDS = ("statesfilefields", "statesfields", "statesfilecolumns")
_FIRST_FIELDS = (("id", "i"), ("e", "energy"), ("gtot", "g"), ("j", "f"))
_FIELD_NAMES = {
    "unc": "uncertainty",
    "uncertainty": "uncertainty",
    "tau": "lifetime",
    "lifetime": "lifetime",
    "gfactor": "Lande g",
    "landeg": "Lande g",
    "glande": "Lande g",
}
_LABELS = ("label", "name", "species", "broadener")


def json_values(path: Path, data: bytes) -> Values:
    """The statements of a .def.json file.  Raises LineListError naming the file and what is not understood."""
    try:
        tree = json.loads(data, parse_constant=_refuse_constant)
    except (ValueError, RecursionError) as error:
        reason = excerpt(str(error)) or type(error).__name__
        raise LineListError(problem(path, f"not a definition in JSON ({reason})")) from error
    if not isinstance(tree, dict):
        raise LineListError(
            problem(path, "not a definition in JSON", expected="an object", found=f"a {type(tree).__name__}")
        )
    values = Values(path)
    for key, names in _KEYS.items():
        _take(values, key, _find(tree, names))
    _take_columns(values, tree)
    _take_broadeners(values, tree)
    return values


def _refuse_constant(name: str) -> None:
    raise ValueError(f"{name} is no number")


def _plain(key: str) -> str:
    return re.sub(r"[^a-z0-9]", "", key.lower())


def _objects(tree: Any) -> Iterator[tuple[str, dict[str, Any]]]:
    """All objects of a document with the key under which each stands, the outer ones first."""
    waiting: deque[tuple[str, Any]] = deque([("", tree)])
    while waiting:
        key, one = waiting.popleft()
        if isinstance(one, dict):
            yield key, one
            waiting.extend(one.items())
        elif isinstance(one, list):
            waiting.extend((key, member) for member in one)


def _find(tree: Any, names: tuple[str, ...], kinds: tuple[type, ...] = (str, int, float, bool)) -> Any:
    """The value of the first of `names` (`name`, or `section.name`) that stands in a document; None if there is none.

    Of equal names the outermost counts; a value that is not of one of `kinds` doesn't.
    """
    for name in names:
        section, _, last = name.rpartition(".")
        for where, one in _objects(tree):
            for key, value in one.items():
                if _plain(key) == last and section in ("", _plain(where)) and isinstance(value, kinds):
                    return value
    return None


def _take(values: Values, key: str, value: Any) -> None:
    if value is not None:
        values.state(key, str(int(value)) if isinstance(value, bool) else str(value), str(values.path))


def _take_columns(values: Values, tree: Any) -> None:
    """The columns behind J, from the list of fields; where it names them, it decides which of them there are."""
    fields = _find(tree, _FIELDS, kinds=(list,))
    if fields is None:
        return
    names = [str(one["name"]) for one in fields if isinstance(one, dict) and isinstance(one.get("name"), str)]
    first = [_plain(name) for name in names[:4]]
    if (
        len(names) != len(fields)
        or len(first) < 4
        or any(one not in known for one, known in zip(first, _FIRST_FIELDS, strict=True))
    ):
        found = ", ".join(names[:4]) or "none with a name"
        raise LineListError(
            problem(
                values.path,
                "columns of the .states file not understood",
                expected="ID, E, gtot, J first",
                found=excerpt(found),
            )
        )
    where = str(values.path)
    known = [_FIELD_NAMES.get(_plain(name), checked_word(name, "name of a column", where)) for name in names[4:]]
    if "uncertainty" in known[1:]:
        raise LineListError(
            problem(values.path, "uncertainty in the wrong column of the .states file", expected="directly behind J")
        )
    for key, name in (("uncertainty flag", "uncertainty"), ("lifetime flag", "lifetime"), ("Lande flag", "Lande g")):
        values.scalars[key] = (str(int(name in known)), where)
    values.columns = [name for name in known if name not in _FIELD_NAMES.values()]


def _take_broadeners(values: Values, tree: Any) -> None:
    """Objects that name a file *.broad; the broadener is their label, or the key under which they stand."""
    where = str(values.path)
    for key, one in _objects(tree):
        files = [text for text in one.values() if isinstance(text, str) and re.search(r"\.broad(\.bz2)?$", text)]
        if not files:
            continue
        labels = [value for name, value in one.items() if _plain(name) in _LABELS and isinstance(value, str)]
        label = next((label for label in labels if label not in files), key)
        if len(files) == 1:
            file = checked_word(files[0], "name of a broadener's file", where)
            values.broadeners.append((checked_word(label, "broadener", where), file, where))
        else:
            # One object for all broadeners: {"H2": "... .broad", "He": "... .broad"}.
            for name, text in one.items():
                if text in files:
                    file = checked_word(text, "name of a broadener's file", where)
                    values.broadeners.append((checked_word(name, "broadener", where), file, where))
