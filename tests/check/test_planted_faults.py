"""Faults planted in the values or in the lines: each must make a check differ, or keep the table from being written."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from opacity.check.run import run_checks
from opacity.constants import STANDARD_ATMOSPHERE
from opacity.errors import TableError
from opacity.tables.model import CrossSectionTable
from opacity.tables.write import check_table

SEEDS = (1, 2, 3)


def verdicts(case, values, seed=1):
    report = run_checks(values, case.recipe, case.lines, seed)
    assert report.passed == all(row.verdict != "differs" for row in report.results)
    return [row.verdict for row in report.results[:2]]


def with_broadening(lines, **changes):
    return replace(lines, broadening=replace(lines.broadening, **changes))


@pytest.mark.parametrize("seed", SEEDS)
def test_without_a_fault_all_agree(small, seed):
    assert verdicts(small, small.values, seed) == ["agrees", "agrees"]
    assert verdicts(small, small.computed_with(small.lines), seed) == ["agrees", "agrees"]


@pytest.mark.parametrize("factor", [0.97, 1.03, 0.997, 1.003])
def test_strengths_off_are_caught_by_closure_and_audit(small, factor):
    wrong = replace(small.lines, strength=factor * small.lines.strength)
    assert verdicts(small, small.computed_with(wrong)) == ["differs", "differs"]


def test_abundance_applied_twice_is_caught(small):
    # 0.9865444 of (12C)(16O) (hapi, TIPS-2021): 1.3 %.
    share = small.lines.isotopologues[0].abundance
    assert 0.98 < share < 0.99
    wrong = replace(small.lines, strength=share * small.lines.strength)
    assert verdicts(small, small.computed_with(wrong)) == ["differs", "differs"]


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("factor", [STANDARD_ATMOSPHERE, 1.0 / STANDARD_ATMOSPHERE])
def test_bar_taken_for_atm_is_caught_by_the_audit(small, factor, seed):
    wrong = with_broadening(small.lines, gamma=factor * small.lines.broadening.gamma)
    assert verdicts(small, small.computed_with(wrong), seed)[1] == "differs"


@pytest.mark.parametrize("seed", SEEDS)
def test_the_wrong_temperature_exponent_is_caught(small, seed):
    wrong = with_broadening(small.lines, exponent=small.lines.broadening.exponent - 0.05)
    assert verdicts(small, small.computed_with(wrong), seed)[1] == "differs"


@pytest.mark.parametrize("steps", [1, -1])
@pytest.mark.parametrize("seed", SEEDS)
def test_positions_off_by_one_step_are_caught(small, steps, seed):
    rolled = np.roll(small.values.sigma, steps, axis=-1)
    assert verdicts(small, small.with_sigma(rolled), seed)[1] == "differs"


@pytest.mark.parametrize("seed", SEEDS)
def test_a_shift_with_the_wrong_sign_is_caught(small, seed):
    # -0.003 cm-1/bar, of the size that is usual for CO in air (from memory).
    right = with_broadening(small.lines, shift=np.full(len(small.lines), -0.003))
    wrong = with_broadening(small.lines, shift=np.full(len(small.lines), 0.003))
    case = replace(small, lines=right)
    assert verdicts(case, case.computed_with(right), seed) == ["agrees", "agrees"]
    assert verdicts(case, case.computed_with(wrong), seed)[1] == "differs"


@pytest.mark.parametrize("seed", SEEDS)
def test_half_the_cutoff_is_caught(make_case, seed):
    case = make_case(cutoff="2.0")
    halved = type(case.recipe.profile.cutoff)((replace(case.recipe.profile.cutoff.steps[0], cutoff=1.0),))
    assert verdicts(case, case.computed_with(case.lines, cutoff=halved), seed)[1] == "differs"


@pytest.mark.parametrize("seed", SEEDS)
def test_plinth_forgotten_is_caught(small, seed):
    case = replace(small, recipe=replace(small.recipe, profile=replace(small.recipe.profile, plinth=True)))
    assert verdicts(case, case.computed_with(case.lines), seed) == ["agrees", "agrees"]
    assert verdicts(case, small.values, seed)[1] == "differs"


def test_a_peak_changed_by_one_per_cent_is_caught_by_both(make_case):
    """On a grid of few points every point is drawn by the audit; the closure sees the highest one anywhere."""
    case = make_case(wavenumber="{ start = 2146.9, stop = 2147.3, step = 0.004 }")
    sigma = case.values.sigma.copy()
    peak = int(np.argmax(sigma[0, 0]))
    sigma[0, 0, peak] *= 1.01
    assert verdicts(case, case.with_sigma(sigma)) == ["differs", "differs"]


def test_a_value_changed_by_one_per_cent_is_caught_with_the_chance_that_its_points_give(small):
    """The audit is a sample: about a tenth of 1001 points a node is drawn, so that enough seeds find a changed one."""
    caught = 0
    for seed in range(40):
        sigma = small.values.sigma.copy()
        sigma[1, 1, 321] *= 1.01
        caught += verdicts(small, small.with_sigma(sigma), seed)[1] == "differs"
    assert 1 <= caught < 40


def test_a_zero_set_above_zero_beyond_the_cutoff_is_caught(make_case):
    case = make_case(cutoff="0.05", wavenumber="{ start = 2146.9, stop = 2147.3, step = 0.004 }")
    zeros = np.flatnonzero(case.values.sigma[0, 0] == 0.0)
    assert zeros.size > 20
    caught = []
    for seed in range(4):
        sigma = case.values.sigma.copy()
        sigma[..., zeros[zeros.size // 2]] = 1e-35
        report = run_checks(case.with_sigma(sigma), case.recipe, case.lines, seed)
        caught.append(report.results[1].verdict)
        if caught[-1] == "differs":
            assert report.results[1].value == np.inf
            assert report.figures["audit"]["worst"]["exact"] == 0.0
    assert "differs" in caught


def test_a_value_set_to_zero_within_reach_is_caught(make_case):
    case = make_case(wavenumber="{ start = 2146.9, stop = 2147.3, step = 0.004 }")
    sigma = case.values.sigma.copy()
    sigma[0, 0, int(np.argmin(sigma[0, 0]))] = 0.0
    assert "differs" in [verdicts(case, case.with_sigma(sigma), seed)[1] for seed in SEEDS]


@pytest.mark.parametrize("value, found", [(np.nan, "nan"), (np.inf, "inf"), (-1e-30, "-1e-30")])
def test_a_value_that_cannot_be_is_not_written(small, tmp_path, value, found):
    sigma = small.values.sigma.copy()
    sigma[1, 0, 500] = value
    axes = (small.values.temperature, small.values.pressure, small.values.wavenumber)
    table = CrossSectionTable("CO", "CO", *axes, sigma, small.recipe.text, {}, {})
    with pytest.raises(TableError, match=rf"impossible cross_section at 480 K, 0.01 bar, 2147 cm-1; .*found {found}"):
        check_table(tmp_path / "table.h5", table)
