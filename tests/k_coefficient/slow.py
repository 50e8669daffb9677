"""The slow twins: k-distributions with sorts, loops and exact quantiles, written to be read."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np


def point_weights(nu: np.ndarray, low: float, high: float) -> np.ndarray:
    """Width of each grid point's cell between two edges, (n_nu,)."""
    weights = np.zeros(nu.size)
    for i in range(nu.size):
        left = nu[i] if i == 0 else 0.5 * (nu[i - 1] + nu[i])
        right = nu[i] if i == nu.size - 1 else 0.5 * (nu[i] + nu[i + 1])
        weights[i] = max(0.0, min(right, high) - max(left, low))
    return weights


def steps_of(values: np.ndarray, weights: np.ndarray) -> list[tuple[float, float, float]]:
    """The distribution as steps (g from, g to, k), rising."""
    pairs = sorted(
        (value, weight) for value, weight in zip(values.tolist(), weights.tolist(), strict=True) if weight > 0.0
    )
    total = math.fsum(weight for _, weight in pairs)
    steps, done = [], []
    for value, weight in pairs:
        start = math.fsum(done) / total
        done.append(weight)
        steps.append((start, math.fsum(done) / total, value))
    return steps


def mean_over(steps, low: float, high: float, of=lambda k: k) -> float:
    """Mean of a function of k over an interval of g."""
    parts = [max(0.0, min(b, high) - max(a, low)) * of(k) for a, b, k in steps]
    return math.fsum(parts) / (high - low)


def cells(nu: np.ndarray, sigma: np.ndarray, low: float, high: float, bounds: np.ndarray) -> np.ndarray:
    """Means of a spectrum between two edges over cells of g."""
    steps = steps_of(sigma, point_weights(nu, low, high))
    return np.array([mean_over(steps, a, b) for a, b in pairwise(bounds)])


def matched(values: np.ndarray, widths: np.ndarray, bounds: np.ndarray, x0: float) -> np.ndarray:
    """Matched intervals with mean closure."""
    steps = steps_of(values, widths)
    pairs = list(pairwise(bounds))
    k = []
    for low, high in pairs[:-1]:
        mean = mean_over(steps, low, high)
        if mean == 0.0:
            k.append(0.0)
            continue
        u = x0 / mean
        k.append(-math.log(mean_over(steps, low, high, lambda one: math.exp(-one * u))) / u)  # noqa: B023
    rest = mean_over(steps, 0.0, 1.0) - math.fsum(one * (b - a) for one, (a, b) in zip(k, pairs, strict=False))
    return np.array([*k, rest / (pairs[-1][1] - pairs[-1][0])])
