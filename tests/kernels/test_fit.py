import numpy as np
import pytest

from opacity.kernels.fit import SMALLEST_WEIGHT, bounds_of_logs, descend, error_rows
from opacity.kernels.matched import match_rows

M = 12
WIDTHS = np.full(M, 1.0 / M)


def rows(count: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Rising samples of several ranges, columns, and the transmissions there."""
    values = np.array([np.geomspace(10.0**-wide, 1.0, M) for wide in np.linspace(0.5, 6.0, count)])
    columns = np.geomspace(0.02, 20.0, 9) * np.ones((count, 1))
    truth = np.mean(np.exp(-values[:, None, :] * columns[:, :, None]), axis=2)
    return values, columns, truth


def slow_errors(values: np.ndarray, columns: np.ndarray, truth: np.ndarray, bounds: np.ndarray) -> np.ndarray:
    """The same from k and numpy's exponential."""
    k = np.empty((len(values), bounds.size - 1))
    match_rows(values, WIDTHS, bounds[None], 1.5, k)
    return np.sum(np.exp(-k[:, None, :] * columns[:, :, None]) * np.diff(bounds), axis=2) - truth


def norm(errors: np.ndarray, power: float) -> float:
    """The norm that is descended."""
    largest = np.abs(errors).max()
    return float(largest * np.sum((np.abs(errors) / largest) ** power) ** (1.0 / power))


@pytest.mark.nojit
def test_errors_of_rows():
    some = rows(5)
    bounds = np.array([0.0, 0.31, 0.5, 0.77, 1.0])
    errors = np.empty((5, 9))
    error_rows(some[0], WIDTHS, some[1], some[2], bounds, 1.5, errors)
    np.testing.assert_allclose(errors, slow_errors(*some, bounds), atol=1e-14)


@pytest.mark.nojit
def test_bounds_of_logarithms():
    np.testing.assert_allclose(bounds_of_logs(np.log([3.0, 2.0, 5.0])), [0.0, 0.3, 0.5, 1.0], rtol=1e-14)
    small = np.diff(bounds_of_logs(np.array([0.0, -99.0])))
    np.testing.assert_allclose(small[1] / small[0], SMALLEST_WEIGHT, rtol=1e-9)


def slow_descent(some: tuple[np.ndarray, ...], logs: np.ndarray, power: float, turns: np.ndarray) -> np.ndarray:
    """The descent as it is meant, each step judged by all rows."""
    logs, steps = logs.copy(), np.full(logs.size, 0.3)

    def size(at: np.ndarray) -> float:
        return norm(slow_errors(*some, bounds_of_logs(at)), power)

    best = size(logs)
    for turn in turns:
        before = best
        for i in turn:
            moved = False
            for sign in (1.0, -1.0):
                trial = logs.copy()
                trial[i] += sign * steps[i]
                value = size(trial)
                if value < best:
                    logs, best, moved = trial, value, True
                    break
            steps[i] *= 1.3 if moved else 0.5
        if np.all(steps < 0.005) or (best > 0.999 * before and np.all(steps < 0.02)):
            break
    return logs


@pytest.mark.nojit
@pytest.mark.parametrize(("squarings", "power"), [(2, 12.0), (4, 48.0)])
def test_steps_given_up_early_are_those_that_all_rows_refuse(squarings: int, power: float):
    some = rows(4)
    turns = np.random.default_rng(3).permuted(np.tile(np.arange(3), (6, 1)), axis=1)
    start = np.log([0.4, 0.35, 0.25])
    expected = slow_descent(some, start, power, turns)
    found = start.copy()
    descend(some[0], WIDTHS, some[1], some[2], 1.5, squarings, turns, found)
    np.testing.assert_allclose(found, expected, rtol=0.0, atol=1e-12)
    assert np.max(np.abs(found - start)) > 0.05


@pytest.mark.nojit
def test_nothing_to_descend():
    values, columns, _ = rows(2)
    logs = np.zeros(2)
    descend(np.zeros_like(values), WIDTHS, columns, np.ones_like(columns), 1.5, 2, np.array([[0, 1]]), logs)
    assert np.all(logs == 0.0)
