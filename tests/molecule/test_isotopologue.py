"""Isotopologues by HITRAN's numbers: formula, mass and abundance."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from opacity.errors import MoleculeError
from opacity.molecule.isotopologue import LOCAL_CODES, isotopologue, isotopologues_of, molecule_is_known

ROOT = Path(__file__).parents[2]


@pytest.mark.parametrize(
    ("key", "formula", "molecule", "mass", "abundance"),
    [
        # Masses from those of the atoms: 1H 1.00782503, 12C 12, 13C 13.00335484, 16O 15.99491462, 18O 17.99915961
        # (AME, from memory); abundances of HITRAN (from memory).
        ((1, 1), "H2(16O)", "H2O", 2 * 1.00782503 + 15.99491462, 0.997317),
        ((2, 1), "(12C)(16O)2", "CO2", 12.0 + 2 * 15.99491462, 0.984204),
        ((5, 1), "(12C)(16O)", "CO", 12.0 + 15.99491462, 0.986544),
        ((5, 2), "(13C)(16O)", "CO", 13.00335484 + 15.99491462, 0.011084),
        ((5, 3), "(12C)(18O)", "CO", 12.0 + 17.99915961, 0.0019782),
    ],
)
def test_mass_and_abundance(key, formula, molecule, mass, abundance):
    one = isotopologue(*key)
    assert (one.molecule, one.local) == key
    assert (one.formula, one.molecule_formula, one.known) == (formula, molecule, True)
    assert one.mass == pytest.approx(mass, rel=1e-6)
    assert one.abundance == pytest.approx(abundance, rel=1e-4)


def test_carbon_dioxide_has_twelve_and_all_codes_lead_to_one():
    found = isotopologues_of("CO2")
    assert [one.local for one in found] == list(range(1, 13))
    assert sorted(LOCAL_CODES.values()) == list(range(1, 13))
    assert (LOCAL_CODES["9"], LOCAL_CODES["0"], LOCAL_CODES["A"], LOCAL_CODES["B"]) == (9, 10, 11, 12)
    assert len({one.formula for one in found}) == 12


@pytest.mark.parametrize("formula", ["H2O", "CO2", "CO", "CH4", "NH3"])
def test_abundances_of_a_molecule_add_up_to_nearly_1(formula):
    # The tables round them to six digits.
    assert 0.999 < sum(one.abundance for one in isotopologues_of(formula)) < 1.0 + 1e-5


def test_what_is_not_known():
    assert molecule_is_known(5)
    assert not molecule_is_known(999)
    assert isotopologues_of("XY") == []
    with pytest.raises(
        MoleculeError,
        match=r"^molecule 5, isotopologue 7: unknown isotopologue; expected local numbers \[1, 2, 3, 4, 5, 6\]$",
    ):
        isotopologue(5, 7)
    with pytest.raises(MoleculeError, match=r"^molecule 999, isotopologue 1: .* expected a molecule number of HITRAN$"):
        isotopologue(999, 1)


def test_loading_hapi_leaves_the_caller_s_warnings_alone():
    """hapi adds a filter of its own when it is imported, which would undo what the caller has chosen."""
    code = """
import warnings
warnings.simplefilter("error")
before = list(warnings.filters)
from opacity.molecule.hapi_tables import hapi
assert hapi().__name__ == "hapi"
assert warnings.filters == before, warnings.filters
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, check=False)
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")
