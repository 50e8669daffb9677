"""What a caller of read_lines says of a list: its molecule, one isotopologue, a mass."""

from __future__ import annotations

import numpy as np
import pytest

import opacity
from opacity.errors import InputError, LineListError
from opacity.line_list.records import ReadOptions

RECORD = "  115271.2018  0.0005 -5.0105 2    0.0000  3  28001 101 1           0             \n"


@pytest.fixture
def catalogue(tmp_path):
    path = tmp_path / "co.cat"
    path.write_text(RECORD)
    return path


@pytest.mark.parametrize("name", ["(12C)(16O)", "12C-16O", "1"])
def test_a_catalogue_is_read_with_its_molecule(catalogue, name):
    lines = opacity.read_lines(catalogue, formula="CO", isotopologue=name)
    assert (lines.molecule_formula, [one.formula for one in lines.isotopologues]) == ("CO", ["(12C)(16O)"])
    assert lines.wavenumber[0] == pytest.approx(3.845033, abs=1e-6)  # 115271.2018 MHz
    same = opacity.read_lines(catalogue, options=ReadOptions("CO", isotopologue=name))
    np.testing.assert_array_equal(lines.strength, same.strength)


def test_a_catalogue_of_a_molecule_that_hapi_does_not_know(catalogue):
    lines = opacity.read_lines(catalogue, formula="Vl", isotopologue="44Vl", mass=44.0)
    assert (lines.isotopologues[0].mass, lines.isotopologues[0].known) == (44.0, False)
    with pytest.raises(LineListError, match=r"co.cat: no mass of 44Vl is known; expected .* the molecule's mass"):
        opacity.read_lines(catalogue, formula="Vl", isotopologue="44Vl")


@pytest.mark.parametrize("given, found", [({}, "formula None, iso"), ({"formula": "CO"}, "formula 'CO', iso")])
def test_a_catalogue_without_a_molecule_says_what_to_give(catalogue, given, found):
    with pytest.raises(InputError) as caught:
        opacity.read_lines(catalogue, **given)
    assert str(caught.value) == (
        f"{catalogue}: a catalogue does not name its molecule; expected formula and isotopologue such as"
        f' formula="CO", isotopologue="(12C)(16O)", found {found}topologue None'
    )


@pytest.mark.parametrize(
    "given, line",
    [
        ({"isotopologue": 1}, 'isotopologue: not a name; expected text such as "(12C)(16O)", found 1'),
        ({"formula": ""}, "formula: not a name; expected text such as \"CO\", found ''"),
        ({"mass": "44"}, "mass: not a number; expected a mass above 0 g/mol, found '44'"),
        ({"mass": -1.0}, "mass: impossible; expected a mass above 0 g/mol, found -1.0"),
    ],
)
def test_what_cannot_be_meant_is_refused(samples, given, line):
    with pytest.raises(InputError) as caught:
        opacity.read_lines(samples / "carbon-monoxide.par", **given)
    assert str(caught.value) == line


def test_one_isotopologue_of_a_list_of_records(samples):
    path = samples / "carbon-monoxide.par"
    assert len(opacity.read_lines(path, formula="CO", isotopologue="12C-16O")) == 202
    with pytest.raises(InputError, match=r"isotopologue: the list holds no line of \(13C\)\(16O\)"):
        opacity.read_lines(path, isotopologue="(13C)(16O)")
    with pytest.raises(LineListError, match="expected records of H2O, found CO"):
        opacity.read_lines(path, formula="H2O")


def test_the_chi_factors_are_where_the_help_says():
    assert "opacity.CHI_FACTORS" in opacity.cross_section.__doc__
    assert set(opacity.CHI_FACTORS) == {"Tonkov-1996", "Hartmann-2002"}
