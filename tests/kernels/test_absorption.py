import math

import numpy as np
import pytest

from opacity.kernels.absorption import absorb, add_transmission, column_rows, transmission_rows, weighted_sum


def depths() -> np.ndarray:
    """Depths over all magnitudes, and where the whole number of the exponent changes."""
    random = np.random.default_rng(1)
    edges = (np.arange(0, 1010) + 0.5) * math.log(2.0)
    few = np.concatenate([[0.0], np.geomspace(1e-300, 700.0, 700), random.uniform(0.0, 700.0, 300)])
    return np.concatenate([few, edges[edges < 700.0] * (1 - 1e-12), edges[edges < 700.0] * (1 + 1e-12)])


@pytest.mark.nojit
def test_exponential_to_1e_14():
    for depth in depths():
        out = np.zeros(1)
        add_transmission(np.array([depth]), np.ones(1), np.ones(1), out)
        assert abs(out[0] - math.exp(-depth)) <= 1e-14 * math.exp(-depth)


@pytest.mark.nojit
def test_what_is_absorbed_keeps_its_digits_however_thin():
    found = depths()
    expected = [-math.expm1(-depth) for depth in found]
    absorb(found)
    np.testing.assert_allclose(found, expected, rtol=3e-14)


@pytest.mark.nojit
def test_beyond_the_deepest_a_trace_is_left():
    out = np.zeros(1)
    add_transmission(np.array([1e300]), np.ones(1), np.ones(1), out)
    assert 0.0 < out[0] < 1e-303
    deep = np.array([1e300])
    absorb(deep)
    assert deep[0] == 1.0


@pytest.mark.nojit
def test_rows_of_transmissions():
    random = np.random.default_rng(2)
    k, columns = random.uniform(0.0, 3.0, (3, 7)), random.uniform(0.0, 9.0, (3, 5))
    for weights in (random.uniform(0.0, 1.0, (1, 7)), random.uniform(0.0, 1.0, (3, 7))):
        out = np.full((3, 5), np.nan)
        transmission_rows(k, weights, columns, out)
        expected = np.sum(np.exp(-k[:, None, :] * columns[:, :, None]) * weights[:, None, :], axis=2)
        np.testing.assert_allclose(out, expected, rtol=1e-13)


def rows() -> np.ndarray:
    """A single value, a wide range, two values 12 decades apart, mostly clear, tiny, nothing."""
    two = np.where(np.arange(40) < 20, 1e-32, 1e-20)
    clear = np.where(np.arange(40) < 30, 0.0, 1e-20)
    return np.array(
        [np.full(40, 1e-21), np.geomspace(1e-30, 1e-18, 40), two, clear, np.geomspace(1e-99, 1e-97, 40), np.zeros(40)]
    )


@pytest.mark.nojit
@pytest.mark.parametrize("levels", [(0.98, 1e-3), (0.6, 0.4)])
def test_columns_of_levels(levels: tuple[float, float]):
    widths = np.full(40, 1.0 / 40)
    first, second = np.empty(6), np.empty(6)
    column_rows(rows(), widths, np.array(levels), 1e-6, first, second)
    for row, *columns in zip(rows(), first, second, strict=True):
        for column, level in zip(columns, levels, strict=True):
            clear = weighted_sum((row == 0.0).astype(float), widths)
            if clear > 1.0 - 1e-9:
                assert column == 0.0
                continue
            expected = max(level, clear + 1e-6 * (1.0 - clear))
            # On either side within 1e-8 the transmission is on either side of the level.
            more, less = (np.exp(-row * column * factor) @ widths for factor in (1 - 1e-8, 1 + 1e-8))
            assert more >= expected * (1 - 1e-12)
            assert less <= expected * (1 + 1e-12)
