"""Names of isotopologues in the spellings of HITRAN and of data sets in ExoMol format."""

from __future__ import annotations

import pytest

from opacity.molecule.hapi_tables import hapi
from opacity.molecule.isotopologue import isotopologue, isotopologue_of_name, named_isotopologue
from opacity.molecule.names import atoms_of, molecule_of, same_isotopologue


@pytest.mark.parametrize(
    "one, other, same",
    [
        ("12C-16O", "(12C)(16O)", True),
        ("1H2-16O", "H2(16O)", True),
        ("(1H)2(16O)", "H2(16O)", True),
        ("1H-2H-16O", "HD(16O)", True),
        ("12C-16O2", "(12C)(16O)2", True),
        ("16O-12C-18O", "(16O)(12C)(18O)", True),
        ("16O2-18O", "(16O)(16O)(18O)", True),
        ("16O-18O-16O", "(16O)(16O)(18O)", False),
        ("14N-15N-16O", "(15N)(14N)(16O)", False),
        ("1H3_p", "H3+", True),
        ("1H3", "H3+", False),
        ("13C-16O", "(12C)(16O)", False),
        ("1", "1", True),
        ("CO", "(12C)(16O)", False),
        ("12C-", "(12C)", False),
        ("(12C)x(16O)", "(12C)(16O)", False),
        ("", "(12C)(16O)", False),
    ],
)
def test_two_names_of_one_isotopologue(one, other, same):
    assert same_isotopologue(one, other) is same
    assert same_isotopologue(other, one) is same


def test_every_formula_of_hapi_is_understood_and_is_its_own():
    formulas = {row[1] for row in hapi().ISO.values()}
    atoms = [atoms_of(formula) for formula in formulas]
    assert None not in atoms
    assert len(set(atoms)) == len(formulas) > 100


def test_the_mass_follows_from_the_atoms():
    """Masses of a few nuclides (AME 2020, from memory) against those of hapi, for all isotopologues made of them."""
    masses = {"1H": 1.00782503, "2H": 2.01410178, "12C": 12.0, "13C": 13.00335484, "14N": 14.00307400}
    masses |= {"15N": 15.00010890, "16O": 15.99491462, "17O": 16.99913176, "18O": 17.99915961, "32S": 31.97207117}
    judged = 0
    for key in hapi().ISO:
        one = isotopologue(*key)
        atoms, _ = atoms_of(one.formula)
        if {atom for atom, _ in atoms} <= set(masses):
            total = sum(masses[atom] * count for atom, count in atoms)
            assert one.mass == pytest.approx(total, rel=1e-3), one.formula
            judged += 1
    assert judged > 60


def test_a_slug_finds_the_isotopologue():
    assert named_isotopologue("CO", "12C-18O", None) == isotopologue(5, 3)
    assert isotopologue_of_name("(1H)2(16O)", 1.0) == isotopologue(1, 1)
    made = isotopologue_of_name("48Ti-16O", 63.94)
    assert (made.formula, made.molecule_formula, made.mass, made.known) == ("48Ti-16O", "TiO", 63.94, False)


MIXED = [("1H-2H-16O", "HDO"), ("HD(16O)", "HDO"), ("2H2-16O", "D2O"), ("14N-15N-16O", "N2O"), ("1H-35Cl", "HCl")]


@pytest.mark.parametrize(
    "name, molecule",
    [("12C-16O2", "CO2"), ("(1H)2(222Rn)", "H2Rn"), ("H3+", "H3+"), ("1H3_p", "H3+"), ("velline", "velline"), *MIXED],
)
def test_the_molecule_of_a_name(name, molecule):
    assert molecule_of(name) == molecule
