"""The .def file: one `value # comment` a line, known by the wording of the comment.

Wording and order of most records as in `.def` files quoted in public texts; from memory are the records of
uncertainties, auxiliary columns and single broadeners.  Records that are not known here are passed over.
"""

from __future__ import annotations

import re
from pathlib import Path

from opacity.errors import LineListError, excerpt, problem
from opacity.line_list.exomol.definition_values import Values, checked_word

_RECORDS = {
    "isotopologue formula": r"iso-? ?formula",
    "isotopologue slug": r"iso-? ?slug",
    "dataset name": r"(isotopologue )?dataset name",
    "version": r"version",
    "mass": r"(isotopologue )?mass",
    "maximum temperature": r"max(imum|\.)? temperature",
    "number of broadeners": r"(no\.?|number) of pressure broadeners",
    "lifetime flag": r"life ?times? avail",
    "Lande flag": r"land[eé]\W",
    "uncertainty flag": r"uncertaint(y|ies) avail",
    "number of states": r"(no\.?|number) of states",
    "number of transitions": r"total (no\.?|number) of transitions",
    "number of transition files": r"(no\.?|number) of (transitions?|\.trans) files",
    "maximum wavenumber": r"max(imum|\.)? wavenumber",
    "default half-width": r"default value of lorentzian half-width",
    "default exponent": r"default value of temperature exponent",
}
_PATTERNS = {key: re.compile(pattern, re.IGNORECASE) for key, pattern in _RECORDS.items()}
_COLUMN = re.compile(r"(quantum label|auxiliary (title|label))", re.IGNORECASE)
_BROADENER = re.compile(r"label (for|of) (a )?particular broadener", re.IGNORECASE)
_BROADENER_FILE = re.compile(r"file ?name (for|of) (a )?particular broadener", re.IGNORECASE)


def text_values(path: Path, data: bytes) -> Values:
    """The statements of a .def file.  Raises LineListError naming file and line."""
    values = Values(path)
    lines = data.decode("utf-8", "replace").replace("\r\n", "\n").split("\n")
    started = False
    broadener: str | None = None
    for number, line in enumerate(lines, start=1):
        if not line.strip():
            continue
        where = f"{path}:{number}"
        value, mark, comment = (part.strip() for part in line.partition("#"))
        if not mark:
            raise LineListError(
                problem(where, "not a record of a definition", expected="value # comment", found=f'"{excerpt(line)}"')
            )
        if not started:
            if not value.upper().startswith("EXOMOL"):
                raise LineListError(
                    problem(where, "not a definition", expected='"EXOMOL.def # ID"', found=f'"{excerpt(line)}"')
                )
            started = True
        elif _COLUMN.match(comment):
            values.columns.append(checked_word(value, "name of a column", where))
        elif _BROADENER.match(comment):
            _refuse_unpaired(broadener, where)
            broadener = checked_word(value, "broadener", where)
        elif _BROADENER_FILE.match(comment):
            if broadener is None:
                raise LineListError(
                    problem(where, "a broadener's file without its broadener", found=f'"{excerpt(value)}"')
                )
            values.broadeners.append((broadener, checked_word(value, "name of a broadener's file", where), where))
            broadener = None
        else:
            for key, pattern in _PATTERNS.items():
                if pattern.match(comment):
                    values.state(key, value, where)
                    break
    if not started:
        raise LineListError(problem(path, "holds no record", expected="lines of value # comment"))
    _refuse_unpaired(broadener, str(path))
    return values


def _refuse_unpaired(broadener: str | None, where: str) -> None:
    if broadener is not None:
        raise LineListError(problem(where, f"broadener {broadener} without the name of its file"))
