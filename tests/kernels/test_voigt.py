"""The Voigt function of the kernels and of the exact sum against 400 values of 25 digits (mpmath, 80+ digits)."""

import csv
from pathlib import Path

import mpmath
import numpy as np
import pytest
from scipy.special import wofz

from opacity.cross_sections.exact import SQRT_LN2, voigt_profile
from opacity.cross_sections.tolerance import Regions, exponential_radius, regions
from opacity.errors import InputError
from opacity.kernels.node_line import Formulas, region_radii, voigt_value

REFERENCE = Path(__file__).parents[1] / "reference" / "data" / "voigt_function.csv"
TOLERANCES = (1e-1, 1e-2, 1e-3, 1e-4, 1e-5, 1e-6)


def reference_values() -> np.ndarray:
    """Columns x, y, K of the reference file, (400, 3)."""
    with open(REFERENCE, encoding="ascii") as stream:
        rows = list(csv.DictReader(line for line in stream if not line.startswith("#")))
    return np.array([[float(row[name]) for name in ("x", "y", "K")] for row in rows])


def kernel(x: float, y: float, tolerance: float) -> float:
    return voigt_value(x, y, formulas(regions(tolerance)))


def formulas(limits: Regions) -> Formulas:
    return Formulas(limits.near_radius, limits.far_radius, limits.exponential)


def test_reference_file_holds_what_mpmath_gives() -> None:
    """The file itself: every 20th value computed again with 60 digits."""
    values = reference_values()
    assert len(values) == 400
    with mpmath.workdps(60):
        for x, y, expected in values[::20]:
            z = mpmath.mpc(x, y)
            # At large |z| the product of a tiny and a huge number: 60 digits do not carry it, the file's 80+ do.
            if abs(z) > 8:
                continue
            w = mpmath.exp(-z * z) * mpmath.erfc(-1j * z)
            assert abs(float(w.real) / expected - 1.0) < 1e-14


def test_exact_voigt_meets_the_reference() -> None:
    """The profile of the exact sum, in its own units: V = sqrt(ln2/pi)/alpha K, per cm-1."""
    x, y, expected = reference_values().T
    for power in (-10, 0, 3):
        # Powers of two, so that x and y come back as they were.
        alpha = SQRT_LN2 * 2.0**power
        scale = SQRT_LN2 / alpha
        found = voigt_profile(x / scale, alpha, y / scale) / (scale / np.sqrt(np.pi))
        assert np.max(np.abs(found / expected - 1.0)) < 1e-13


@pytest.mark.nojit
@pytest.mark.parametrize("tolerance", TOLERANCES)
def test_kernel_meets_every_tolerance_at_every_reference_value(tolerance: float) -> None:
    """At y from 1e-10 up, below 1e-6 too: the formula for small y is accurate however small y is."""
    values = reference_values()
    errors = np.array([abs(kernel(x, y, tolerance) / expected - 1.0) for x, y, expected in values])
    worst = int(np.argmax(errors))
    print(f"tolerance {tolerance:g}: worst {errors[worst]:.2e} at x, y = {values[worst, :2]}")
    assert errors[worst] <= tolerance


@pytest.mark.parametrize("tolerance", TOLERANCES)
def test_kernel_against_wofz_over_the_plane(tolerance: float) -> None:
    """Random points, dense where the formulas meet; y down to 1e-30."""
    rng = np.random.default_rng(7)
    n = 20_000
    y = 10.0 ** rng.uniform(-30, 5, n)
    limits = regions(tolerance)
    edges = np.array([region_radii(one, *formulas(limits)) for one in y])
    near_an_edge = edges[np.arange(n), rng.integers(0, 2, n)] * (1.0 + rng.normal(0.0, 1e-3, n))
    x = np.where(rng.random(n) < 0.5, rng.uniform(0.0, 12.0, n), np.abs(near_an_edge))
    found = np.array([kernel(a, b, tolerance) for a, b in zip(x, y, strict=True)])
    error = np.max(np.abs(found / wofz(x + 1j * y).real - 1.0))
    print(f"tolerance {tolerance:g}: largest error {error / tolerance:.2f} of it")
    assert error <= tolerance


@pytest.mark.nojit
def test_wing_takes_over_where_the_exponential_is_gone() -> None:
    for y in (1e-30, 1e-10, 1e-3, 1.0):
        for tolerance in (1e-2, 1e-6):
            x = exponential_radius(y, tolerance)
            assert np.exp(-x * x) <= tolerance * y / (np.sqrt(np.pi) * x * x)


@pytest.mark.parametrize("tolerance", [0.0, 9e-7, 0.2, -1e-3, float("nan"), float("inf")])
def test_a_tolerance_that_cannot_be_met_is_refused(tolerance: float) -> None:
    with pytest.raises(InputError, match=r"tolerance: cannot be met; expected 1e-06 to 0.1, found"):
        regions(tolerance)
