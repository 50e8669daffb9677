"""The plan: numbers that are right, refusals before any work, and warnings that name what they warn of."""

from __future__ import annotations

import json

import numpy as np
import pytest

from opacity.cross_sections.planner import predict
from opacity.errors import LineListError, OpacityError, ResourceError
from opacity.line_list.read import read_lines
from opacity.pipeline import needs as needs_module
from opacity.pipeline import plan as plan_module
from opacity.pipeline import sources as sources_module
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.kinds import table_name
from opacity.pipeline.needs import needs_of, workers_that_fit
from opacity.pipeline.plan import make_plan, refuse_what_cannot_fit
from opacity.pipeline.units import parted
from opacity.recipe.load import load_recipe

SHORT = "{ start = 2146.9, stop = 2147.3, step = 0.004 }"


def planned(path, folder):
    recipe = load_recipe(path)
    return make_plan(recipe, load_inputs(recipe), folder)


def message_of(path, folder, kind: type[OpacityError]) -> list[str]:
    with pytest.raises(kind) as caught:
        planned(path, folder)
    assert caught.type is kind
    return str(caught.value).split("\n")


def test_the_numbers_of_a_plan(write_recipe, tmp_path):
    path = write_recipe(cutoff="0.3")
    plan = planned(path, tmp_path)
    recipe = load_recipe(path)
    lines = load_inputs(recipe).lines.lines
    assert (plan.nodes, plan.points, plan.lines) == (4, 1001, len(lines))
    reached = np.abs(recipe.grid.wavenumber[:, None] - lines.wavenumber) <= 0.3
    # Points at just the cut-off may count or not.
    assert plan.profile_values == pytest.approx(4 * np.count_nonzero(reached), abs=4 * 2 * len(lines))
    one = predict(recipe.grid.wavenumber, 0.3, lines.wavenumber, 1.0)
    besides = needs_module.seconds_besides(4, 1001, len(lines), plan.profile_values / 4004)
    assert besides >= 4 * needs_module.AUDIT_SECONDS
    assert plan.by_cells == one.by_cells / one.tiles
    assert 0.7 * recipe.profile.tolerance <= plan.predicted_error <= recipe.profile.tolerance
    # Scaled by a trial on this machine.
    assert 0.1 * 4 * one.seconds <= plan.seconds - besides <= 30.0 * 4 * one.seconds
    assert (plan.units, plan.workers, plan.lines_per_unit) == (1, 1, len(lines))
    assert plan.ledger["read"] == 202 == plan.ledger["kept"] + sum(plan.ledger["left_out"].values())
    assert plan.assumptions == (("no pressure shift by air given: taken as 0", plan.lines),)
    assert plan.table == str(tmp_path / "co.cross-section.h5") == str(tmp_path / table_name(recipe))
    json.dumps(plan.as_dict(), allow_nan=False)
    assert not (tmp_path / "co.cross-section.h5").exists()


def test_lines_beyond_reach_are_left_out_and_counted(write_recipe, tmp_path, samples):
    plan = planned(write_recipe(cutoff="[{ to_pressure = 0.1, cutoff = 0.3 }, { cutoff = 4.0 }]"), tmp_path)
    recipe = load_recipe(tmp_path / "co.toml")
    lines = load_inputs(recipe).lines.lines
    # The widest cut-off decides who is in reach.
    everyone = read_lines(samples / "carbon-monoxide.par").wavenumber
    np.testing.assert_array_equal(lines.wavenumber, everyone[(everyone >= 2141.0) & (everyone <= 2153.0)])
    assert np.abs(lines.wavenumber - 2147.0).max() > 2.0 + 0.3
    assert plan.ledger["left_out"] == {"beyond the reach of the grid": 202 - plan.lines}


def test_memory_that_does_not_suffice_is_an_obstacle(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "available_memory", lambda: 100_000_000)
    path = write_recipe()
    (line,) = planned(path, tmp_path).obstacles
    assert line.startswith(f"{path}: the build does not fit in memory; expected at most 100 MB, found 550")
    assert line.endswith("for 4 x 1001 values; allow more with --memory, or use a larger machine")


def test_disk_that_does_not_suffice_is_an_obstacle(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "free_disk", lambda folder: 1000)
    plan = planned(write_recipe(), tmp_path)
    # Eight bytes a value, in shards and table: 2 x 4 x 1001 x 8 = 64 kB, and a megabyte for the rest.
    assert "the build does not fit in disk; expected at most 0.001 MB, found 1.064 MB for 4 x 1001" in plan.obstacles[0]
    assert json.loads(json.dumps(plan.as_dict()))["obstacles"] == list(plan.obstacles)
    with pytest.raises(ResourceError, match="does not fit in disk"):
        refuse_what_cannot_fit(plan)


def test_memory_counts_workers_and_every_record_read(write_recipe, tmp_path):
    one = planned(write_recipe(), tmp_path)
    finer = planned(write_recipe(wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.002 }"), tmp_path)
    assert finer.memory_per_worker - one.memory_per_worker == 3 * 8 * 4 * (2001 - 1001)
    assert finer.disk - one.disk == 2 * 8 * 4 * (2001 - 1001)
    axes = 8 * 1001 * (needs_module.COPIES_OF_AN_AXIS + needs_module.COPIES_OF_A_SPECTRUM)
    assert one.memory == needs_module.PROGRAM_BYTES + 600 * 202 + needs_module.ASSEMBLY_BYTES + axes
    recipe = load_recipe(write_recipe(wavenumber="{ start = 2145.0, stop = 2149.0, step = 1e-6 }"))
    lines = load_inputs(recipe).lines
    units = parted(recipe, lines, "")
    needs = [needs_of(recipe, lines, units, workers, False) for workers in (28, 29, 30)]
    assert needs[2].memory - needs[1].memory == needs[1].memory - needs[0].memory == needs[0].memory_per_worker
    for workers, need in enumerate(needs, start=28):
        assert workers_that_fit(recipe, lines, units, need.memory, False) == workers
        assert workers_that_fit(recipe, lines, units, need.memory - 1, False) == workers - 1
    plan = make_plan(recipe, load_inputs(recipe), tmp_path, 30, needs[1].memory)
    assert plan.workers == 29
    assert plan.limited == ("memory allows 29 of 30 workers",)
    assert not any("memory" in one for one in plan.warnings)


def test_where_the_system_does_not_say_nothing_is_refused(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "free_disk", lambda folder: None)
    monkeypatch.setattr(plan_module, "available_memory", lambda: None)
    plan = planned(write_recipe(), tmp_path)
    assert plan.memory_available == 2_000_000_000
    assert plan.disk_free is None
    assert plan.obstacles == ()


def test_a_default_width_is_counted(write_recipe, tmp_path):
    default = '[broadening.default.H2]\ngamma = 0.07\nexponent = 0.5\nsource = "a book"\n\n[profile]'
    path = write_recipe("co", ("{ air = 1.0 }", "{ H2 = 1.0 }"), ("[profile]", default))
    plan = planned(path, tmp_path)
    assert (
        "H2 width from the default 0.07 cm-1/bar, exponent 0.5 (a book)",
        plan.lines,
    ) in plan.assumptions


def test_overlapping_lists_of_an_isotopologue_are_refused(write_recipe, tmp_path, samples):
    copy = tmp_path / "copy.par"
    copy.write_bytes((samples / "carbon-monoxide.par").read_bytes())
    second = '[[line_list]]\nformat = "hitran"\nfiles = ["copy.par"]\nrange = [2140.0, 2160.0]\nreference = "r"\n\n'
    path = write_recipe("co", ("[isotopologues]", second + "[isotopologues]"))
    (line,) = message_of(path, tmp_path, LineListError)
    assert line.startswith("copy.par: holds lines of (12C)(16O) between 2142.47 and 2159.74 cm-1")
    assert f" cm-1, and so does {samples}/carbon-monoxide.par; give each list a range of its own" in line


def test_stores_whose_isotopologues_do_not_overlap_are_not_refused(write_recipe, tmp_path, samples, monkeypatch):
    """Each list holds lines of both isotopologues over its whole range, but no isotopologue overlaps with itself."""
    monkeypatch.setattr(sources_module, "SMALL_LIST", 0)
    records = (samples / "carbon-monoxide.par").read_text().splitlines(keepends=True)
    # First list: (13C)(16O) below 2100, (12C)(16O) above 2170; second list: between, the other way round.
    first = [line.replace(" 51", " 52", 1) if float(line[3:15]) < 2100.0 else line for line in records]
    first = [line for line in first if not 2100.0 <= float(line[3:15]) <= 2170.0]
    between = [line for line in records if 2100.0 <= float(line[3:15]) <= 2170.0]
    second = [line.replace(" 51", " 52", 1) if float(line[3:15]) > 2140.0 else line for line in between]
    (tmp_path / "first.par").write_text("".join(first))
    (tmp_path / "second.par").write_text("".join(second))
    other = '[[line_list]]\nformat = "hitran"\nfiles = ["second.par"]\nreference = "r"\n\n[isotopologues]'
    changes = (f"{samples}/carbon-monoxide.par", "first.par"), ("[isotopologues]", other), ('"pure"', '"terrestrial"')
    assert planned(write_recipe("co", *changes), tmp_path).lines > 0
    # One line of (12C)(16O) more, and it overlaps.
    (tmp_path / "second.par").write_text("".join([*second, first[-1].replace(first[-1][15:25], " 1.000E-30")]))
    (line,) = message_of(tmp_path / "co.toml", tmp_path, LineListError)
    assert line.startswith("second.par: holds lines of (12C)(16O) between 2172.76 and 2289.72 cm-1, and so does")


def test_a_coarse_step_is_named_with_node_and_share(write_recipe, tmp_path):
    plan = planned(write_recipe(wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.01 }"), tmp_path)
    assert [(one.temperature, one.pressure) for one in plan.coarse_nodes] == [(296.0, 0.01), (480.0, 0.01)]
    assert plan.coarse_nodes[0].at_risk == pytest.approx(0.5, abs=0.01)
    # Doppler half-width 3.581e-7 x 2147 x sqrt(296/28) = 0.0025 cm-1, and a third as much by pressure.
    assert plan.coarse_nodes[0].narrowest_half_width == pytest.approx(0.0028, abs=2e-4)
    (warning,) = plan.warnings
    assert warning.startswith(
        "the step is too coarse at 2 of 4 nodes: at 296 K, 0.01 bar 50 % of the strength is in lines that it does not"
        " resolve (narrowest half-width 0.00"
    )


def test_a_fine_step_is_not_warned_of(write_recipe, tmp_path):
    plan = planned(write_recipe(), tmp_path)
    assert plan.coarse_nodes == ()
    assert plan.warnings == ()


@pytest.mark.parametrize("highest, warned", [("700.0", False), ("701.0", True)])
def test_hot_grids_are_warned_of(write_recipe, tmp_path, highest, warned):
    plan = planned(
        write_recipe(wavenumber=SHORT, nodes=f"temperature = [296.0, {highest}]\npressure = [1.0]"), tmp_path
    )
    hot = [one for one in plan.warnings if f"lacks hot lines, and the grid goes to {float(highest):g} K" in one]
    assert bool(hot) is warned


def test_a_partition_function_with_a_step_is_warned_of(write_recipe, tmp_path):
    rows = [(t, 0.3 * t * (1.01 if t > 500 else 1.0)) for t in range(20, 1001, 10)]
    (tmp_path / "made.pf").write_text("".join(f"{t} {q}\n" for t, q in rows))
    choice = ('source = "TIPS-2021"', 'source = "file"\nfile = "made.pf"')
    (warning,) = planned(write_recipe("co", choice, wavenumber=SHORT), tmp_path).warnings
    assert warning.startswith(
        "partition function file made.pf is not smooth at 490, 500, 510, 520 K: a value lies more"
    )


def test_no_line_in_reach_is_warned_of(write_recipe, tmp_path):
    plan = planned(write_recipe(wavenumber="{ start = 3000.0, stop = 3001.0, step = 0.01 }"), tmp_path)
    assert plan.warnings == ("no line reaches the grid: every value will be 0",)
    assert plan.lines == 0
    assert plan.profile_values == 0.0


def test_editions_that_differ_are_named(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "editions_differ", lambda one, t: -0.02 if t > 400.0 else 0.001)
    plan = planned(write_recipe(), tmp_path)
    assert plan.warnings == ("partition function of (12C)(16O): TIPS-2021 and TIPS-2025 differ by -2.0 % at 480 K",)
