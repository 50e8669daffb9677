"""Published band strengths against the lines of a list: what agrees, what is too much, and what cannot be judged."""

from __future__ import annotations

import os
import re
import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from opacity.check.list_bands import LESS, MORE, BandSums, ListBand, Wanted, bands_of
from opacity.check.result import AGREES, CANNOT_JUDGE
from opacity.kernels.line_strength import strength_ratio
from opacity.line_list.model import LineList, StrengthBasis
from opacity.line_list.read import read_lines
from opacity.molecule.isotopologue import isotopologue, isotopologues_of
from opacity.molecule.partition_function import PartitionFunction, tips
from opacity.molecule.published_bands import (
    FROM_MEMORY,
    PUBLISHED,
    STATUSES,
    PublishedBand,
    all_published_bands,
    published_bands,
)
from opacity.pipeline.list_check import check_records
from opacity.recipe.load import load_recipe
from opacity.units import BAND_STRENGTH_UNITS

ROOT = Path(__file__).parents[2]
SAMPLE = ROOT / "data-samples" / "carbon-monoxide.par"
FUNDAMENTAL = published_bands("CO")[0]
NATURAL = replace(FUNDAMENTAL, isotopologue=None, name="natural")


@pytest.fixture(scope="module")
def lines() -> LineList:
    return read_lines(SAMPLE)


def judged(lines: LineList, *bands: PublishedBand, partition=None, parts: int = 1) -> list[ListBand]:
    sums = BandSums([Wanted(band) for band in bands], partition)
    for part in np.array_split(np.arange(len(lines)), parts):
        sums.add(lines.select(part))
    return sums.results()


def scaled(lines: LineList, factor: float) -> LineList:
    return replace(lines, strength=lines.strength * factor)


# The sample's dipole comes from this very band, so that only the bookkeeping is judged here, not the sample.
@pytest.mark.parametrize(
    "factor, verdict",
    [(1.0, AGREES), (1.0139, AGREES), (1.0142, MORE), (2.0, MORE), (0.9861, AGREES), (0.9857, LESS), (0.5, LESS)],
)
def test_a_band_agrees_within_twice_its_uncertainty(lines, factor, verdict):
    (found,) = judged(scaled(lines, factor), FUNDAMENTAL)
    assert found.verdict == verdict
    assert found.difference == pytest.approx(factor - 1.0, abs=1e-4)
    assert found.deviations == pytest.approx((factor - 1.0) / 0.007, abs=0.02)
    assert f"{100.0 * found.difference:+.2f} % ({abs(found.deviations):.1f} uncertainties)" in found.detail
    assert found.detail.endswith(FUNDAMENTAL.source)


def test_parts_of_a_list_add_up(lines):
    (whole,), (parts,) = judged(lines, FUNDAMENTAL), judged(lines, FUNDAMENTAL, parts=17)
    assert parts.found == pytest.approx(whole.found, rel=1e-12)
    assert replace(parts, found=0.0, difference=0.0, deviations=0.0) == replace(
        whole, found=0.0, difference=0.0, deviations=0.0
    )


def test_the_sum_is_that_of_the_lines_in_the_range(lines):
    band = replace(FUNDAMENTAL, range=(2100.0, 2150.0))
    inside = (lines.wavenumber >= 2100.0) & (lines.wavenumber <= 2150.0)
    (found,) = judged(lines, band)
    assert found.found == pytest.approx(lines.strength[inside].sum() / isotopologue(5, 1).abundance, rel=1e-12)


def test_a_list_that_ends_inside_the_band_is_not_judged_unless_it_is_too_much_already(lines):
    half = lines.select(lines.wavenumber < 2143.0)
    (found,) = judged(half, FUNDAMENTAL)
    assert found.verdict == CANNOT_JUDGE
    assert found.detail.startswith("the list does not cover the range: its lines of (12C)(16O) reach from 1886.46 to ")
    assert "the band 2000 to 2250 cm-1; in it " in found.detail
    assert -0.7 < found.difference < -0.3
    (found,) = judged(scaled(half, 4.0), FUNDAMENTAL)
    assert found.verdict == MORE
    elsewhere = lines.select(lines.wavenumber < 1990.0)
    (found,) = judged(elsewhere, FUNDAMENTAL)
    assert (found.verdict, found.found) == (CANNOT_JUDGE, 0.0)
    assert "in it" not in found.detail


def test_isotopologues_count_with_their_natural_abundance(lines):
    """The second half of the strength given to (13C)(16O), whose strengths hold its own abundance then."""
    heavy = isotopologue(5, 2)
    main = lines.isotopologues[0]
    both = replace(
        lines,
        isotopologues=(main, heavy),
        basis=(*lines.basis, StrengthBasis(296.0, True, heavy.abundance)),
        isotopologue=(np.arange(len(lines)) % 2).astype(np.int16),
    )
    odd = both.isotopologue == 1
    inside = (lines.wavenumber >= 2000.0) & (lines.wavenumber <= 2250.0)
    of_main, natural, of_heavy = judged(both, FUNDAMENTAL, NATURAL, replace(FUNDAMENTAL, isotopologue=heavy.formula))
    assert of_main.found == pytest.approx(lines.strength[inside & ~odd].sum() / main.abundance)
    assert of_heavy.found == pytest.approx(lines.strength[inside & odd].sum() / heavy.abundance)
    assert natural.found == pytest.approx(lines.strength[inside].sum())
    (absent,) = judged(lines, replace(FUNDAMENTAL, isotopologue=heavy.formula))
    assert (absent.verdict, absent.detail[:38]) == (CANNOT_JUDGE, "the list holds no line of (13C)(16O); ")


def test_isotopologues_that_a_list_lacks_do_not_make_it_less(lines):
    (found,) = judged(scaled(lines, 1.0), replace(NATURAL, uncertainty=0.005))
    assert found.difference == pytest.approx(-0.01346, abs=1e-4)  # beyond twice 0.5 %, but 98.65 % are there
    assert found.verdict == AGREES
    assert "the list's isotopologues make up 98.65 % of the mixture" in found.detail
    (found,) = judged(scaled(lines, 0.98), replace(NATURAL, uncertainty=0.005))
    assert found.verdict == LESS


@pytest.mark.parametrize("temperature", [296.0, 300.0, 250.0])
def test_strengths_of_any_basis_are_brought_to_the_bands_temperature(lines, temperature):
    """The same lines as catalogues have them (300 K, no abundance), and as A coefficients give them (no Q)."""
    one = lines.isotopologues[0]
    q = tips("TIPS-2021", one)
    band = replace(FUNDAMENTAL, temperature=temperature)

    def at(basis_temperature: float, q_ratio: float, holds: bool) -> LineList:
        ratio = strength_ratio(lines.wavenumber, lines.lower_energy, basis_temperature, np.full(len(lines), q_ratio))
        strength = lines.strength / one.abundance * ratio
        return replace(lines, strength=strength, basis=(StrengthBasis(basis_temperature, holds, 1.0),))

    (records,) = judged(lines, band)
    (catalogue,) = judged(at(300.0, q(296.0) / q(300.0), True), band)
    (coefficients,) = judged(at(296.0, q(296.0), False), band)
    assert catalogue.found == pytest.approx(records.found, rel=1e-12)
    assert coefficients.found == pytest.approx(records.found, rel=1e-12)
    # The strength of a fundamental hardly depends on temperature: 1 - exp(-c2 nu/T) and the states above.
    assert records.difference == pytest.approx(0.0, abs=2e-4)


def test_a_lists_own_partition_function_goes_first(lines):
    one = lines.isotopologues[0]
    q = tips("TIPS-2021", one)
    strength = lines.strength * q(296.0)

    class Doubled(PartitionFunction):
        def __call__(self, temperature: float) -> float:
            return 2.0 * q(temperature)

    bare = replace(lines, strength=strength, basis=(StrengthBasis(296.0, False, one.abundance),))
    (plain,) = judged(bare, FUNDAMENTAL)
    (own,) = judged(bare, FUNDAMENTAL, partition={one.formula: Doubled("made up", 100.0, 1000.0)})
    (cold,) = judged(bare, FUNDAMENTAL, partition={one.formula: Doubled("made up", 500.0, 1000.0)})
    assert plain.verdict == AGREES
    assert own.found == pytest.approx(0.5 * plain.found)
    assert cold.found == pytest.approx(plain.found)


def test_without_a_partition_function_a_band_is_not_judged(lines):
    stranger = replace(lines.isotopologues[0], molecule=999, formula="(14C)(16O)", known=False)
    bare = replace(lines, isotopologues=(stranger,), basis=(StrengthBasis(296.0, False, 1.0),))
    (found,) = judged(bare, NATURAL)
    assert found.verdict == CANNOT_JUDGE
    assert "TIPS-2021 has no values for (14C)(16O)" in found.detail


@pytest.mark.parametrize("factor, verdict", [(0.6, LESS), (0.7, AGREES), (1.45, AGREES), (1.55, MORE)])
def test_rows_from_memory_see_factors_only(lines, factor, verdict):
    for change in ({"status": FROM_MEMORY}, {"uncertainty": None}):
        (found,) = judged(scaled(lines, factor), replace(FUNDAMENTAL, **change))
        assert found.verdict == verdict
        assert "uncertainties" not in found.detail
        assert " %" not in found.detail
        assert f", {found.found / found.published:.2g} times as much; " in found.detail
        assert found.deviations is None
        what = "a value from memory" if "status" in change else "a value without uncertainty"
        assert found.words == (f"within a factor 1.5 of {what}" if verdict == AGREES else verdict)


def test_a_list_with_a_gap_inside_the_band_is_not_called_less(lines):
    nu = lines.wavenumber
    (found,) = judged(lines.select((nu < 2160.0) | (nu > 2215.0)), FUNDAMENTAL, parts=3)
    assert found.verdict == CANNOT_JUDGE
    low, high = re.match(r"the list has no lines between (\S+) and (\S+) cm-1; in the range ", found.detail).groups()
    assert float(low) == pytest.approx(2160.0, abs=8.0)
    assert float(high) == pytest.approx(2215.0, abs=8.0)
    (found,) = judged(scaled(lines, 0.5).select((nu < 2160.0) | (nu > 2170.0)), FUNDAMENTAL)
    assert found.verdict == LESS


# cm/molecule at which the sources arrive themselves, or that were worked out apart from this program.
@pytest.mark.parametrize(
    "molecule, name, expected",
    [
        ("HC3N", "nu1", 1.006e-17),  # 249.4 cm-2 atm-1 at 296 K; the public code file gives both
        ("HCl", "1-0", 5.314e-18),  # 130 cm-2 atm-1 at 300 K
        ("H2CO", "nu2", 1.262e-17),  # 76 km/mol
        ("CO", "1-0", 1.013e-17),
        ("HCN", "105-000", 2.773e-23),  # 16.7 cm/mol
        ("CH4", "2nu4-nu4", 3.751e-20),  # 0.93 cm-2 atm-1 at 296 K
    ],
)
def test_units_are_converted(molecule, name, expected):
    (band,) = (one for one in published_bands(molecule) if one.name == name)
    assert band.cm_per_molecule == pytest.approx(expected, rel=4e-4)


def test_every_row_can_be_used_and_names_its_source():
    bands = all_published_bands()
    assert len({(one.molecule, one.isotopologue, one.name) for one in bands}) == len(bands) > 20
    for one in bands:
        assert isotopologues_of(one.molecule)
        assert one.isotopologue in (None, *(iso.formula for iso in isotopologues_of(one.molecule)))
        assert one.range is None or 0.0 < one.range[0] < one.range[1] < 1e4
        assert one.unit in BAND_STRENGTH_UNITS
        assert 1e-23 < one.cm_per_molecule < 1e-15
        assert one.uncertainty is None or 0.0 < one.uncertainty < 0.2
        assert one.status in STATUSES
        assert (one.status == FROM_MEMORY) == (one.source == "none: from memory")
    assert sum(one.status == PUBLISHED for one in bands) >= 17


def test_a_band_that_no_range_holds_alone_is_not_judged(lines):
    (found,) = judged(lines, replace(FUNDAMENTAL, range=None))
    assert (found.verdict, found.found) == (CANNOT_JUDGE, None)
    assert found.detail.startswith("no range holds it alone: other bands overlap it; 296 K; Zou & Varanasi 2002")


def test_the_values_are_shipped():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())
    (name,) = (one for one in project["tool"]["setuptools"]["package-data"]["opacity"] if one.endswith(".csv"))
    assert (ROOT / "opacity" / name).is_file()


@pytest.mark.parametrize(
    "of, verdict, difference", [("natural", AGREES, -0.01346), ("(12C)(16O)", AGREES, 0.0), ("(13C)(16O)", None, None)]
)
def test_a_recipes_band_may_be_of_one_isotopologue_or_the_natural_mixture(write_recipe, lines, of, verdict, difference):
    """The list holds (12C)(16O) alone, 98.65 % of the natural mixture; the recipe's own mixture does not matter."""
    band = RECIPE_BAND.replace("range =", f'isotopologue = "{of}"\nrange =')
    recipe = load_recipe(write_recipe("co", ('abundance = "pure"', 'abundance = { "(12C)(16O)" = 0.5 }'), extra=band))
    sums = BandSums(bands_of("CO", recipe))
    sums.add(lines)
    own = sums.results()[-1]
    assert own.verdict == (verdict or CANNOT_JUDGE)
    assert own.difference == (None if difference is None else pytest.approx(difference, abs=1e-4))


@pytest.mark.parametrize(
    "change, status", [(("0.007", '"unknown"'), "value without"), (("made up", "from memory"), "")]
)
def test_a_recipes_band_from_memory_or_without_uncertainty_sees_factors_only(write_recipe, lines, change, status):
    recipe = load_recipe(write_recipe(extra=RECIPE_BAND.replace(*change)))
    sums = BandSums(bands_of("CO", recipe))
    sums.add(scaled(lines, 1.4))
    own = sums.results()[-1]
    assert own.words.startswith("within a factor 1.5 of a " + (status or "value from memory"))
    assert own.deviations is None


RECIPE_BAND = """
[[band_strength]]
name = "own"
range = [2000.0, 2250.0]
strength = 1.013e-17
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.007
source = "made up"
"""


@pytest.mark.parametrize(
    "abundance, verdict, difference",
    [('"pure"', AGREES, 0.0), ('"terrestrial"', AGREES, -0.01346), ('{ "(12C)(16O)" = 0.5 }', LESS, -0.5)],
)
def test_a_recipes_bands_are_of_its_own_mixture(write_recipe, lines, abundance, verdict, difference):
    recipe = load_recipe(write_recipe("co", ('abundance = "pure"', f"abundance = {abundance}"), extra=RECIPE_BAND))
    sums = BandSums(bands_of("CO", recipe))
    sums.add(lines)
    own = sums.results()[-1]
    assert own.name == "own (recipe)"
    assert own.difference == pytest.approx(difference, abs=1e-4)
    assert own.verdict == verdict


FOLDER = os.environ.get("OPACITY_REAL_LINES")


@pytest.mark.real_lines
@pytest.mark.skipif(not FOLDER, reason="OPACITY_REAL_LINES names no folder of real lists")
def test_real_lists_agree_with_published_bands():
    """HITRAN's CO 1-0 (Gordon et al. 2022) against Zou & Varanasi 2002; H2O against a value from memory."""
    found = {one.name: one for one in check_records(Path(FOLDER or "") / "CO.par").bands}
    assert found["1-0"].verdict == AGREES
    assert found["1-0"].found == pytest.approx(1.0115e-17, rel=1e-4)
    assert abs(found["1-0"].deviations) < 0.5
    assert found["2-0"].verdict == CANNOT_JUDGE
    # The extract is of an edition before the newest measurements (PTB, 0.4 %), 1.3 to 1.9 % above it.
    for line, difference in ((8, -0.0130), (9, -0.0195), (10, -0.0185)):
        assert found[f"1-0 line R({line})"].verdict == LESS
        assert found[f"1-0 line R({line})"].difference == pytest.approx(difference, abs=2e-4)
    found = {one.name: one for one in check_records(Path(FOLDER or "") / "H2O.par").bands}
    assert {name: one.verdict for name, one in found.items()} == {
        "nu2": CANNOT_JUDGE,
        "2.7 um region": AGREES,
        "rotation": CANNOT_JUDGE,
    }
