"""What a recipe lacks before anything can be computed from it: one line each, in the order of the file."""

from __future__ import annotations

import shutil

import pytest

from opacity.errors import RecipeError
from opacity.pipeline.recipe_check import require_complete

H2 = ("mixture = { air = 1.0 }", "mixture = { H2 = 0.85, He = 0.15 }")


def lacks(path) -> list[str]:
    with pytest.raises(RecipeError) as caught:
        require_complete(path)
    assert all(line.startswith(f"{path}:") for line in caught.value.problems)
    return [line.removeprefix(f"{path}:") for line in caught.value.problems]


def line_of(path, words: str) -> int:
    (number,) = (n for n, line in enumerate(path.read_text().splitlines(), start=1) if words in line)
    return number


def test_a_complete_recipe_lacks_nothing(write_recipe):
    path = write_recipe()
    assert require_complete(path).path == path


def test_all_kinds_in_the_order_of_the_file(write_recipe, samples):
    path = write_recipe(
        "co",
        ('formula = "CO"', 'formula = "CO"\n# DECIDE: whether this is all'),
        (f"{samples}/carbon-monoxide.par", "none.par"),
        ("[partition_function]", "[partition_function] # DECIDE: which"),
        ("cutoff = 25.0", "cutoff = 25.0  # from memory"),
        ("tolerance = 1e-3", "tolerance = 1e-9"),
        ("[cross_section]", "[cross_section]\nkey = 1"),
    )
    found = lacks(path)
    places = [line.split(": ")[0] for line in found]
    keys = [line.split(": ")[1] for line in found]
    assert keys == [
        "molecule",
        "line_list[0].files[0]",
        "partition_function",
        "profile.cutoff",
        "profile.tolerance",
        "cross_section.key",
    ]
    assert [int(place) for place in places] == sorted(int(place) for place in places)
    assert found[0].endswith("not decided yet; expected whether this is all; decide, then remove the mark DECIDE")
    assert "no such file" in found[1]
    assert "a value from memory; expected a published source" in found[3]


def test_a_fault_of_what_is_still_to_be_decided_is_not_told_twice(write_recipe):
    path = write_recipe("co", ('reference = "the sample list"', 'reference = ""  # DECIDE: what to cite'))
    (one,) = lacks(path)
    assert one.startswith(f"{line_of(path, 'DECIDE')}: line_list[0].reference: not decided yet; expected what to cite;")


def test_a_recipe_used_before_all_is_decided_is_warned_of(opacity, write_recipe, tmp_path):
    path = write_recipe("co", ("cutoff = 25.0", "cutoff = 25.0  # DECIDE: how far"))
    code, out, _ = opacity("plan", path, "-o", tmp_path)
    assert code == 0
    assert f"warning: still marked DECIDE in the recipe: line {line_of(path, 'DECIDE')}\n" in out


def test_values_from_memory_are_told_unless_they_are_accepted(write_recipe):
    change = ("cutoff = 25.0", "cutoff = 25.0  # from memory")
    (one,) = lacks(write_recipe("co", change))
    assert "profile.cutoff: a value from memory" in one
    assert require_complete(write_recipe("co", change, ("[molecule]", "accept_unverified = true\n[molecule]")))


def test_broadeners_of_records(write_recipe):
    path = write_recipe("co", H2)
    first, second = lacks(path)
    assert first == (
        f"{line_of(path, 'mixture =')}: broadening.mixture.H2: nothing gives half-widths by H2 for line_list[0];"
        " expected air or self, the broadeners of records of 160 characters; give [broadening.default.H2] with gamma,"
        ' exponent and source, or files = { H2 = "X__H2.broad" }'
    )
    assert "broadening.mixture.He: nothing gives half-widths by He" in second
    default = '[broadening.default.{}]\ngamma = 0.07\nexponent = 0.5\nsource = "a book"\n\n'
    rest = ("[profile]", default.format("H2") + "[profile]")
    (only,) = lacks(write_recipe("co", H2, rest))
    assert "mixture.He" in only
    (path.parent / "CO__He.broad").write_text("a0 0.05 0.5 0\n")
    both = (H2[0], H2[1] + '\nfiles = { He = "CO__He.broad" }')
    assert require_complete(write_recipe("co", both, rest))
    unsourced = ("[profile]", default.format("H2").replace('source = "a book"\n', "") + "[profile]")
    found = lacks(write_recipe("co", both, unsourced))
    assert len(found) == 1
    assert "broadening.default.H2.source: missing; expected where the values come from" in found[0]


def test_broadeners_of_a_hapi_table(write_recipe, samples, tmp_path):
    for ending in ("data", "header"):
        shutil.copy(samples / f"carbon-monoxide.{ending}", tmp_path)
    table = (f'format = "hitran"\nfiles = ["{samples}/carbon-monoxide.par"]',
             'format = "hapi"\nfiles = ["carbon-monoxide.data"]')  # fmt: skip
    assert require_complete(write_recipe("co", table, H2))
    (one,) = lacks(write_recipe("co", table, (H2[0], "mixture = { H2 = 0.5, CO2 = 0.5 }")))
    assert "mixture.CO2: nothing gives half-widths by CO2 for line_list[0]; expected a column gamma_co2" in one
    (tmp_path / "carbon-monoxide.header").write_text("{")
    (one,) = lacks(write_recipe("co", table, H2))
    assert "line_list[0].files: cannot be used; found " in one


def test_a_catalogue_has_no_widths(write_recipe, samples, tmp_path):
    (tmp_path / "c028503.cat").write_text("\n")
    table = (f'format = "hitran"\nfiles = ["{samples}/carbon-monoxide.par"]',
             'format = "catalogue"\nfiles = ["c028503.cat"]\nisotopologue = "(12C)(16O)"')  # fmt: skip
    (one,) = lacks(write_recipe("co", table))
    assert one.endswith(
        "nothing gives half-widths by air for line_list[0]; expected a default, since catalogues have no widths;"
        " give [broadening.default.air] with gamma, exponent and source"
    )


def test_a_partition_file_that_does_not_hold_the_grid(write_recipe, tmp_path):
    (tmp_path / "q.pf").write_text("".join(f"{t} {t / 2.7664:.5f}\n" for t in range(20, 420, 20)))
    source = ('source = "TIPS-2021"', 'source = "file"\nfile = "q.pf"')
    (one,) = lacks(write_recipe("co", source))
    assert (
        "partition_function.source: file q.pf is not valid at every temperature of the grid; expected 20 to 400" in one
    )
    (tmp_path / "q.pf").write_text("x\n")
    with pytest.raises(RecipeError, match=r"q\.pf:1: "):
        require_complete(write_recipe("co", source))


def test_a_molecule_that_hapi_does_not_know(write_recipe):
    (one,) = lacks(write_recipe("co", ('formula = "CO"', 'formula = "Qq"')))
    assert "molecule.formula: hapi does not know this molecule" in one
