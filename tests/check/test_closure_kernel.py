"""The kernel's account of lines against the slow one, over hostile lines and grids, line by line."""

from __future__ import annotations

import math
from collections import Counter
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import mpmath
import numpy as np
import pytest

from opacity.check.closure import OWN_ERROR, ClosureSums, closure_sums, resolution_of
from opacity.check.run import run_checks
from opacity.chi_factors import CHI_FACTORS, NO_CHI
from opacity.cross_sections.exact import SQRT_LN2
from opacity.cross_sections.prepare import LinesAtTemperature, NodeLines
from opacity.kernels.profile_tail import VERY_FAR, derivatives, tail, value, very_far

from . import slow_closure as slow


def grid(rng: np.random.Generator, step: float) -> tuple[np.ndarray, bool]:
    """An even grid, one even in log, one with gaps, or one of two points, and whether it is even."""
    size = int(rng.integers(2, 400))
    kind = rng.integers(0, 4)
    if kind == 0:
        return 2000.0 + step * np.cumsum(10.0 ** rng.uniform(-2, 1, size)), False
    if kind == 1:
        return np.geomspace(2000.0, 2000.0 + step * size, size), False
    return 2000.0 + step * np.arange(size), True


def hostile(rng: np.random.Generator) -> tuple[NodeLines, np.ndarray, bool, float]:
    """One line, a grid, whether it is even, and a cut-off: y from 1e-10 to 1e5, ends and cut-offs at any distance."""
    doppler = 10.0 ** rng.uniform(-4, -0.5)
    nu, even = grid(rng, doppler * 10.0 ** rng.uniform(-2, 2))
    lorentz = doppler * 10.0 ** rng.uniform(-10, 5) / SQRT_LN2
    span = float(nu[-1] - nu[0])
    width = doppler * 10.0 ** rng.uniform(-1, 3)
    centre = rng.choice([nu[0], nu[-1], rng.uniform(nu[0], nu[-1])]) + rng.choice([0.0, width * rng.normal()])
    cutoff = rng.choice([width, span, 10.0 * span, 25.0]) * 10.0 ** rng.uniform(-0.5, 0.5)
    shift = rng.choice([0.0, rng.normal() * rng.choice([doppler, cutoff])])
    columns = [np.array([one]) for one in (centre - shift, centre, 1.0, doppler, lorentz)]
    return NodeLines(296.0, 1.0, *columns), nu, even, cutoff


def largest_tail(node: NodeLines, nu: np.ndarray, cutoff: float) -> float:
    """The larger of the two tails of which a share is the difference: what its error is relative to."""
    lower, upper = max(nu[0], node.wavenumber[0] - cutoff), min(nu[-1], node.wavenumber[0] + cutoff)
    x = np.array([lower - node.centre[0], node.centre[0] - upper]) * SQRT_LN2 / node.doppler[0]
    nearest = np.array([max(x[0], x[1], 0.0)])
    return float(slow.upper_tail(nearest, node.lorentz * SQRT_LN2 / node.doppler)[0])


@pytest.mark.parametrize("plinth", [False, True])
@pytest.mark.parametrize("chi", [NO_CHI, CHI_FACTORS["Tonkov-1996"].table()], ids=["plain", "chi"])
def test_hostile_lines_have_the_slow_account(plinth: bool, chi: np.ndarray):
    rng = np.random.default_rng(5)
    met: Counter[str] = Counter()
    for _ in range(3000 if not len(chi) else 600):
        node, nu, even, cutoff = hostile(rng)
        found = closure_sums(node.per_bar(), 1.0, nu, cutoff, plinth, even, chi)
        expected = slow.closure_sums(node, nu, cutoff, plinth, even, chi)
        here = (node, nu[[0, 1, -1]], cutoff, found, expected)
        assert found.strength == expected.strength == 1.0
        assert abs(found.in_reach - expected.in_reach) <= OWN_ERROR * largest_tail(node, nu, cutoff) + 1e-15, here
        if (found.in_reach > 0.0) == (expected.in_reach > 0.0):
            assert found.inside == expected.inside, here
            assert found.risk == pytest.approx(expected.risk, rel=1e-6, abs=1e-12), here
        assert (found.sampling is None) == (expected.sampling is None), here
        if expected.sampling is not None:
            # The slow account takes the first gap for the step, whose rounding moves the phase.
            assert found.sampling == pytest.approx(expected.sampling, abs=1e-6), here
        assert found.allowance == pytest.approx(expected.allowance, rel=1e-4, abs=1e-9), here
        met.update(
            even=even, cut=expected.in_reach < 0.9, wing=0.0 < expected.in_reach < 1e-3, risk=expected.risk > 0.01
        )
        met.update(sampled=abs(expected.sampling or 0.0) > 1e-6, open=expected.allowance > 1e-6)
    assert min(met[one] for one in ("even", "cut", "wing", "risk", "sampled", "open")) > 20, met


def test_many_lines_add_up_to_the_sum_of_each():
    """In any order and cut anywhere; blocks of lines, strengths of 0 and both kinds of grid among them."""
    rng = np.random.default_rng(8)
    n = 1300
    centre = rng.uniform(1990.0, 2030.0, n)
    strength = 10.0 ** rng.uniform(-30, -18, n) * (rng.random(n) > 0.1)
    lines = LinesAtTemperature(
        296.0, centre, rng.normal(0.0, 0.01, n), strength, rng.uniform(0.01, 0.1, n), np.full(n, 2e-6)
    )
    for nu, even in ((np.linspace(2000.0, 2020.0, 4001), True), (np.geomspace(2000.0, 2020.0, 4001), False)):
        for pressure in (1e-3, 1.0):
            whole = closure_sums(lines, pressure, nu, 5.0, False, even)
            expected = slow.closure_sums(lines.at(pressure), nu, 5.0, False, even)
            parts, upside_down = ClosureSums(), rng.permutation(n)
            for which in (upside_down[:700], upside_down[700:]):
                names = ("wavenumber", "shift", "strength", "lorentz", "doppler")
                part = replace(lines, **{name: getattr(lines, name)[which] for name in names})
                parts = parts.plus(closure_sums(part, pressure, nu, 5.0, False, even))
            for name in ("strength", "in_reach", "inside", "risk", "sampling", "allowance"):
                found, other, truth = (getattr(one, name) for one in (whole, parts, expected))
                if truth is None:
                    assert found is None
                    assert other is None
                    continue
                assert found == pytest.approx(other, rel=1e-12, abs=1e-32)
                limit = 1e-4 if name == "allowance" else OWN_ERROR
                assert found == pytest.approx(truth, rel=limit, abs=1e-8 * whole.in_reach), name


@pytest.mark.nojit
@pytest.mark.parametrize("y", [1e-10, 1e-4, 0.049, 0.051, 1.0, 5.9, 6.1, 1e3])
@pytest.mark.parametrize("x", [0.0, 0.7, 3.0, 5.99, 6.01, 40.0, 99.0, 101.0, 1e4])
def test_value_and_derivatives_agree_with_arbitrary_precision(x: float, y: float):
    """From w by its definition and w' = -2 z w + 2i/sqrt(pi) (Abramowitz & Stegun 7.1.20) with 60 digits and more."""
    with mpmath.workdps(60 if max(x, y) < 200.0 else 90):
        z = mpmath.mpc(x, y)
        if abs(z) < 8.0:
            w = mpmath.exp(-z * z) * mpmath.erfc(-1j * z)
        else:
            terms = [mpmath.fac2(2 * k - 1) / 2**k / z ** (2 * k) for k in range(30)]
            w = 1j / (mpmath.sqrt(mpmath.pi) * z) * sum(terms)
        first = -2 * z * w + 2j / mpmath.sqrt(mpmath.pi)
        second = -2 * w - 2 * z * first
        third = -4 * first - 2 * z * second
        expected = [float(one.real) for one in (w, first, third)]
    # Nearer than |z| = 6 derivatives are relative to the largest, since they change sign; farther the exponential is
    # left out, 2e-16 of the largest value.
    near = math.hypot(x, y) < 6.0
    left_out = 0.0 if near else 1.1 * math.exp(-x * x)
    assert value(x, y) == pytest.approx(expected[0], rel=2e-7, abs=left_out)
    first, third = derivatives(x, y)
    assert first == pytest.approx(expected[1], rel=1e-12 if near else 2e-4, abs=1e-9 if near else 2.0 * x * left_out)
    assert third == pytest.approx(expected[2], rel=1e-12 if near else 2e-4, abs=1e-9 if near else 8.0 * x**3 * left_out)


@pytest.mark.nojit
def test_very_far_out_tail_and_value_are_those_of_the_whole_series():
    for x in (VERY_FAR, 101.0, 3e3, 1e7):
        for y in (0.0, 1e-12, 0.1, 4.9, 5.1, 99.0, 1e5):
            assert very_far(x, y) == pytest.approx((tail(x, y), value(x, y)), rel=2e-11, abs=0.0)


def test_the_plan_sees_lines_as_the_slow_account_does():
    rng = np.random.default_rng(9)
    n = 500
    centre = np.sort(rng.uniform(1999.0, 2011.0, n))
    ones = np.ones(n)
    node = NodeLines(
        296.0, 1.0, centre, centre, 10.0 ** rng.uniform(-3, 0, n), 2e-3 * ones, 10.0 ** rng.uniform(-6, -1, n)
    )
    for nu in (np.linspace(2000.0, 2010.0, 1001), 2000.0 + np.cumsum(10.0 ** rng.uniform(-4, 0, 40))):
        inside = (centre >= nu[0]) & (centre <= nu[-1])
        risk = slow.sampling_risk(node, nu)
        strength, unresolved, narrowest = resolution_of(node.per_bar(), 1.0, nu)
        assert strength == pytest.approx(node.strength[inside].sum(), rel=1e-12)
        assert unresolved == pytest.approx((node.strength * risk)[inside].sum(), rel=1e-9)
        width = 0.5346 * node.lorentz + np.sqrt(0.2166 * node.lorentz**2 + node.doppler**2)
        assert narrowest == pytest.approx(width[inside].min(), rel=1e-12)
    assert resolution_of(node.per_bar(), 1.0, np.array([3000.0, 3001.0])) == (0.0, 0.0, math.inf)


def test_results_do_not_depend_on_workers(small):
    reports = [run_checks(small.values, small.recipe, small.lines, 3, workers=workers) for workers in (1, 2, 5)]
    assert reports[0].figures == reports[1].figures == reports[2].figures
    node = small.lines.at_temperature(296.0)
    with ThreadPoolExecutor(4) as executor:
        nu = small.values.wavenumber
        found = list(executor.map(lambda _: closure_sums(node, 0.1, nu, 25.0, False, True), range(20)))
    assert len(set(found)) == 1
