"""Spectra and tables of k-coefficients held against each other, on numbers that can be worked out by hand."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from opacity.check.compare import band_edges, spectrum_pair
from opacity.check.comparison import Comparison, NodeComparison, ratio_of
from opacity.check.matching import common_nodes, common_points
from opacity.errors import InputError, TableError


@dataclass(frozen=True)
class Spectra:
    """A table in memory: sigma by node, (n_T, n_P, n_nu), or (n_node, n_nu) along a profile; no interpolation."""

    temperature: np.ndarray
    pressure: np.ndarray
    wavenumber: np.ndarray
    sigma: np.ndarray
    profile: bool = False
    path: Path = Path("memory")

    def at(self, temperature: float, pressure: float) -> np.ndarray:
        t = int(np.argmin(np.abs(self.temperature - temperature)))
        return self.sigma[t] if self.profile else self.sigma[t, int(np.argmin(np.abs(self.pressure - pressure)))]


def spectra(nu, sigma, t=(300.0,), p=(1.0,), **changes) -> Spectra:
    sigma = np.broadcast_to(sigma, (len(t), len(p), len(nu)))
    return Spectra(np.array(t), np.array(p), np.asarray(nu, dtype=float), sigma, **changes)


NU = np.linspace(100.0, 200.0, 101)
FLAT = np.ones(101)


def test_a_planted_factor_is_found_in_its_band_and_at_its_point():
    raised = FLAT.copy()
    raised[(NU >= 140.0) & (NU <= 150.0)] = 1.2
    raised[87] = 5.0
    nodes, worst = spectrum_pair(spectra(NU, raised), spectra(NU, FLAT), 20.0).compare()
    (node,) = nodes
    # 140 to 150 are 11 points, whose cells reach from 139.5 to 150.5; the bands' edges halve the cell of 140.
    assert node.a == pytest.approx([20.0, 20.0 + 0.5 * 0.2, 20.0 + 10.5 * 0.2, 20.0, 20.0 + 4.0])
    assert node.b == pytest.approx([20.0] * 5)
    assert node.ratio == pytest.approx([1.0, 1.005, 1.105, 1.0, 1.2])
    assert node.largest == 4.0
    assert node.median == 0.0
    assert worst[0].wavenumber == 187.0
    assert (worst[0].a, worst[0].b, worst[0].difference) == (5.0, 1.0, 4.0)
    assert [place.difference for place in worst[1:]] == pytest.approx([0.2])


def test_the_worst_point_counts_though_it_lies_in_no_band():
    raised = FLAT.copy()
    raised[3] = 9.0
    _, worst = spectrum_pair(spectra(NU, raised), spectra(NU, FLAT), (150.0, 160.0)).compare()
    assert [place.wavenumber for place in worst] == [103.0]


def test_zeros_are_counted_and_spoil_no_difference():
    a, b = FLAT.copy(), FLAT.copy()
    a[[5, 6]], b[50], a[70], b[70] = 0.0, 0.0, 0.0, 0.0
    (node,), _ = spectrum_pair(spectra(NU, a), spectra(NU, b), None).compare()
    assert (node.only_a, node.only_b) == (1, 2)
    assert node.largest == 0.0
    (node,), worst = spectrum_pair(spectra(NU, 0.0 * FLAT), spectra(NU, 0.0 * FLAT), None).compare()
    assert node.ratio == (None,) * 10
    assert node.largest is None
    assert worst == ()
    (node,), _ = spectrum_pair(spectra(NU, FLAT), spectra(NU, 0.0 * FLAT), None).compare()
    assert node.ratio == (math.inf,) * 10


def test_what_is_beyond_counts_ratios_and_not_rounding():
    def comparison(*ratios: float | None) -> Comparison:
        node = NodeComparison(300.0, 1.0, (1.0,), (1.0,), ratios)
        return Comparison("a", "b", "cross-sections", "", "", (), ((1.0, 2.0),), (node,))

    assert comparison(1.01, 0.99, None).beyond(0.01) == 0
    assert comparison(1.0101, 0.99).beyond(0.01) == 1
    assert comparison(math.inf, 0.0, 1.0).beyond(0.5) == 2
    assert comparison(None).beyond(1e-9) == 0
    assert [ratio_of(1.0, 2.0), ratio_of(1.0, 0.0), ratio_of(0.0, 0.0)] == [0.5, math.inf, None]


@pytest.mark.parametrize(
    "bands, expected",
    [
        (None, np.linspace(100.0, 200.0, 11)),
        (25.0, [100.0, 125.0, 150.0, 175.0, 200.0]),
        (40.0, [100.0, 140.0, 180.0, 200.0]),
        (500.0, [100.0, 200.0]),
        ((50.0, 110.0, 150.5, 300.0), [110.0, 150.5]),
    ],
)
def test_edges_of_bands(bands, expected):
    edges, left_out = band_edges(NU, bands)
    np.testing.assert_allclose(edges, expected, rtol=1e-14)
    assert left_out == (2 if isinstance(bands, tuple) else 0)


@pytest.mark.parametrize(
    "bands, words",
    [
        ((300.0, 400.0), "none within the common range"),
        ((150.0, 140.0), "rising"),
        (1e-9, "too many"),
    ],
)
def test_impossible_bands_are_refused(bands, words):
    with pytest.raises(InputError, match=words):
        band_edges(NU, bands)


def test_equal_grids_and_a_finer_one_are_compared_at_the_points_of_both():
    same = common_points("p", NU, NU * (1.0 + 1e-13))
    assert same.words == "the same 101 points"
    fine = np.linspace(150.0, 300.0, 1501)
    found = common_points("p", NU, fine)
    np.testing.assert_array_equal(found.wavenumber, NU[50:])
    assert found.words == "51 points that both have (A has 51 and B 501 in the overlap)"
    a, b = found.pair(NU**2, fine**2)
    np.testing.assert_allclose(a, b, rtol=1e-12)
    # The other way round: B has every tenth point of A.
    turned = common_points("p", fine, NU)
    np.testing.assert_allclose(turned.wavenumber, NU[50:], rtol=1e-12)
    a, b = turned.pair(fine**2, NU**2)
    np.testing.assert_allclose(a, b, rtol=1e-12)


def test_other_grids_are_interpolated_in_the_overlap_and_that_is_said():
    other = np.linspace(120.3, 180.7, 77)
    found = common_points("p", NU, other)
    assert "B is interpolated linearly" in found.words
    np.testing.assert_array_equal(found.wavenumber, NU[21:81])
    a, b = found.pair(3.0 * NU, 3.0 * other)
    np.testing.assert_allclose(a, b, rtol=1e-13)
    # A few points that coincide by chance are not what the two have in common.
    third = np.linspace(100.0, 200.0, 101 * 3 + 2)
    assert "B is interpolated" in common_points("p", NU, third).words


@pytest.mark.parametrize("other", [NU + 500.0, np.array([150.0, 150.5]), np.array([199.5, 300.0])])
def test_without_overlap_it_is_refused(other):
    with pytest.raises(TableError, match=r"no overlap of the wavenumbers; .* found A 100 to 200 cm-1, B "):
        common_points("p", NU, other)


def test_common_nodes_are_those_of_both():
    a = spectra(NU, FLAT, (300.0, 500.0, 700.0), (0.1, 1.0))
    assert common_nodes(a, a).words == "all nodes of both"
    found = common_nodes(a, spectra(NU, FLAT, (500.0 * (1.0 + 1e-14), 900.0), (1.0, 2.0)))
    assert found.nodes == ((500.0, 1.0),)
    assert found.words == "1 common node, without 5 of A and 3 of B"
    assert found.interpolated is None
    one = spectra(NU, FLAT, (700.0,), (0.1,), profile=True)
    assert common_nodes(a, one).words == "1 common node, without 5 of A"


def test_without_a_common_node_one_is_interpolated_at_the_others_and_that_is_said():
    a = spectra(NU, FLAT, (350.0, 950.0), (0.3, 3.0))
    b = spectra(NU, FLAT, (300.0, 500.0), (0.1, 1.0))
    found = common_nodes(a, b)
    assert found.nodes == ((350.0, 0.3),)
    assert found.interpolated == "B"
    assert found.words == "no common node: B interpolated at 1 node of A in its range"
    one = Spectra(np.array([400.0]), np.array([0.5]), NU, FLAT[None, :], profile=True)
    found = common_nodes(b, one)
    assert (found.nodes, found.interpolated) == (((400.0, 0.5),), "A")
    with pytest.raises(TableError, match="no node in common, and none of the one within the grid of the other"):
        common_nodes(spectra(NU, FLAT, (1000.0,)), b)
    with pytest.raises(TableError, match="no node in common"):
        common_nodes(Spectra(np.array([401.0]), np.array([0.5]), NU, FLAT[None, :], profile=True), one)
