"""Choices of a recipe that do not fit its lines: one line each, with the recipe's file, line and key."""

from __future__ import annotations

import re

import numpy as np
import pytest

from opacity.errors import LineListError, MoleculeError, OpacityError, RecipeError
from opacity.line_list.read import read_lines
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.plan import make_plan
from opacity.recipe.load import load_recipe

VELLINE = """\
[molecule]
name = "velline (invented)"
formula = "Vl"
mass = 24.0

[[line_list]]
format = "hitran"
files = ["{samples}/invented-molecule.par"]
reference = "invented"

[isotopologues]
abundance = "pure"

[partition_function]
source = "file"
file = "{samples}/invented-molecule.pf"

[broadening]
mixture = {{ {mixture} }}

[profile]
cutoff = 5.0

[grid]
wavenumber = {{ start = 2990.0, stop = 2992.0, step = 0.004 }}
temperature = [{temperature}]
pressure = [0.1]

[cross_section]
"""


def planned(path, folder):
    recipe = load_recipe(path)
    return make_plan(recipe, load_inputs(recipe), folder)


def message_of(path, folder, kind: type[OpacityError] = RecipeError) -> list[str]:
    """The lines of the error without the recipe's file; each must name the line on which its key stands."""
    with pytest.raises(kind) as caught:
        planned(path, folder)
    assert caught.type is kind
    found = str(caught.value).split("\n")
    if kind is not RecipeError:
        return found
    text = path.read_text().splitlines()
    for line in found:
        place = re.match(rf"{re.escape(str(path))}:(\d+): ([a-z_.]+)(?:\[\d\])?([a-z_.]*): ", line)
        assert place is not None, line
        assert text[int(place[1]) - 1].startswith((place[2] + place[3]).split(".")[-1]), line
    return [re.sub(r":\d+", "", line.removeprefix(f"{path}"), count=1).removeprefix(": ") for line in found]


@pytest.fixture
def velline(tmp_path, samples):
    def write(*replacements, temperature="300.0", mixture="air = 1.0"):
        text = VELLINE.format(samples=samples, temperature=temperature, mixture=mixture)
        for old, new in replacements:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        path = tmp_path / "velline.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return write


def test_temperatures_beyond_the_partition_function_are_listed(velline, tmp_path):
    assert message_of(velline(temperature="40.0, 300.0, 3001.0, 4000.0"), tmp_path) == [
        "partition_function.source: file invented-molecule.pf is not valid at every temperature of the grid;"
        " expected 50 to 3000 K, found 40 K, 3001 K, 4000 K; choose another source or other temperatures"
    ]
    many = ", ".join(f"{t}.0" for t in (300, *range(3001, 3011)))
    (line,) = message_of(velline(temperature=many), tmp_path)
    assert "found 3001 K, 3002 K, 3003 K, 3004 K, 3005 K, 3006 K and 4 more; choose" in line


def test_temperatures_below_the_trusted_range_of_tips_are_refused(write_recipe, tmp_path):
    (line,) = message_of(write_recipe(nodes="nodes = [[10.0, 0.1], [296.0, 0.1]]"), tmp_path)
    assert line.startswith("partition_function.source: TIPS-2021 (12C)(16O) is not valid at every temperature of the")
    assert "found 10 K" in line


def test_missing_broadening_is_refused_naming_each_broadener(write_recipe, tmp_path):
    path = write_recipe("co", ("{ air = 1.0 }", "{ H2 = 0.8, He = 0.2 }"))
    assert message_of(path, tmp_path) == [
        f"broadening.mixture: 29 of 29 lines have no half-width by {name}; expected columns for {name.lower()} in the"
        f" list, or a default, found columns for air, self; give [broadening.default.{name}] with gamma, exponent and"
        f' source in a recipe, default_widths={{"{name}": DefaultWidth(...)}} in Python'
        for name in ("H2", "He")
    ]


def test_a_mass_for_a_molecule_that_is_known_is_refused(write_recipe, tmp_path):
    path = write_recipe("co", ('formula = "CO"', 'formula = "CO"\nmass = 28.0'))
    assert message_of(path, tmp_path) == ["molecule.mass: hapi knows CO and its isotopologues' masses; remove the key"]


def test_an_unknown_molecule_needs_its_mass(velline, tmp_path):
    assert planned(velline(), tmp_path).lines > 0
    assert message_of(velline(("mass = 24.0\n", "")), tmp_path) == [
        "molecule.formula: hapi does not know this molecule; expected a formula of HITRAN such as CO, or the molecule's"
        ' mass (g/mol) beside it, found "Vl"; mend the formula, or add mass to [molecule]'
    ]


def test_tips_does_not_serve_an_unknown_molecule(velline, tmp_path, samples):
    file = f'source = "file"\nfile = "{samples}/invented-molecule.pf"'
    assert message_of(velline((file, 'source = "TIPS-2021"')), tmp_path) == [
        "partition_function.source: TIPS-2021 does not hold Vl; give a file of T and Q"
    ]


@pytest.mark.parametrize("bad_records", ["stop", "leave-out"])
def test_a_formula_that_is_not_that_of_the_lines_names_both(write_recipe, tmp_path, samples, bad_records):
    path = write_recipe(
        "co", ('formula = "CO"', 'formula = "H2O"'), ('reference = "', f'bad_records = "{bad_records}"\nreference = "')
    )
    (line,) = message_of(path, tmp_path)
    assert line == (
        f"molecule.formula: {samples}/carbon-monoxide.par:1 is a record of another molecule; expected records of H2O,"
        " found CO in 202 of 202 records; the formula or the list is wrong"
    )


@pytest.mark.parametrize(
    "abundance, message",
    [
        ('{ "(13C)(16O)" = 1.0 }', "no lines of isotopologue (13C)(16O); expected (12C)(16O) (1)"),
        ('{ "1" = 0.5, "(12C)(16O)" = 0.5 }', "(12C)(16O) is given twice; name it by formula or by number"),
    ],
)
def test_abundances_that_do_not_fit_the_lines(write_recipe, tmp_path, abundance, message):
    path = write_recipe("co", ('abundance = "pure"', f"abundance = {abundance}"))
    assert message_of(path, tmp_path) == [f"isotopologues.abundance: {message}"]


def test_a_damaged_partition_file_is_no_fault_of_the_recipe(velline, tmp_path, samples):
    (tmp_path / "bad.pf").write_text("50 1\n300 x\n")
    choice = (f'file = "{samples}/invented-molecule.pf"', 'file = "bad.pf"')
    (line,) = message_of(velline(choice), tmp_path, MoleculeError)
    assert line.startswith(f"{tmp_path}/bad.pf:2: not a row of a partition function")
    (tmp_path / "bad.pf").write_text("".join(f"{t} {t}\n" for t in range(300, 3000, 100)))
    (line,) = message_of(velline(choice), tmp_path, MoleculeError)
    assert line.startswith(f"{tmp_path}/bad.pf: the partition function does not hold 296 K, to which the strengths")


@pytest.fixture
def several(tmp_path, samples, write_recipe):
    """A recipe for a list of which every third line is made one of (13C)(16O), but none around 2147 cm-1."""
    rows = (samples / "carbon-monoxide.par").read_text().splitlines(keepends=True)

    def is_other(number, row):
        return number % 3 == 0 and not 2110.0 < float(row[3:15]) < 2190.0

    rows = [row[:2] + "2" + row[3:] if is_other(n, row) else row for n, row in enumerate(rows)]
    (tmp_path / "several.par").write_text("".join(rows))
    others = sum(row[2] == "2" for row in rows)

    def write(*replacements, **changes):
        return write_recipe("co", (f"{samples}/carbon-monoxide.par", "several.par"), *replacements, **changes)

    return write, others


WIDE = "{ start = 2050.0, stop = 2060.0, step = 0.01 }"


@pytest.mark.parametrize("name, local", [("(12C)(16O)", 1), ("1", 1), ("(13C)(16O)", 2), ("2", 2)])
def test_the_isotopologue_of_a_list_is_selected_and_the_others_are_counted(several, tmp_path, name, local):
    write, others = several
    choice = ('reference = "', f'isotopologue = "{name}"\nreference = "')
    inputs = load_inputs(load_recipe(write(choice, wavenumber=WIDE)))
    assert [one.local for one in inputs.lines.lines.isotopologues] == [local]
    left_out = inputs.lines.lines.ledger.as_dict()["left_out"]
    assert left_out["another isotopologue than the one chosen"] == (others if local == 1 else 202 - others)
    everything = read_lines(tmp_path / "several.par")
    own = np.array([one.local for one in everything.isotopologues])[everything.isotopologue] == local
    near = (everything.wavenumber >= 2025.0) & (everything.wavenumber <= 2085.0)
    np.testing.assert_array_equal(inputs.lines.lines.wavenumber, everything.wavenumber[own & near])
    assert len(inputs.lines) > 0


def test_an_isotopologue_that_is_not_there_is_named_at_its_line(several, tmp_path):
    write, _ = several
    for name, message in (
        ("(12C)(13C)", "CO has no isotopologue (12C)(13C); expected (12C)(16O) (1), (13C)(16O) (2), (12C)(18O) (3), "),
        ("3", "the list holds no line of 3; expected (12C)(16O) (1), (13C)(16O) (2)"),
    ):
        path = write(('reference = "', f'isotopologue = "{name}"\nreference = "'))
        (line,) = message_of(path, tmp_path)
        assert line.startswith(f"line_list[0].isotopologue: {message}")


def test_an_isotopologue_beyond_the_reach_of_the_grid_decides_nothing(several, tmp_path, samples):
    write, _ = several
    # With lines of two in reach "pure" is refused; around 2147 cm-1 there is one.
    (line,) = message_of(write(wavenumber=WIDE), tmp_path)
    assert line.startswith('isotopologues.abundance: "pure" needs lines of one isotopologue; expected one, found (1')
    inputs = load_inputs(load_recipe(write()))
    assert [one["formula"] for one in inputs.provenance["isotopologues"]] == ["(12C)(16O)"]
    assert list(inputs.provenance["partition_function"]["valid"]) == ["TIPS-2021 (12C)(16O)"]
    # Its fraction may stand in the recipe all the same, and a file of Q serves the one that is left.
    (tmp_path / "made.pf").write_text("".join(f"{t} {t}\n" for t in range(20, 1000, 10)))
    path = write(
        ('abundance = "pure"', 'abundance = { "1" = 0.75, "2" = 0.25 }'),
        ('source = "TIPS-2021"', 'source = "file"\nfile = "made.pf"'),
    )
    shared = load_inputs(load_recipe(path))
    assert shared.provenance["isotopologues"][0]["abundance"] == 0.75
    assert shared.lines.lines.strength == pytest.approx(0.75 * inputs.lines.lines.strength, rel=1e-15)
    path = write(('abundance = "pure"', 'abundance = { "1" = 0.75, "3" = 0.25 }'))
    (line,) = message_of(path, tmp_path)
    assert line.startswith("isotopologues.abundance: no lines of isotopologue 3; expected (12C)(16O) (1), (13C)(16O)")


def test_one_file_of_q_cannot_serve_two_isotopologues(several, tmp_path):
    write, _ = several
    (tmp_path / "made.pf").write_text("".join(f"{t} {t}\n" for t in range(20, 1000, 10)))
    path = write(
        ('abundance = "pure"', 'abundance = "terrestrial"'),
        ('source = "TIPS-2021"', 'source = "file"\nfile = "made.pf"'),
        wavenumber=WIDE,
    )
    (line,) = message_of(path, tmp_path)
    assert line.startswith("partition_function.source: one file serves one isotopologue, and made.pf is to serve 2;")


def test_an_account_that_does_not_add_up_is_an_error(write_recipe, tmp_path, monkeypatch):
    from opacity.line_list import model

    monkeypatch.setattr(model.Ledger, "leave_out", lambda self, reason, count: None)
    (line,) = message_of(write_recipe(), tmp_path, LineListError)
    assert line.endswith(
        "carbon-monoxide.par: the account of the records does not add up, a fault of this program;"
        " found 202 kept and 0 left out of 202, 29 lines"
    )
