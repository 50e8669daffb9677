"""Which width each line takes from which broadener, and what is said about what was not given."""

from __future__ import annotations

import numpy as np
import pytest

from opacity.arguments import DefaultWidth
from opacity.errors import MoleculeError
from opacity.molecule.broadening import Assumption, BroadenerColumns, resolve_broadening

NAN = np.nan
DEFAULT = DefaultWidth(0.07, 0.5, "from memory")


def given(gamma, exponent, shift):
    return BroadenerColumns(np.array(gamma), np.array(exponent), np.array(shift))


def notes(result):
    return {one.what: one.lines for one in result.assumptions}


FULL = {
    "h2": given([0.05, 0.06], [0.6, 0.7], [-0.001, 0.002]),
    "he": given([0.03, 0.04], [0.4, 0.5], [0.003, -0.004]),
    "air": given([0.08, 0.09], [0.74, 0.75], [-0.002, -0.003]),
    "self": given([0.10, 0.11], [NAN, 0.8], [NAN, NAN]),
}


def test_a_mixture_sums_by_mole_fraction():
    found = resolve_broadening(FULL, {"H2": 0.85, "He": 0.15}, {}, 2)
    assert found.broadeners == ("H2", "He")
    np.testing.assert_allclose(found.gamma, [[0.85 * 0.05, 0.85 * 0.06], [0.15 * 0.03, 0.15 * 0.04]], rtol=1e-15)
    np.testing.assert_array_equal(found.exponent, [[0.6, 0.7], [0.4, 0.5]])
    np.testing.assert_allclose(found.shift, [-0.85e-3 + 0.15 * 0.003, 0.85 * 0.002 - 0.15 * 0.004], rtol=1e-14)
    assert found.assumptions == ()


@pytest.mark.parametrize("name", ["h2", "H2"])
def test_names_are_matched_in_lower_case(name):
    found = resolve_broadening(FULL, {name: 1.0}, {}, 2)
    np.testing.assert_array_equal(found.gamma, [[0.05, 0.06]])


def test_what_was_given_is_left_as_it_was():
    columns = {"h2": given([NAN, 0.06], [0.6, NAN], [NAN, 0.0])}
    resolve_broadening(columns, {"H2": 1.0}, {"H2": DEFAULT}, 2)
    np.testing.assert_array_equal(columns["h2"].gamma, [NAN, 0.06])
    np.testing.assert_array_equal(columns["h2"].exponent, [0.6, NAN])


def test_a_default_serves_only_lines_without_a_width_and_is_counted():
    columns = {"h2": given([0.05, NAN, NAN], [0.6, 0.9, NAN], [0.001, 0.001, NAN])}
    found = resolve_broadening(columns, {"H2": 1.0}, {"H2": DEFAULT}, 3)
    np.testing.assert_array_equal(found.gamma, [[0.05, 0.07, 0.07]])
    # An exponent without a width goes with the width.
    np.testing.assert_array_equal(found.exponent, [[0.6, 0.5, 0.5]])
    np.testing.assert_array_equal(found.shift, [0.001, 0.001, 0.0])
    assert notes(found) == {
        "H2 width from the default 0.07 cm-1/bar, exponent 0.5 (from memory)": 2,
        "no pressure shift by H2 given: taken as 0": 1,
    }


def test_a_default_exponent_for_a_width_without_one():
    columns = {"h2": given([0.05, 0.06], [NAN, 0.7], [0.0, 0.0])}
    found = resolve_broadening(columns, {"H2": 1.0}, {"H2": DEFAULT}, 2)
    np.testing.assert_array_equal(found.gamma, [[0.05, 0.06]])
    np.testing.assert_array_equal(found.exponent, [[0.5, 0.7]])
    assert notes(found) == {"H2 temperature exponent from the default 0.5 (from memory)": 1}


def test_a_broadener_the_list_does_not_know_takes_the_default_for_all_lines():
    found = resolve_broadening(FULL, {"H2": 0.5, "N2": 0.5}, {"N2": DEFAULT}, 2)
    np.testing.assert_allclose(found.gamma[1], 0.5 * 0.07, rtol=1e-15)
    assert [one.lines for one in found.assumptions] == [2, 2]


def test_the_exponent_of_self_is_its_own_where_given_else_that_of_air():
    found = resolve_broadening(FULL, {"self": 1.0}, {}, 2)
    np.testing.assert_array_equal(found.gamma, [[0.10, 0.11]])
    np.testing.assert_array_equal(found.exponent, [[0.74, 0.8]])
    assert found.assumptions == (
        Assumption("no temperature exponent for self given: that of air taken", 1),
        Assumption("no pressure shift by self given: taken as 0", 2),
    )


def test_the_exponent_of_air_serves_self_alone():
    columns = {"air": FULL["air"], "h2": given([0.05, 0.06], [NAN, NAN], [0.0, 0.0])}
    with pytest.raises(MoleculeError, match=r"^broadeners: 2 of 2 lines have no temperature exponent by H2; expected"):
        resolve_broadening(columns, {"H2": 1.0}, {}, 2)


def test_self_without_any_exponent_takes_the_default_or_is_refused():
    columns = {"self": given([0.1], [NAN], [0.0]), "air": given([0.1], [NAN], [0.0])}
    found = resolve_broadening(columns, {"self": 1.0}, {"self": DEFAULT}, 1)
    assert found.exponent[0, 0] == 0.5
    assert found.gamma[0, 0] == 0.1
    for alone in (columns, {"self": columns["self"]}):
        with pytest.raises(MoleculeError, match=r"^broadeners: 1 of 1 lines have no temperature exponent by self"):
            resolve_broadening(alone, {"self": 1.0}, {}, 1)


def test_every_broadener_that_is_missing_is_named():
    columns = {"air": FULL["air"], "h2": given([0.05, NAN], [0.5, NAN], [0.0, 0.0])}
    with pytest.raises(MoleculeError) as caught:
        resolve_broadening(columns, {"H2": 0.5, "air": 0.2, "He": 0.3}, {}, 2)
    first, second = str(caught.value).splitlines()
    assert first == (
        "broadeners: 1 of 2 lines have no half-width by H2; expected columns for h2 in the list, or a default, found"
        " columns for air, h2; give [broadening.default.H2] with gamma, exponent and source in a recipe,"
        ' default_widths={"H2": DefaultWidth(...)} in Python'
    )
    assert second.startswith("broadeners: 2 of 2 lines have no half-width by He; expected columns for he in the list")
    assert caught.value.argument == "broadeners"
    with pytest.raises(MoleculeError, match="found columns for no broadener"):
        resolve_broadening({}, {"air": 1.0}, {}, 1)


def test_a_default_of_another_broadener_does_not_serve():
    with pytest.raises(MoleculeError, match=r"^broadeners: 2 of 2 lines have no half-width by N2;"):
        resolve_broadening(FULL, {"N2": 1.0}, {"H2": DEFAULT}, 2)


def test_no_lines():
    empty = {"air": given([], [], [])}
    found = resolve_broadening(empty, {"air": 0.5, "self": 0.5}, {}, 0)
    assert found.gamma.shape == found.exponent.shape == (2, 0)
    assert found.shift.shape == (0,)
    assert found.assumptions == ()
