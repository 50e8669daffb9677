"""Closure: a right table agrees on every grid that can be judged, and says so where it cannot."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

from opacity.check.closure import closure_of, judge_closure
from opacity.check.run import run_checks
from opacity.check.spectra import is_uniform
from opacity.chi_factors import CHI_FACTORS
from opacity.cross_sections.exact import exact_spectrum
from opacity.cross_sections.prepare import NodeLines
from opacity.grids import cell_widths

EVEN = "{ start = 2145.0, stop = 2149.0, step = 0.004 }"
FINE = "{ start = 2145.0, stop = 2149.0, step = 0.002 }"
LOG = "{ start = 2145.0, stop = 2149.0, resolving_power = 600000.0 }"
R0_CUT_IN_HALF = "{ start = 2147.081, stop = 2147.481, step = 0.001 }"
COLD_AND_THIN = "temperature = [30.0, 296.0]\npressure = [1e-9, 1e-6]"


def closure_row(case, values=None):
    report = run_checks(values or case.values, case.recipe, case.lines, 1)
    return report.results[0], report.figures["closure"]


@pytest.mark.parametrize("name", sorted(CHI_FACTORS))
def test_right_spectra_with_chi_factors_agree(name):
    """The exact sum itself, wherever jumps and bends of the factors fall: within tolerance and allowance."""
    rng = np.random.default_rng(2)
    chi = CHI_FACTORS[name].table()
    accounts = []
    for case in range(60):
        step = 10.0 ** rng.uniform(-0.5, 0.3)
        nu = 2000.0 + step * np.arange(1001)
        place = np.sort(rng.uniform(nu[0], nu[-1], 2)) if case else np.array([2500.0])
        lines = [place, place, np.full(place.size, 1e-20), np.full(place.size, 0.05), np.full(place.size, step * 1.2)]
        node = NodeLines(296.0, 1.0, *lines)
        cutoff = 1e4 if case % 2 else 10.0 ** rng.uniform(1.0, 3.0)
        sigma = exact_spectrum(node, nu, cutoff, chi=chi)
        accounts.append(closure_of(node, nu, sigma, cutoff, False, True, chi))
    judged = [one for one in accounts if one.can_be_judged]
    assert len(judged) > 40
    assert judge_closure(judged, 1e-6).verdict == "agrees"


def test_chi_factors_are_in_the_values_and_in_the_expectation(make_case):
    """A table with weaker wings agrees with its own account, and differs from the account without them."""
    plain = make_case(wavenumber="{ start = 2100.0, stop = 2200.0, step = 0.004 }", cutoff="100.0")
    profile = replace(plain.recipe.profile, chi="Tonkov-1996")
    case = replace(plain, recipe=replace(plain.recipe, profile=profile))
    values = plain.computed_with(plain.lines, chi="Tonkov-1996")
    row, accounts = closure_row(case, values)
    assert row.verdict == "agrees"
    _, others = closure_row(plain)
    assert all(one["in_reach"] < other["in_reach"] for one, other in zip(accounts, others, strict=True))
    assert closure_row(case, plain.values)[0].verdict == "differs"
    assert closure_row(plain, values)[0].verdict == "differs"


@pytest.mark.parametrize(
    "changes, judged",
    [
        ({"wavenumber": FINE}, 4),
        ({"wavenumber": EVEN}, 4),
        ({"wavenumber": LOG}, 4),
        ({"wavenumber": LOG, "tolerance": "1e-5"}, 4),
        ({"wavenumber": FINE, "tolerance": "1e-6"}, 4),
        # The sum is 5e-4 off by sampling alone, 460 times this tolerance, and is predicted.
        ({"wavenumber": EVEN, "tolerance": "1e-6"}, 4),
        ({"cutoff": "0.3"}, 4),
        # At 1 bar the half-width is above the cut-off: where exactly a profile of such height ends decides.
        ({"cutoff": "0.05"}, 2),
        ({"cutoff": "500.0"}, 4),
        ({"cutoff": "[{ to_pressure = 0.1, cutoff = 0.3 }, { cutoff = 25.0 }]"}, 4),
        ({"wavenumber": R0_CUT_IN_HALF}, 4),
        # No line's centre is inside: wings alone.
        ({"wavenumber": "{ start = 2148.0, stop = 2149.0, step = 0.004 }"}, 4),
        ({"nodes": "nodes = [[480.0, 0.01], [296.0, 1.0], [296.0, 0.01]]"}, 3),
        ({"nodes": "temperature = [296.0]\npressure = [0.1]"}, 1),
    ],
    ids=str,
)
def test_a_right_table_agrees(make_case, changes, judged):
    case = make_case(**changes)
    row, _ = closure_row(case)
    assert row.verdict == "agrees"
    assert row.detail.startswith(f"{judged} of {len(case.nodes())} nodes;")
    assert abs(row.value) <= row.limit
    assert "too coarse" not in row.detail


def test_a_predicted_sum_is_held_to_the_tolerance_itself(make_case):
    case = make_case(wavenumber=EVEN, tolerance="1e-6")
    row, accounts = closure_row(case)
    assert abs(accounts[2]["sampling"]) > 2e-5
    assert max(one["allowance"] for one in accounts) < 1e-6
    # The tolerance, the check's own error of 6e-7, and the ends.
    assert row.limit < 1e-6 + 6e-7 + 1e-6


@pytest.mark.parametrize("cutoff", ["0.3", "25.0"])
def test_with_plinth_a_right_table_agrees(make_case, cutoff):
    plain = make_case(cutoff=cutoff)
    case = replace(plain, recipe=replace(plain.recipe, profile=replace(plain.recipe.profile, plinth=True)))
    row, accounts = closure_row(case, case.computed_with(case.lines))
    assert row.verdict == "agrees"
    assert row.detail.startswith("4 of 4 nodes")
    assert accounts[1]["in_reach"] < closure_row(plain)[1][1]["in_reach"]


def test_the_plinth_matters_at_a_small_cutoff(make_case):
    plain = make_case(cutoff="0.3")
    case = replace(plain, recipe=replace(plain.recipe, profile=replace(plain.recipe.profile, plinth=True)))
    assert closure_row(case, plain.values)[0].verdict == "differs"
    assert closure_row(plain, case.computed_with(case.lines))[0].verdict == "differs"


@pytest.mark.parametrize("step, share", [("0.01", 0.5), ("0.02", 1.0)])
def test_a_coarse_step_is_named_and_its_sum_predicted(make_case, step, share):
    case = make_case(wavenumber=f"{{ start = 2145.0, stop = 2149.0, step = {step} }}")
    row, accounts = closure_row(case)
    cold = accounts[0]
    assert cold["at_risk"] == pytest.approx(share, abs=0.01)
    # The sum over points is 1.4 and 2.6 times the strength, and known to be to a part in 10^4.
    assert cold["integral"] / cold["in_reach"] > 1.3
    assert abs(cold["difference"]) < 1e-4
    assert row.verdict == "agrees"
    assert row.detail.startswith("4 of 4 nodes;")
    assert "step too coarse at 2 of 4 nodes: at 296 K, 0.01 bar" in row.detail
    assert f"{cold['at_risk']:.0%} of the strength is in lines narrower than it resolves" in row.detail


def test_a_coarse_step_does_not_hide_a_wrong_table(make_case):
    case = make_case(wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.02 }")
    assert closure_row(case, case.with_sigma(case.values.sigma * 1.01))[0].verdict == "differs"


def test_a_coarse_log_grid_is_not_predicted_but_named(make_case):
    case = make_case(wavenumber="{ start = 2145.0, stop = 2149.0, resolving_power = 100000.0 }")
    row, accounts = closure_row(case)
    assert [one["sampling"] for one in accounts] == [None, 0.0, None, 0.0]
    assert row.verdict == "agrees"
    assert row.detail.startswith("2 of 4 nodes")
    assert "too coarse at 2 of 4" in row.detail


def test_a_hopeless_grid_cannot_be_judged(make_case):
    case = make_case(wavenumber="{ start = 2145.0, stop = 2149.0, step = 1.0 }")
    row, _ = closure_row(case)
    assert row.verdict == "cannot judge"
    assert row.detail.startswith("no node can be judged; step too coarse at 4 of 4 nodes")
    assert row.value is None
    assert row.limit is None


@pytest.mark.parametrize("step", ["0.02", "0.05"])
def test_points_that_miss_nearly_all_strength_are_not_judged(make_case, step):
    case = make_case(wavenumber=f"{{ start = 2145.01, stop = 2149.01, step = {step} }}", nodes=COLD_AND_THIN)
    row, accounts = closure_row(case)
    assert all(one["sampling"] < -0.99 for one in accounts)
    assert row.verdict == "cannot judge"
    assert "step too coarse at 4 of 4 nodes" in row.detail


def test_a_single_point_has_no_integral_and_is_not_judged(make_case):
    case = make_case(wavenumber="{ start = 2147.0, stop = 2147.0, step = 0.004 }")
    row, accounts = closure_row(case)
    assert row.verdict == "cannot judge"
    assert all(one["integral"] == 0.0 and one["in_reach"] == 0.0 for one in accounts)
    assert all(one["allowance"] == 1.0 for one in accounts)


def test_the_account_adds_up_by_hand(small):
    index, temperature, pressure = small.nodes()[3]
    nu, sigma = small.values.wavenumber, small.values.spectrum(*index)
    node = small.lines.at(temperature, pressure)
    account = closure_of(node, nu, sigma, 25.0, False, is_uniform(nu))
    assert account.integral == pytest.approx(np.trapezoid(sigma, nu), rel=1e-12)
    assert account.strength == node.strength.sum()
    inside = (node.centre > nu[0]) & (node.centre < nu[-1])
    # R(0) of 1-0 and a line of 2-1: both lie well inside, so that all but their wings count.
    assert inside.sum() == 2
    assert account.in_reach == pytest.approx(node.strength[inside].sum(), rel=0.03)
    assert account.difference == pytest.approx(account.integral / account.expected - 1.0)
    assert cell_widths(nu).sum() == pytest.approx(4.0)


def test_the_worst_node_is_named(small):
    sigma = small.values.sigma.copy()
    sigma[1, 0] *= 1.004
    row, _ = closure_row(small, small.with_sigma(sigma))
    assert row.verdict == "differs"
    assert "+4.0e-03 at 480 K, 0.01 bar" in row.detail
    sigma[1, 0] *= 0.0
    assert "-1.0e+00 at 480 K, 0.01 bar" in closure_row(small, small.with_sigma(sigma))[0].detail


def test_values_where_no_line_reaches_are_infinitely_wrong_and_still_plain(make_case):
    case = make_case(wavenumber="{ start = 3000.0, stop = 3001.0, step = 0.01 }")
    row, accounts = closure_row(case)
    assert row.verdict == "cannot judge"
    assert all(one["difference"] == 0.0 for one in accounts)
    sigma = case.values.sigma + 1e-30
    report = run_checks(case.with_sigma(sigma), case.recipe, case.lines, 1)
    assert [row.verdict for row in report.results] == ["cannot judge", "differs"]
    assert not report.passed
    assert report.figures["closure"][0]["difference"] is None
    json.dumps(report.figures, allow_nan=False)


def test_no_accounts_at_all_cannot_be_judged():
    assert judge_closure([], 1e-3).verdict == "cannot judge"


@pytest.mark.parametrize(
    "nu, even",
    [
        (np.linspace(2000.0, 2300.0, 120001), True),
        (np.array([2000.0, 2000.5]), True),
        (np.geomspace(2000.0, 2300.0, 1001), False),
        (np.array([1.0, 2.0, 4.0]), False),
        (np.array([1.0]), False),
        (np.concatenate([np.linspace(0.0, 1.0, 11), [1.1002]]), False),
    ],
    ids=["fine", "two", "log", "jump", "one", "last"],
)
def test_even_grids_are_told_from_others(nu, even):
    assert is_uniform(nu) is even
