"""Lines of several species as one list: cross-sections add by mole fraction, whatever broadens each species."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from opacity.cross_sections.exact import exact_at
from opacity.cross_sections.mixture import MixedLines, mixed
from opacity.cross_sections.prepare import PreparedLines, prepare
from opacity.cross_sections.source import HeldLines
from opacity.line_list.model import LineList
from opacity.molecule.broadening import BroadenerColumns

from .lists import line_list, random_list

FRACTIONS = (0.3, 0.6)


def species(seed: int, broadener: str, n: int = 60) -> PreparedLines:
    lines = random_list(n, 2000.0, 2020.0, seed)
    columns = lines.broadeners["air"]
    lines = replace(
        lines, broadeners={broadener.lower(): BroadenerColumns(columns.gamma, columns.exponent, columns.shift)}
    )
    return prepared(lines, broadener)


def prepared(lines: LineList, broadener: str = "air") -> PreparedLines:
    return prepare(lines, partition_function="TIPS-2021", abundance="pure", broadeners={broadener: 1.0})


@pytest.mark.parametrize("names", [("air", "air"), ("H2", "He"), ("air", "H2")])
@pytest.mark.parametrize("temperature, pressure", [(296.0, 1.0), (1500.0, 1e-4), (80.0, 30.0)])
@pytest.mark.parametrize("plinth", [False, True])
def test_cross_sections_add(names: tuple[str, str], temperature: float, pressure: float, plinth: bool) -> None:
    first, second = species(1, names[0]), species(2, names[1], 45)
    both = mixed([(first, FRACTIONS[0]), (second, FRACTIONS[1])])
    nu = np.linspace(2001.0, 2019.0, 700)

    def sigma(lines: PreparedLines) -> np.ndarray:
        return exact_at(lines.at(temperature, pressure), nu, 10.0, plinth, None)

    expected = FRACTIONS[0] * sigma(first) + FRACTIONS[1] * sigma(second)
    np.testing.assert_allclose(sigma(both), expected, rtol=1e-12 if not plinth else 1e-9)
    assert np.all(np.diff(both.wavenumber) >= 0.0)
    assert len(both) == len(first) + len(second)


def test_windows_and_counts_are_those_of_the_species() -> None:
    first, second = species(3, "H2"), species(4, "He")
    source = MixedLines(((HeldLines(first), FRACTIONS[0]), (HeldLines(second), FRACTIONS[1])))
    whole, part = source.window(0.0, 1e4), source.window(2005.0, 2010.0)
    inside = (whole.wavenumber >= 2005.0) & (whole.wavenumber <= 2010.0)
    np.testing.assert_array_equal(part.wavenumber, whole.wavenumber[inside])
    np.testing.assert_array_equal(part.strength, whole.strength[inside])
    np.testing.assert_array_equal(part.broadening.gamma, whole.broadening.gamma[:, inside])
    assert (len(source), source.count(2005.0, 2010.0)) == (len(whole), len(part))
    assert sum(len(one) for one in source.stretches()) == len(source)
    assert source.ledger.read == first.ledger.read + second.ledger.read
    np.testing.assert_allclose(sum(one.strength.sum() for one in source.stretches()), whole.strength.sum(), rtol=1e-12)


def test_a_species_without_lines_here_adds_nothing() -> None:
    first, second = species(5, "air"), species(6, "H2")
    source = MixedLines(((HeldLines(first), 0.4), (HeldLines(second.part(slice(0, 0))), 0.5)))
    whole = source.window(0.0, 1e4)
    np.testing.assert_array_equal(whole.strength, 0.4 * first.strength)
    assert source.sample().size == len(first)


def test_the_sample_has_of_each_species_as_many_as_its_share_of_the_lines() -> None:
    """Here 900 lines below 2005 and 100 above 2015; of the few the whole list is at hand, of the many a tenth."""

    class Sampled(HeldLines):
        def sample(self) -> np.ndarray:
            return self.lines.wavenumber[::10]

    many = Sampled(prepared(line_list(np.linspace(2000.0, 2005.0, 900))))
    few = HeldLines(prepared(line_list(np.linspace(2015.0, 2020.0, 100))))
    sample = MixedLines(((many, 0.5), (few, 0.5))).sample()
    assert np.all(np.diff(sample) >= 0.0)
    assert np.count_nonzero(sample > 2010.0) / sample.size == pytest.approx(0.1, abs=0.01)
    assert sample.size == 100
