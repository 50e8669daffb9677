"""Partition functions of a table beside the editions of TIPS."""

from __future__ import annotations

import numpy as np
import pytest

from opacity.check.partition_values import partition_values
from opacity.molecule.isotopologue import isotopologue_of_name
from opacity.molecule.partition_function import from_file, tips

CO = isotopologue_of_name("(12C)(16O)", 28.0)
RARE = isotopologue_of_name("(13C)(16O)", 29.0)
TEMPERATURE = np.array([200.0, 296.0, 1000.0])


@pytest.fixture
def tilted(tmp_path):
    """A file whose Q(T) is that of TIPS-2021 times 2 (T/296)^0.01: at 1000 K the ratio to 296 K is 1.2 % higher."""
    q, path = tips("TIPS-2021", CO), tmp_path / "co.pf"
    rows = ((t, 2.0 * q(t) * (t / 296.0) ** 0.01) for t in np.arange(100.0, 1500.0, 10.0))
    path.write_text("".join(f"{t:.1f} {value:.8e}\n" for t, value in rows), encoding="utf-8")
    return from_file(path)


def test_a_file_is_held_against_both_editions(tilted):
    found = partition_values([CO], [1.0], [tilted], TEMPERATURE)
    assert [one.source for one in found] == ["TIPS-2021", "TIPS-2025"]
    for one in found:
        assert one.largest == (pytest.approx((296.0 / 1000.0) ** 0.01 - 1.0, rel=1e-3), 1000.0)
        assert abs(one.difference[np.argmin(np.abs(one.temperature - 296.0))]) < 1e-4


def test_an_edition_is_held_against_the_other_and_not_against_itself():
    found = partition_values([CO], [1.0], [tips("TIPS-2021", CO)], TEMPERATURE)
    assert [one.source for one in found] == ["TIPS-2025"]
    assert abs(found[0].largest[0]) < 1e-5  # as measured: editions of CO within 9e-6 of levels


def test_the_most_abundant_come_first_and_an_unknown_molecule_has_nothing_to_be_held_against(tilted):
    both = [tips("TIPS-2025", one) for one in (RARE, CO)]
    found = partition_values([RARE, CO], [0.01, 0.99], both, TEMPERATURE)
    assert [one.isotopologue for one in found] == ["(12C)(16O)", "(13C)(16O)"]
    invented = isotopologue_of_name("Vl", 24.0)
    assert partition_values([invented], [1.0], [tilted], TEMPERATURE) == ()


def test_outside_of_either_range_nothing_is_said(tilted):
    found = partition_values([CO], [1.0], [tilted], np.array([50.0, 3000.0]))[0]
    known = found.temperature[np.isfinite(found.difference)]
    assert (known.min() >= 100.0, known.max() <= 1490.0) == (True, True)
    assert partition_values([CO], [1.0], [tilted], np.array([2000.0, 3000.0])) == ()
