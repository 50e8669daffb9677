import numpy as np
import pytest

import opacity
from opacity.errors import InputError
from opacity.k_coefficient.mix import mix
from opacity.k_coefficient.quadrature import QUADRATURES, g_points, points_of_bounds

from . import slow


def two_species(count: int, seed: int = 4) -> list[np.ndarray]:
    """k of two species, (3, 2, count) each, over many decades."""
    random = np.random.default_rng(seed)
    return [np.sort(10.0 ** random.uniform(-28.0, -19.0, (3, 2, count)), axis=-1) for _ in range(2)]


@pytest.mark.nojit
@pytest.mark.parametrize("quadrature", ["matched", "interval-mean"])
def test_all_pairs_in_order_by_the_slow_twin(quadrature: str):
    points = g_points(6, quadrature)
    first, second = two_species(6)
    found = mix([first, second], [0.3, 0.7], points)
    for node in range(3):
        for band in range(2):
            sums = (0.3 * first[node, band][:, None] + 0.7 * second[node, band][None, :]).ravel()
            weights = np.outer(points.weights, points.weights).ravel()
            if quadrature == "matched":
                expected = slow.matched(sums, weights, points.bounds, points.depth)
            else:
                steps = slow.steps_of(sums, weights)
                pairs = zip(points.bounds[:-1], points.bounds[1:], strict=True)
                expected = [slow.mean_over(steps, *pair) for pair in pairs]
            np.testing.assert_allclose(found[node, band], expected, rtol=1e-9)


@pytest.mark.nojit
def test_interpolation_by_the_slow_twin():
    points = g_points(6, "gauss-legendre")
    first, second = two_species(6)
    found = mix([first, second], [0.3, 0.7], points)
    sums = (0.3 * first[1, 1][:, None] + 0.7 * second[1, 1][None, :]).ravel()
    steps = slow.steps_of(sums, np.outer(points.weights, points.weights).ravel())
    places = [0.5 * (a + b) for a, b, _ in steps]
    expected = np.exp(np.interp(points.g, places, np.log([k for _, _, k in steps])))
    np.testing.assert_allclose(found[1, 1], expected, rtol=1e-9)


@pytest.mark.parametrize("quadrature", ["matched", "interval-mean"])
def test_the_mean_of_many_species_is_exact(quadrature: str):
    points = g_points(16, quadrature)
    species = [*two_species(16, 1), *two_species(16, 2)]
    shares = [0.1, 0.2, 0.3, 0.05]
    mixed = mix(species, shares, points)
    expected = sum(share * one @ points.weights for share, one in zip(shares, species, strict=True))
    np.testing.assert_allclose(mixed @ points.weights, expected, rtol=1e-12)
    assert np.all(np.diff(mixed, axis=-1) >= 0.0)


@pytest.mark.nojit
@pytest.mark.parametrize("quadrature", QUADRATURES)
def test_a_species_without_opacity_changes_nothing(quadrature: str):
    points = g_points(6, quadrature)
    first, _ = two_species(6)
    mixed = mix([first, np.zeros_like(first)], [0.5, 0.5], points)
    # Interpolation is between the middles of steps, each of which comes apart into many: it does change k.
    if quadrature in ("matched", "interval-mean"):
        np.testing.assert_allclose(mixed, 0.5 * first, rtol=1e-9)
    assert np.all(mix([np.zeros_like(first)] * 2, [0.5, 0.5], points) == 0.0)
    np.testing.assert_array_equal(mix([first], [1.0], points), first)


@pytest.mark.nojit
def test_a_grey_species_shifts_every_k():
    points = g_points(8)
    first, _ = two_species(8)
    mixed = mix([first, np.full_like(first, 1e-21)], [1.0, 1.0], points)
    np.testing.assert_allclose(mixed, first + 1e-21, rtol=1e-9)


@pytest.mark.nojit
def test_fractions_by_node_and_weights_by_band():
    bounds = np.array([[0.0, 0.2, 0.7, 1.0], [0.0, 0.4, 0.9, 1.0]])
    points = points_of_bounds(bounds)
    first, second = two_species(3)
    shares = np.array([0.1, 0.5, 0.9])
    mixed = mix([first, second], [shares, 1.0 - shares], points)
    for node in range(3):
        for band in range(2):
            one = [first[node, band : band + 1], second[node, band : band + 1]]
            expected = mix(one, [shares[node], 1.0 - shares[node]], points_of_bounds(bounds[band]))
            np.testing.assert_allclose(mixed[node, band], expected[0], rtol=1e-13)


def test_the_order_of_two_species_does_not_matter():
    points = g_points(16)
    first, second = two_species(16)
    one, other = mix([first, second], [0.3, 0.6], points), mix([second, first], [0.6, 0.3], points)
    np.testing.assert_allclose(one, other, rtol=1e-10)


W4 = g_points(4).weights
K4 = np.array([[1.0, 2.0, 3.0, 4.0]])


@pytest.mark.parametrize(
    "k, fractions, weights, expected",
    [
        ({"a": K4}, {"b": 1.0}, W4, "fractions: of other species; expected those of k: a, found b"),
        ({}, {}, W4, "fractions: of other species"),
        ({"a": K4}, {"a": 1.5}, W4, "fractions\\['a'\\]: impossible; expected from 0 to 1"),
        ({"a": K4}, {"a": np.nan}, W4, "fractions\\['a'\\]: impossible"),
        ({"a": K4, "b": K4}, {"a": 0.6, "b": 0.6}, W4, "fractions: too large; expected a sum of at most 1, found 1.2"),
        ({"a": K4[:, ::-1]}, {"a": 1.0}, W4, "k\\['a'\\]: impossible value.*rise with g"),
        ({"a": -K4[:, ::-1]}, {"a": 1.0}, W4, "k\\['a'\\]: impossible value"),
        ({"a": K4[0]}, {"a": 1.0}, W4, "k: of another shape"),
        ({"a": K4[:, :3]}, {"a": 1.0}, W4, "k: of another shape.*n_band, 4"),
        ({"a": K4, "b": np.repeat(K4, 2, axis=0)}, {"a": 0.5, "b": 0.5}, W4, "k: of another shape"),
        ({"a": np.ones((3, 1, 4)), "b": np.ones((2, 1, 4))}, {"a": 0.5, "b": 0.5}, W4, "k: of another shape"),
        ({"a": np.ones((3, 1, 4))}, {"a": [0.5, 0.5]}, W4, r"k and fractions: do not fit.*\(2, 1, 1\)"),
        (K4, {"a": 1.0}, W4, "k: not a dict"),
        ({"a": K4}, {"a": 1.0}, [1.0, 2.0], "weights: impossible"),
    ],
)
def test_impossible_mixtures(k: object, fractions: object, weights: object, expected: str):
    with pytest.raises(InputError, match=expected):
        opacity.mix_k(k, fractions, weights=weights)
