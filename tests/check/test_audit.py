"""The audit: repeatable by its seed, at points where errors would show, with errors rightly computed."""

from __future__ import annotations

import json

import numpy as np
import pytest

from opacity.check.audit import (
    MOST_CELLS,
    MOST_NODES,
    STORAGE_ROUNDING,
    audit,
    choose_points,
    interpolation_errors,
    judge_audit,
    relative_errors,
)
from opacity.check.spectra import interpolated
from opacity.cross_sections.exact import exact_spectrum
from opacity.cross_sections.prepare import LinesAtTemperature


def audit_of(case, seed, values=None):
    return audit(values or case.values, case.lines, case.recipe.profile, seed)


def test_the_same_seed_repeats_every_digit_and_another_draws_other_points(small):
    first, second, other = (json.dumps(audit_of(small, seed).as_dict()) for seed in (5, 5, 6))
    assert first == second
    assert other != first
    profile = small.recipe.profile
    between = [interpolation_errors(small.values, small.lines, profile, seed) for seed in (5, 5, 6)]
    assert between[0] == between[1]
    assert between[0] != between[2]


def test_a_right_table_is_within_the_tolerance_and_above_the_rounding(small):
    found = audit_of(small, 1)
    assert found.nodes == 4
    assert found.points > 200
    assert 1e-9 < found.p99_error <= found.largest_error <= 1e-3 + STORAGE_ROUNDING
    row = judge_audit(found, 1e-3)
    assert row.verdict == "agrees"
    assert f"{found.points} points of 4 nodes" in row.detail
    assert judge_audit(found, 0.5 * found.largest_error).verdict == "differs"


def test_the_worst_point_can_be_looked_up(small):
    sigma = small.values.sigma.copy()
    sigma[0, 1] *= 1.05
    worst = audit_of(small, 3, small.with_sigma(sigma)).worst
    assert (worst["temperature"], worst["pressure"]) == (296.0, 1.0)
    assert worst["error"] == pytest.approx(0.05, abs=2e-3)
    point = int(np.searchsorted(small.values.wavenumber, worst["wavenumber"]))
    assert worst["value"] == sigma[0, 1, point]
    at = np.array([worst["wavenumber"]])
    assert worst["exact"] == exact_spectrum(small.lines.at(296.0, 1.0), at, 25.0)[0]


def test_a_large_grid_is_audited_at_its_corners_too(make_case, monkeypatch):
    case = make_case(
        wavenumber="{ start = 2147.0, stop = 2147.2, step = 0.01 }",
        nodes="temperature = { start = 200.0, stop = 600.0, count = 6, spacing = 'log' }\n"
        "pressure = { start = 1e-3, stop = 1.0, count = 4, spacing = 'log' }",
    )
    seen = []
    real = LinesAtTemperature.at

    def watched(self, pressure):
        seen.append((self.temperature, pressure))
        return real(self, pressure)

    monkeypatch.setattr(LinesAtTemperature, "at", watched)
    assert audit_of(case, 7).nodes == MOST_NODES
    assert len(seen) == len(set(seen)) == MOST_NODES
    assert {(200.0, 1e-3), (200.0, 1.0), (600.0, 1e-3), (600.0, 1.0)} <= set(seen)
    found = interpolation_errors(case.values, case.lines, case.recipe.profile, 7)
    assert found["cells"] == MOST_CELLS


def test_a_long_profile_is_audited_at_both_ends(make_case):
    nodes = ", ".join(f"[{300.0 + 10.0 * i}, 0.1]" for i in range(20))
    case = make_case(wavenumber="{ start = 2147.0, stop = 2147.2, step = 0.01 }", nodes=f"nodes = [{nodes}]")
    sigma = case.values.sigma.copy()
    assert audit_of(case, 1).nodes == MOST_NODES
    for end in (0, -1):
        wrong = sigma.copy()
        wrong[end] *= 1.1
        assert audit_of(case, 1, case.with_sigma(wrong)).largest_error > 0.09
    assert interpolation_errors(case.values, case.lines, case.recipe.profile, 7) is None


def test_points_lie_at_ends_centres_cutoffs_and_extremes():
    nu = np.linspace(2000.0, 2100.0, 20001)
    sigma = np.zeros(nu.size)
    sigma[12345], sigma[777] = 1e-18, 1e-30
    points = choose_points(np.random.default_rng(0), sigma, nu, np.array([2050.0]), 3.0)
    assert {0, nu.size - 1} <= set(points.tolist())
    assert np.all(np.diff(points) > 0)
    for place in (2050.0, 2047.0, 2053.0):
        assert np.abs(nu[points] - place).min() <= 0.005
        below = int(np.searchsorted(nu, place))
        assert {below, below - 1} & set(points.tolist())
    # Sorted by value, the extremes among 20 000 draws are taken: the highest point is very likely one of them.
    highest = [
        12345 in choose_points(np.random.default_rng(seed), sigma, nu, np.array([2050.0]), 3.0) for seed in range(20)
    ]
    assert np.mean(highest) >= 0.4
    assert choose_points(np.random.default_rng(0), sigma[:1], nu[:1], np.array([]), 3.0).tolist() == [0]


def test_errors_are_relative_and_zero_means_zero():
    truth = np.array([2.0, 2.0, 0.0, 0.0, 1e-310, 1e-310, 0.0, 1.0])
    values = np.array([2.002, 1.0, 0.0, 1e-30, 0.0, -1e-310, 5e-324, np.nan])
    errors = relative_errors(values, truth)
    np.testing.assert_allclose(errors[:2], [1e-3, 0.5], rtol=1e-9)
    assert errors[2] == 0.0
    assert errors[3] == np.inf
    # Below 1e-300 f8 itself has no digits left, and a sum of such values may round to 0 or not.
    assert errors[4] == 0.0
    assert errors[5] > 1.0
    assert errors[6] == 0.0
    assert errors[7] == np.inf


def test_errors_that_are_not_numbers_differ(small):
    for value in (np.nan, np.inf):
        sigma = small.values.sigma.copy()
        sigma[0, 0] = value
        with np.errstate(invalid="ignore"):
            found = audit_of(small, 1, small.with_sigma(sigma))
        assert judge_audit(found, 1e-3).verdict == "differs"


def test_interpolation_between_nodes_is_measured_against_the_exact_sum(small):
    found = interpolation_errors(small.values, small.lines, small.recipe.profile, 2)
    assert found["cells"] == 1
    temperature, pressure = np.sqrt(296.0 * 480.0), np.sqrt(0.01 * 1.0)
    assert found["worst_cell"]["temperature"] == pytest.approx(temperature)
    assert found["worst_cell"]["pressure"] == pytest.approx(pressure)
    nu = small.values.wavenumber
    truth = exact_spectrum(small.lines.at(temperature, pressure), nu, 25.0)
    errors = np.abs(interpolated(small.values, temperature, pressure) / truth - 1.0)
    assert 0.3 * np.median(errors) < found["p50"] < 3.0 * np.median(errors)
    assert found["p50"] <= found["p99"] <= found["largest"] <= errors.max() * (1.0 + 1e-9)


@pytest.mark.parametrize("nodes", ["temperature = [296.0]\npressure = [0.1]", "nodes = [[296.0, 0.1], [400.0, 0.1]]"])
def test_a_table_without_cells_has_no_interpolation(make_case, nodes):
    case = make_case(nodes=nodes, wavenumber="{ start = 2147.0, stop = 2147.2, step = 0.01 }")
    assert interpolation_errors(case.values, case.lines, case.recipe.profile, 2) is None


def test_a_table_without_lines_is_audited_for_zeros(make_case):
    case = make_case(wavenumber="{ start = 3000.0, stop = 3001.0, step = 0.01 }")
    found = audit_of(case, 1)
    assert found.zeros == found.points > 0
    assert found.largest_error == 0.0
    assert interpolation_errors(case.values, case.lines, case.recipe.profile, 1) is None
