"""Closure of lines placed at will: shifted ones with plinth removal, and ones that the grid's end cuts."""

import numpy as np
import pytest

from opacity.check.closure import closure_of, judge_closure
from opacity.cross_sections.exact import exact_spectrum
from opacity.cross_sections.prepare import NodeLines


def node(place: np.ndarray, doppler: float, lorentz: float, shift: float = 0.0) -> NodeLines:
    ones = np.ones(place.size)
    return NodeLines(296.0, 1.0, place, place + shift, 1e-20 * ones, doppler * ones, lorentz * ones)


@pytest.mark.parametrize("shift", [0.0, -1.0, 4.0])
@pytest.mark.parametrize("plinth", [False, True])
def test_shifted_lines_close(shift: float, plinth: bool) -> None:
    """At high pressure the centre is far from the wavenumber that the cut-off counts from."""
    lines = node(np.array([2130.0, 2140.0, 2147.0]), 0.003, 8.0, shift)
    nu = np.linspace(2100.0, 2200.0, 20001)
    sigma = exact_spectrum(lines, nu, 25.0, plinth)
    account = closure_of(lines, nu, sigma, 25.0, plinth, uniform=True)
    assert account.can_be_judged
    assert abs(account.difference) <= 1e-6 + account.allowance
    assert judge_closure([account], 1e-6).verdict == "agrees"
    assert judge_closure([closure_of(lines, nu, 1.01 * sigma, 25.0, plinth, uniform=True)], 1e-6).verdict == "differs"


def test_right_spectra_never_differ() -> None:
    """Random lines and grids, ends across lines among them; a check that cries wolf is no check."""
    rng = np.random.default_rng(12)
    judged, sharp = 0, 0
    for _ in range(600):
        doppler = 10.0 ** rng.uniform(-2.5, -0.5)
        step = doppler * 10.0 ** rng.uniform(-1.3, 0.5)
        size = int(rng.integers(20, 400))
        nu = 2000.0 + step * np.arange(size)
        span = nu[-1] - nu[0]
        place = np.sort(rng.uniform(nu[0] - 0.2 * span, nu[-1] + 0.2 * span, 4))
        place[0] = nu[0] + doppler * rng.uniform(-3.0, 3.0)
        lines = node(np.sort(place), doppler, doppler * 10.0 ** rng.uniform(-4, 1), doppler * rng.normal())
        cutoff = span * 10.0 ** rng.uniform(-1, 1)
        account = closure_of(lines, nu, exact_spectrum(lines, nu, cutoff), cutoff, False, uniform=True)
        if account.can_be_judged:
            judged += 1
            sharp += account.allowance < 2e-3
            assert abs(account.difference) <= 1e-6 + account.allowance
    assert judged > 200
    assert sharp > 100
