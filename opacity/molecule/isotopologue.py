"""Isotopologues: codes, formulas, masses and terrestrial abundances, from hapi's tables."""

from __future__ import annotations

from dataclasses import dataclass

from opacity.errors import MoleculeError, problem
from opacity.molecule.hapi_tables import hapi
from opacity.molecule.names import molecule_of, same_isotopologue

LOCAL_CODES = {str(n): n for n in range(1, 10)} | {"0": 10, "A": 11, "B": 12}
"""Isotopologue codes of 160-character records: '1'..'9', then '0', 'A', 'B' for 10, 11, 12 (HITRAN)."""


@dataclass(frozen=True)
class Isotopologue:
    """One isotopologue: HITRAN numbers, formula, mass (g/mol), terrestrial abundance.

    `known` is false for one that a recipe defines because hapi does not know its molecule; its
    abundance is then 1, and its list's strengths hold no abundance.
    """

    molecule: int
    local: int
    formula: str
    molecule_formula: str
    mass: float
    abundance: float
    known: bool = True

    def is_called(self, name: str) -> bool:
        """Whether a name stands for it: local number, formula, or another formula or slug of the same atoms."""
        return name == str(self.local) or same_isotopologue(name, self.formula)


def molecule_is_known(molecule: int) -> bool:
    """Whether hapi's tables hold this HITRAN molecule number."""
    return any(key[0] == molecule for key in hapi().ISO)


def molecule_name(molecule: int) -> str:
    """Formula of a HITRAN molecule number, or the number itself where hapi's tables lack it."""
    formulas = [str(row[4]) for key, row in hapi().ISO.items() if key[0] == molecule]
    return formulas[0] if formulas else f"molecule number {molecule}"


def isotopologue(molecule: int, local: int) -> Isotopologue:
    """The isotopologue with these HITRAN numbers.  Raises MoleculeError if hapi's tables lack it."""
    row = hapi().ISO.get((molecule, local))
    if row is None:
        locals_known = sorted(key[1] for key in hapi().ISO if key[0] == molecule)
        raise MoleculeError(
            problem(
                f"molecule {molecule}, isotopologue {local}",
                "unknown isotopologue",
                expected=f"local numbers {locals_known}" if locals_known else "a molecule number of HITRAN",
            )
        )
    _, formula, abundance, mass, molecule_formula = row
    return Isotopologue(molecule, local, str(formula), str(molecule_formula), float(mass), float(abundance))


def named_isotopologue(molecule_formula: str, name: str, mass: float | None) -> Isotopologue | None:
    """The isotopologue of this name: by formula, slug or local number, or one that hapi does not know, of this mass.

    None where hapi does not know it and no mass (g/mol) is given.
    """
    for one in isotopologues_of(molecule_formula):
        if one.is_called(name):
            return one
    return None if mass is None else Isotopologue(0, 1, name, molecule_formula, mass, 1.0, known=False)


def isotopologues_of(molecule_formula: str) -> list[Isotopologue]:
    """All isotopologues that hapi's tables hold of a molecule, by local number; empty if it is unknown."""
    found = [isotopologue(*key) for key, row in hapi().ISO.items() if row[4] == molecule_formula]
    return sorted(found, key=lambda one: one.local)


def isotopologue_of_name(name: str, mass: float) -> Isotopologue:
    """The isotopologue of a formula or slug, of whatever molecule; one of this mass (g/mol) where hapi lacks it."""
    for key in hapi().ISO:
        one = isotopologue(*key)
        if same_isotopologue(name, one.formula):
            return one
    return Isotopologue(0, 1, name, molecule_of(name), mass, 1.0, known=False)
