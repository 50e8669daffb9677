from __future__ import annotations

from collections.abc import Callable

import pytest

from opacity.cross_sections.tolerance import LARGEST_TOLERANCE, SMALLEST_TOLERANCE, SMALLEST_WITH_PLINTH
from opacity.errors import RecipeError
from opacity.recipe import sections

Faults = Callable[..., list[str]]

# (text of the full recipe, what replaces it, the whole problem line)
ONE_FAULT = [
    # molecule
    ('formula = "CO"', "", "2: molecule.formula: missing; expected a formula such as CO"),
    ('formula = "CO"', "formula = 3", "4: molecule.formula: not text; expected a formula such as CO, found 3"),
    (
        'formula = "CO"',
        'formula = "co/x"',
        '4: molecule.formula: impossible value; expected a formula such as CO, found "co/x"',
    ),
    (
        'name = "carbon monoxide"',
        'name = " "',
        '3: molecule.name: empty text; expected the molecule\'s name, such as carbon monoxide, found " "',
    ),
    (
        'name = "carbon monoxide"',
        'name = "a\\nb"',
        "3: molecule.name: text with a control character or a line break; "
        'expected the molecule\'s name, such as carbon monoxide, found "a\\nb"',
    ),
    (
        "mass = 28",
        "mass = -28",
        "5: molecule.mass: impossible value; expected a number above 0 and at most 10000 g/mol, found -28",
    ),
    (
        "mass = 28",
        "mas = 28",
        '5: molecule.mas: unknown key; expected name, formula or mass, found "mas"; did you mean mass?',
    ),
    (
        "[molecule]",
        "[molecules]",
        "2: molecules: unknown key; expected molecule, line_list, isotopologues, "
        "partition_function, broadening, profile, grid, cross_section, k_coefficient, band_strength or "
        'accept_unverified, found "molecules"; '
        "did you mean molecule?",
    ),
    # isotopologues and partition function
    (
        '"2" = 0.1 }',
        '"2" = 0.2 }',
        "23: isotopologues.abundance: fractions add up to more than 1; expected at most 1, found 1.1",
    ),
    (
        '"2" = 0.1 }',
        '"2 b" = 0.1 }',
        '23: isotopologues.abundance."2 b": impossible name; expected isotopologue in letters and digits, found "2 b"',
    ),
    (
        '"2" = 0.1 }',
        '"2" = true }',
        "23: isotopologues.abundance.2: not a number; expected a number above 0 and at most 1, found true",
    ),
    (
        '{ "(12C)(16O)" = 0.9, "2" = 0.1 }',
        '"terestrial"',
        '23: isotopologues.abundance: unknown value; expected "terrestrial" or "pure", or a table of fractions '
        'by isotopologue, found "terestrial"; did you mean "terrestrial"?',
    ),
    (
        'source = "file"\nfile = "CO.pf"',
        'source = "tips2021"',
        '26: partition_function.source: unknown value; expected "TIPS-2021", "TIPS-2025", "file" or "states", '
        'found "tips2021"; did you mean "TIPS-2021"?',
    ),
    (
        'source = "file"\nfile',
        'source = "TIPS-2025"\nfile',
        '27: partition_function.file: not read with this source; expected source = "file", found "TIPS-2025"',
    ),
    (
        'file = "CO.pf"',
        "",
        "25: partition_function.file: missing; expected the name of a file of temperature and partition function",
    ),
    (
        'file = "CO.pf"',
        'file = "no.pf"',
        '27: partition_function.file: no such file; expected a file in FOLDER, found "no.pf"',
    ),
    (
        'source = "file"\nfile = "CO.pf"',
        "",
        '25: partition_function.source: missing; expected "TIPS-2021", "TIPS-2025", "file" or "states"',
    ),
    # broadening
    ("He = 0.15", "He = 0.16", "30: broadening.mixture: mole fractions do not add up to 1; expected 1, found 1.01"),
    (
        "He = 0.15",
        "He = 0.15, CO2 = 0",
        "30: broadening.mixture.CO2: a fraction of 0; expected a number above 0 and at most 1; leave it out",
    ),
    (
        "He = 0.15",
        "He = nan",
        "30: broadening.mixture.He: impossible value; expected a number above 0 and at most 1, found nan",
    ),
    (
        "[broadening.default.H2]",
        "[broadening.default.h2]",
        "32: broadening.default.h2: not in broadening.mixture; expected H2 or He; did you mean H2?",
    ),
    (
        "gamma = 0.07",
        "gamma = 70",
        "33: broadening.default.H2.gamma: impossible value; expected a number above 0 and at most 10 cm-1/bar, "
        "found 70",
    ),
    (
        "exponent = 0.5",
        'exponent = "0.5"',
        '34: broadening.default.H2.exponent: not a number; expected a number from -2 to 2, found "0.5"',
    ),
    (
        'source = "from memory"',
        "",
        '32: broadening.default.H2.source: missing; expected where the values come from, if need be "from memory"',
    ),
    # profile
    (
        "cutoff = [{ to_pressure = 200.0, cutoff = 25.0 }, { cutoff = 100.0 }]",
        "cutoff = 0",
        "38: profile.cutoff: impossible value; expected a number above 0 and at most 1e+06 cm-1, found 0",
    ),
    (
        "cutoff = [{ to_pressure = 200.0, cutoff = 25.0 }, { cutoff = 100.0 }]",
        "",
        "37: profile.cutoff: missing; expected a number above 0 and at most 1e+06 cm-1",
    ),
    (
        "cutoff = [{ to_pressure = 200.0, cutoff = 25.0 }, { cutoff = 100.0 }]",
        "cutoff = [25.0]",
        "38: profile.cutoff: not a list of steps; expected steps such as "
        "[{ to_pressure = 200.0, cutoff = 25.0 }, { cutoff = 100.0 }], found a list of 1",
    ),
    (
        "{ cutoff = 100.0 }]",
        "{ to_pressure = 300, cutoff = 100.0 }]",
        "38: profile.cutoff[1].to_pressure: the last step has an upper pressure; "
        "expected a last step without to_pressure, for all higher pressures, found 300",
    ),
    (
        "{ cutoff = 100.0 }]",
        "\n{ to_pressure = 200, cutoff = 50 }, { cutoff = 100.0 }]",
        "39: profile.cutoff[1].to_pressure: not in rising order; expected above 200 bar, found 200",
    ),
    (
        "{ cutoff = 100.0 }]",
        "{ cutoff = 50 }, { cutoff = 100.0 }]",
        "38: profile.cutoff[1].to_pressure: missing; expected a number from 1e-12 to 100000 bar",
    ),
    (
        "tolerance = 1e-4",
        "tolerance = 1e-7",
        "39: profile.tolerance: impossible value; expected a number from 2e-06 to 0.1 with plinth, found 1e-07",
    ),
    ("plinth = true", "plinth = 1", "40: profile.plinth: not a boolean; expected true or false, found 1"),
    (
        "plinth = true",
        'chi = "x"',
        '40: profile.chi: no such set of chi factors; expected "Tonkov-1996" or "Hartmann-2002", found "x"',
    ),
    # wanted tables
    (
        "[cross_section]",
        "",
        "1: cross_section: missing; expected an empty section [cross_section], "
        "or a section [k_coefficient]: the tables wanted",
    ),
    (
        "[cross_section]",
        "[cross_section]\nbands = 1",
        '48: cross_section.bands: unknown key; expected no keys, found "bands"',
    ),
    (
        "[cross_section]",
        "[cross_section]\n[k_coefficient]",
        "48: k_coefficient.bands: missing; expected { resolving_power }, { width }, { edges } or { wavelength }",
    ),
    # band strengths
    (
        'unit = "cm/molecule"',
        'unit = "cm-2 atm-1"',
        '53: band_strength[0].unit: unknown value; expected "cm/molecule", "km/mol", "cm/mol", '
        '"cm-2 atm-1 (273.15 K)", "cm-2 atm-1 (296 K)", "cm-2 atm-1 (300 K)" or "cm-2 amagat-1", found "cm-2 atm-1"; '
        'say at which temperature the gas was: "cm-2 atm-1 (273.15 K)", "cm-2 atm-1 (296 K)" or "cm-2 atm-1 (300 K)"',
    ),
    (
        "uncertainty = 0.007",
        "uncertainty = 7",
        "55: band_strength[0].uncertainty: impossible value; expected a number above 0 and at most 1, found 7",
    ),
    (
        "strength = 1.013e-17",
        f"strength = 1{'0' * 400}",
        "52: band_strength[0].strength: impossible value; expected a number above 0 and at most 1e+09, "
        "found a whole number of more than 19 digits",
    ),
    (
        "range = [2000.0, 2250.0]",
        "",
        "49: band_strength[0].range: missing; expected [lo, hi] cm-1 with 0 <= lo < hi <= 1e+06",
    ),
    (
        "[[band_strength]]",
        "[band_strength]",
        "49: band_strength: not an array of tables; expected [[band_strength]], found a table; write [[band_strength]]",
    ),
]


@pytest.mark.parametrize("plinth, smallest, words", [("false", "1e-06", ""), ("true", "2e-06", " with plinth")])
def test_the_smallest_tolerance_depends_on_the_plinth(faults: Faults, plinth: str, smallest: str, words: str) -> None:
    changes = (("tolerance = 1e-4", "tolerance = 9e-7"), ("plinth = true", f"plinth = {plinth}"))
    expected = f"expected a number from {smallest} to 0.1{words}, found 9e-07"
    assert faults(*changes) == [f"co.toml:39: profile.tolerance: impossible value; {expected}"]


def test_a_recipe_and_a_call_have_the_same_tolerances() -> None:
    assert (sections._TOLERANCE.low, sections._TOLERANCE.high) == (SMALLEST_TOLERANCE, LARGEST_TOLERANCE)
    with_plinth = sections._TOLERANCE_WITH_PLINTH
    assert (with_plinth.low, with_plinth.high) == (SMALLEST_WITH_PLINTH, LARGEST_TOLERANCE)


@pytest.mark.parametrize("old, new, expected", ONE_FAULT)
def test_one_fault_gives_one_line(faults: Faults, old: str, new: str, expected: str) -> None:
    assert faults((old, new)) == [f"co.toml:{expected}"]


def test_every_missing_section_is_named(faults: Faults) -> None:
    lines = faults(text="# nothing yet\n")
    assert [line.split("; ")[0] for line in lines] == [
        f"co.toml:1: {name}: missing"
        for name in (
            "molecule", "line_list", "partition_function", "broadening", "profile", "grid", "cross_section",
        )
    ]  # fmt: skip


def test_many_faults_come_at_once_in_the_order_of_the_file(faults: Faults) -> None:
    lines = faults(
        ("mass = 28", "mass = inf"),
        ('format = "hapi"', 'format = "hapy"'),
        ('reference = "second"', "referense = 1"),
        ("exponent = 0.5", "exponent = true"),
        ("plinth = true", "plint = true"),
        ("[300.0, 1000]", "[1000, 300.0]"),
        ("[cross_section]", "[k_coefficient]\ng_points = 16\n"),
        ("uncertainty = 0.007", ""),
    )
    assert [line.split("; ")[0] for line in lines] == [
        "co.toml:5: molecule.mass: impossible value",
        "co.toml:14: line_list[1].format: unknown value",
        "co.toml:19: line_list[1].referense: unknown key",
        "co.toml:34: broadening.default.H2.exponent: not a number",
        "co.toml:40: profile.plint: unknown key",
        "co.toml:44: grid.temperature[1]: not in rising order",
        "co.toml:47: k_coefficient.bands: missing",
        "co.toml:51: band_strength[0].uncertainty: missing",
    ]


def test_the_error_carries_exit_code_and_all_lines() -> None:
    error = RecipeError(["a: b", "c: d"])
    assert (error.exit_code, str(error)) == (2, "a: b\nc: d")
