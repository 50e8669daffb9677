"""Names of isotopologues: formulas such as (12C)(16O)2, H2(16O), (1H)2(16O), and slugs such as 12C-16O2, 1H2-16O.

H and D without a mass number are 1H and 2H, as in HITRAN's formulas.  A slug ends in _p for a positive ion (the slugs
of data sets in ExoMol format; that ending is from memory).
"""

from __future__ import annotations

import re
from itertools import groupby

Atoms = tuple[tuple[str, int], ...]

_IN_FORMULA = re.compile(r"(?:\((?P<bracket>[0-9]{1,3}[A-Z][a-z]?)\)|(?P<hydrogen>[HD]))(?P<count>[0-9]{0,3})")
_IN_SLUG = re.compile(r"(?P<atom>[0-9]{1,3}[A-Z][a-z]?)(?P<count>[0-9]{0,3})")
_HYDROGEN = {"H": "1H", "D": "2H"}
_CHARGES = {"+": 1, "_p": 1, "-": -1, "_m": -1}


def atoms_of(name: str) -> tuple[Atoms, int] | None:
    """The atoms of a formula or slug in order, each run as (atom, number), and the charge; None for another text.

    The order is kept: (14N)(15N)(16O) and (15N)(14N)(16O) are not the same.
    """
    charge = 0
    for ending, value in _CHARGES.items():
        if name.endswith(ending):
            name, charge = name.removesuffix(ending), value
            break
    found = _of_slug(name) or _of_formula(name)
    if not found:
        return None
    runs = [(atom, [count for _, count in run]) for atom, run in groupby(found, key=lambda one: one[0])]
    return tuple((atom, sum(counts)) for atom, counts in runs), charge


def _of_slug(name: str) -> list[tuple[str, int]]:
    parts = [_IN_SLUG.fullmatch(part) for part in name.split("-")]
    return [(part["atom"], int(part["count"] or 1)) for part in parts if part] if all(parts) else []


def _of_formula(name: str) -> list[tuple[str, int]]:
    found, end = [], 0
    for part in _IN_FORMULA.finditer(name):
        if part.start() != end:
            return []
        found.append((part["bracket"] or _HYDROGEN[part["hydrogen"]], int(part["count"] or 1)))
        end = part.end()
    return found if end == len(name) else []


def same_isotopologue(one: str, other: str) -> bool:
    """Whether two names are of one isotopologue: the same text, or the same atoms in the same order."""
    return one == other or (atoms_of(one) is not None and atoms_of(one) == atoms_of(other))


def molecule_of(name: str) -> str:
    """The molecule's formula without mass numbers (2H is D), such as CO2; the name itself where it is none."""
    found = atoms_of(name)
    if found is None:
        return name
    atoms, charge = found
    plain = [("D" if atom == "2H" else atom.lstrip("0123456789"), count) for atom, count in atoms]
    runs = [(atom, sum(count for _, count in run)) for atom, run in groupby(plain, key=lambda one: one[0])]
    text = "".join(f"{atom}{count if count > 1 else ''}" for atom, count in runs)
    return text + {0: "", 1: "+", -1: "-"}[charge]
