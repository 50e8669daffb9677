"""Integrals of Voigt profiles against arbitrary-precision quadrature, and the sums that a grid makes of them."""

from __future__ import annotations

import itertools
import math

import mpmath
import numpy as np
import pytest
from scipy.integrate import quad

from opacity.check.closure import resolution_of
from opacity.chi_factors import CHI_FACTORS
from opacity.cross_sections.exact import SQRT_LN2, chi_factors, voigt_profile
from opacity.cross_sections.prepare import NodeLines
from opacity.kernels.closure import Centred, sampled, weighted_share
from opacity.kernels.profile_tail import share, tail

PROMISED = 2e-7
"""Relative error of a tail, as `tail` says."""


def upper_tail(x: np.ndarray, y: np.ndarray) -> np.ndarray:
    return np.array([tail(float(a), float(b)) for a, b in zip(x, y, strict=True)])


def centred(node: NodeLines) -> Centred:
    """A single line as the kernels have it."""
    scale = SQRT_LN2 / float(node.doppler[0])
    return Centred(float(node.wavenumber[0]), float(node.centre[0]), scale, float(node.lorentz[0]) * scale)


def share_between(node: NodeLines, lower: float, upper: float) -> float:
    line = centred(node)
    return share((lower - line.centre) * line.scale, (upper - line.centre) * line.scale, line.y)


def sampling_offset(node: NodeLines, start: float, step: float) -> float:
    line = centred(node)
    return sampled(step * line.scale, line.y, (line.centre - start) / step).offset


def sampling_risk(node: NodeLines, wavenumber: np.ndarray) -> float:
    """By what the plan asks for: the strength of the line is 1."""
    strength, unresolved, _ = resolution_of(node.per_bar(), 1.0, wavenumber)
    assert strength == 1.0
    return unresolved


def exact_tail(x: float, y: float) -> float:
    """Integral of Re w(t + iy)/sqrt(pi) from x on: w as exp(-z^2) erfc(-iz), the far rest term by term exactly.

    K(t, y) is the convolution of exp(-u^2) with y/(pi ((t-u)^2 + y^2)) (Armstrong 1967, JQSRT 7, 61), whose integral
    over t is an arc tangent.
    """
    with mpmath.workdps(20):
        far = max(x, 8.0)
        places = [x, *(p for p in (-6, -4, -2, -1, 0, 1, 2, 3, 4, 5, 6, 7) if p > x), far]
        near = mpmath.mpf(0)
        if x < far:
            near = mpmath.quad(lambda t: (mpmath.exp(-((t + 1j * y) ** 2)) * mpmath.erfc(-1j * t + y)).real, places)
        rest = mpmath.quad(lambda u: mpmath.exp(-u * u) * mpmath.atan2(y, far - u), [-8, -4, 0, 4, 8])
        return float(near / mpmath.sqrt(mpmath.pi) + rest / mpmath.pi ** mpmath.mpf("1.5"))


@pytest.mark.parametrize("y", [1e-8, 1e-4, 0.04, 0.06, 0.1, 1.0, 5.0, 10.0, 100.0, 1e4])
@pytest.mark.parametrize("x", [0.0, 0.3, 2.0, 5.9, 5.999, 6.001, 6.1, 30.0, 120.0, 1e4, -2.0])
def test_the_tail_of_a_profile_agrees_with_quadrature(x: float, y: float):
    found = upper_tail(np.array([x]), np.array([y]))[0]
    assert found == pytest.approx(exact_tail(x, y), rel=PROMISED)


def test_the_tail_falls_from_one_to_zero_and_is_symmetric():
    x = np.linspace(-50.0, 50.0, 501)
    for y in (1e-8, 1e-3, 1.0, 30.0):
        tail = upper_tail(x, np.full(x.size, y))
        assert np.all(np.diff(tail) <= PROMISED * tail[1:])
        np.testing.assert_allclose(tail + tail[::-1], 1.0, rtol=PROMISED)
        assert 0.0 < tail[-1] < tail[0] < 1.0


def test_a_lorentz_profile_has_the_tail_of_an_arc_tangent():
    x, y = np.array([0.0, 500.0, 3e4]), np.full(3, 1e3)
    # The Doppler part adds 1/(2 (x2 + y2)) of the tail at most, 5e-7.
    np.testing.assert_allclose(upper_tail(x, y), np.arctan2(y, x) / math.pi, rtol=1e-6)


def one_line(centre: float, doppler: float, lorentz: float) -> NodeLines:
    values = [np.array([v]) for v in (centre, centre, 1.0, doppler, lorentz)]
    return NodeLines(296.0, 1.0, *values)


def test_shares_of_neighbouring_stretches_add_up():
    line = one_line(1000.0, 0.002, 0.01)
    limits = [900.0, 999.0, 999.99, 1000.0, 1000.02, 1003.0, 1100.0]
    shares = [share_between(line, a, b) for a, b in itertools.pairwise(limits)]
    whole = share_between(line, 900.0, 1100.0)
    assert sum(shares) == pytest.approx(whole, rel=1e-9)
    # Of a Lorentz profile 2 gamma / (pi d) lies beyond the distance d on both sides together.
    assert 1.0 - whole == pytest.approx(2.0 * 0.01 / (math.pi * 100.0), rel=1e-4)
    assert share_between(line, 1100.0, 900.0) == 0.0


@pytest.mark.parametrize("lorentz", [1e-9, 2e-4, 3e-3])
@pytest.mark.parametrize("step", [0.001, 0.004, 0.011, 0.05])
@pytest.mark.parametrize("phase", [0.0, 0.26, 0.5])
def test_the_sum_over_points_is_as_predicted(step: float, lorentz: float, phase: float):
    start, count = 1000.0, 40001
    nu = start + step * np.arange(count)
    line = one_line(start + step * (20000 + phase), 0.0025, lorentz)
    total = step * float(np.sum(voigt_profile(nu - line.centre[0], line.doppler, line.lorentz)))
    seen = share_between(line, float(nu[0]) - 0.5 * step, float(nu[-1]) + 0.5 * step)
    offset = sampling_offset(line, start, step)
    # The tail of `share_between` is good to 2e-7 of the little that lies beyond; the harmonics are exact.
    assert total == pytest.approx(seen + offset, rel=1e-9, abs=1e-9)
    risk = sampling_risk(line, nu)
    # The risk is the first harmonic; the k-th is below its k-th power, and all together a geometric series.
    assert risk == 1.0 or abs(offset) <= risk / (1.0 - 0.5 * risk) * (1.0 + 1e-12)


def test_a_hopeless_step_is_not_predicted():
    line = one_line(1000.3, 0.0025, 1e-6)
    assert math.isnan(sampling_offset(line, 900.0, 1.0))
    assert sampling_risk(line, np.array([900.0, 901.0, 1100.0])) == 1.0
    assert sampling_risk(one_line(1000.0, 0.0025, 1e-6), np.array([1000.0])) == 1.0


def test_a_share_weighted_by_chi_factors_agrees_with_quadrature():
    """Against scipy's adaptive quadrature, row by row, on both sides of the centre and across it."""
    chi = CHI_FACTORS["Tonkov-1996"].table()
    line = one_line(2000.0, 2e-3, 0.08)
    for lower, upper in ((1990.0, 2030.0), (2001.0, 2400.0), (1500.0, 1999.0), (2002.5, 2003.5)):
        places = sorted(
            {lower, upper, *(2000.0 + d for d in (-300, -150, -3, 3, 150, 300) if lower < 2000.0 + d < upper)}
        )
        expected = 0.0
        for a, b in itertools.pairwise(places):
            if a < 2000.0 < b:
                expected += share_between(line, a, b)
                continue

            def profile(nu: float) -> float:
                distance = np.array([nu - 2000.0])
                # Just inside the stretch, so that its ends fall into its own row.
                return float(chi_factors(chi, distance)[0] * voigt_profile(distance, 2e-3, 0.08)[0])

            expected += quad(profile, np.nextafter(a, b), np.nextafter(b, a), epsrel=1e-10)[0]
        found = weighted_share(centred(line), lower, upper, chi)
        assert found == pytest.approx(expected, rel=3e-7)
