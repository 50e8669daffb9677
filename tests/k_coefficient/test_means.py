"""Planck and Rosseland means against the integrals themselves."""

import numpy as np
import pytest
from scipy.integrate import quad

from opacity.constants import SECOND_RADIATION
from opacity.errors import InputError
from opacity.k_coefficient.means import planck_mean, rosseland_mean

NU = np.linspace(0.0, 20000.0, 40001)


def planck(x: float) -> float:
    return x**3 / np.expm1(x)


def slope(x: float) -> float:
    """x e^x / (e^x - 1) times Planck's function is T dB/dT."""
    return planck(x) * x / -np.expm1(-x)


@pytest.mark.parametrize("temperature", [300.0, 1000.0, 2500.0])
def test_a_power_law_against_the_integrals(temperature: float):
    scale = SECOND_RADIATION / temperature
    sigma = 1e-20 * (1.0 + (scale * NU) ** 2)
    top = scale * NU[-1]
    above = quad(lambda x: (1.0 + x * x) * planck(x), 1e-9, top)[0] / quad(planck, 1e-9, top)[0]
    below = quad(slope, 1e-9, top)[0] / quad(lambda x: slope(x) / (1.0 + x * x), 1e-9, top)[0]
    np.testing.assert_allclose(planck_mean(sigma, NU, temperature), 1e-20 * above, rtol=1e-6)
    np.testing.assert_allclose(rosseland_mean(sigma, NU, temperature), 1e-20 * below, rtol=1e-6)


def test_moments_of_the_planck_function():
    # Over all of x: the integral of x^5/(e^x - 1) is 5! zeta(6) = 8 pi^6 / 63, that of x^3/(e^x - 1) pi^4 / 15.
    temperature = 500.0
    sigma = (SECOND_RADIATION / temperature * NU) ** 2
    np.testing.assert_allclose(planck_mean(sigma, NU, temperature), 40.0 * np.pi**2 / 21.0, rtol=1e-6)


@pytest.mark.parametrize("temperature", [1.0, 300.0, 1e5])
def test_a_grey_spectrum_is_its_own_mean_at_any_temperature(temperature: float):
    sigma = np.full((2, 3, NU.size), 3e-21)
    for mean in (planck_mean, rosseland_mean):
        found = mean(sigma, NU, temperature)
        assert found.shape == (2, 3)
        np.testing.assert_allclose(found, 3e-21, rtol=1e-12)


def test_a_window_opens_the_rosseland_mean_only():
    sigma = np.full(NU.size, 1e-20)
    sigma[1200] = 0.0
    assert rosseland_mean(sigma, NU, 1000.0) == 0.0
    np.testing.assert_allclose(planck_mean(sigma, NU, 1000.0), 1e-20, rtol=1e-3)
    assert planck_mean(np.zeros(NU.size), NU, 1000.0) == 0.0


def test_the_rosseland_mean_is_below_a_mean_of_the_same_weight():
    sigma = 1e-22 * np.random.default_rng(0).lognormal(sigma=3.0, size=NU.size)
    assert rosseland_mean(sigma, NU, 1000.0) < 0.1 * planck_mean(sigma, NU, 1000.0)


@pytest.mark.parametrize("temperature", [0.0, -5.0, np.nan, "hot"])
def test_impossible_temperatures(temperature: object):
    with pytest.raises(InputError, match="temperature: "):
        planck_mean(np.ones(NU.size), NU, temperature)


def test_a_spectrum_of_one_point_has_no_mean():
    with pytest.raises(InputError, match="wavenumber: no range"):
        rosseland_mean(np.ones(1), np.ones(1), 300.0)
