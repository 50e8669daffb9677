"""The plan: numbers that are right, refusals before any work, and warnings that name what they warn of."""

from __future__ import annotations

import json
from collections import namedtuple

import numpy as np
import pytest

from opacity.errors import LineListError, MoleculeError, OpacityError, RecipeError, ResourceError
from opacity.line_list.read import read_lines
from opacity.pipeline import plan as plan_module
from opacity.pipeline import resources
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.plan import make_plan, table_name
from opacity.recipe.load import load_recipe

SHORT = "{ start = 2146.9, stop = 2147.3, step = 0.004 }"
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


def message_of(path, folder, kind: type[OpacityError]) -> list[str]:
    with pytest.raises(kind) as caught:
        planned(path, folder)
    assert caught.type is kind
    return str(caught.value).split("\n")


@pytest.fixture
def velline(tmp_path, samples):
    def write(temperature="300.0", mixture="air = 1.0", text=VELLINE):
        path = tmp_path / "velline.toml"
        path.write_text(text.format(samples=samples, temperature=temperature, mixture=mixture), encoding="utf-8")
        return path

    return write


def test_the_numbers_of_a_plan(write_recipe, tmp_path):
    path = write_recipe(cutoff="0.3")
    plan = planned(path, tmp_path)
    recipe = load_recipe(path)
    lines = load_inputs(recipe).lines
    assert (plan.nodes, plan.points, plan.lines) == (4, 1001, len(lines))
    reached = np.abs(recipe.grid.wavenumber[:, None] - lines.wavenumber) <= 0.3
    # Points at just the cut-off may count or not.
    assert plan.profile_values == pytest.approx(4 * np.count_nonzero(reached), abs=4 * 2 * len(lines))
    assert plan.seconds == plan.profile_values / plan_module.EVALUATIONS_PER_SECOND
    assert plan.disk >= 4 * 1001 * 4
    assert plan.memory > 4 * 1001 * 20
    assert plan.ledger["read"] == 202 == plan.ledger["kept"] + sum(plan.ledger["left_out"].values())
    assert plan.assumptions == (("no pressure shift by air given: taken as 0", plan.lines),)
    assert plan.table == str(tmp_path / "co.cross-section.h5") == str(tmp_path / table_name(recipe))
    json.dumps(plan.as_dict(), allow_nan=False)
    assert not (tmp_path / "co.cross-section.h5").exists()


def test_lines_beyond_reach_are_left_out_and_counted(write_recipe, tmp_path, samples):
    plan = planned(write_recipe(cutoff="[{ to_pressure = 0.1, cutoff = 0.3 }, { cutoff = 4.0 }]"), tmp_path)
    recipe = load_recipe(tmp_path / "co.toml")
    lines = load_inputs(recipe).lines
    # The widest cut-off decides who is in reach.
    everyone = read_lines(samples / "carbon-monoxide.par").wavenumber
    np.testing.assert_array_equal(lines.wavenumber, everyone[(everyone >= 2141.0) & (everyone <= 2153.0)])
    assert np.abs(lines.wavenumber - 2147.0).max() > 2.0 + 0.3
    assert plan.ledger["left_out"] == {"beyond the reach of the grid": 202 - plan.lines}


def test_memory_that_does_not_suffice_is_refused(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "available_memory", lambda: 100_000_000)
    path = write_recipe()
    (line,) = message_of(path, tmp_path, ResourceError)
    assert line.startswith(f"{path}: the build does not fit in memory; expected at most 100 MB, found 400")
    assert line.endswith("for 4 nodes of 1001 points; use fewer nodes, fewer points or a larger machine")


def test_disk_that_does_not_suffice_is_refused(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "free_disk", lambda folder: 1000)
    (line,) = message_of(write_recipe(), tmp_path, ResourceError)
    assert "the build does not fit in disk; expected at most 0.001 MB, found 1.016 MB for 4 nodes" in line


def test_where_the_system_does_not_say_nothing_is_refused(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "free_disk", lambda folder: None)
    monkeypatch.setattr(plan_module, "available_memory", lambda: None)
    plan = planned(write_recipe(), tmp_path)
    assert plan.memory_available is None
    assert plan.disk_free is None


def test_resources_are_those_of_this_process(tmp_path, monkeypatch):
    usage = namedtuple("usage", "total used free")  # as shutil.disk_usage gives it
    asked = []

    def disk_usage(place):
        asked.append(place)
        if not place.exists():
            raise FileNotFoundError(place)
        return usage(10, 3, 7)

    monkeypatch.setattr(resources.shutil, "disk_usage", disk_usage)
    assert resources.free_disk(tmp_path / "not" / "yet") == 7
    assert asked[-1] == tmp_path
    files = {
        "/proc/meminfo": ["MemTotal: 9 kB", "MemAvailable:       5000 kB"],
        "/sys/fs/cgroup/memory.max": ["3000000"],
        "/sys/fs/cgroup/memory.current": ["1000000"],
        "/sys/fs/cgroup/cpu.max": ["250000 100000"],
    }
    monkeypatch.setattr(resources, "_lines", lambda path: files.get(str(path), []))
    monkeypatch.setattr(resources.os, "sched_getaffinity", lambda who: set(range(8)), raising=False)
    assert resources.available_memory() == 2_000_000
    assert resources.allowed_cpus() == 2
    files["/sys/fs/cgroup/memory.max"] = ["max"]
    files["/sys/fs/cgroup/cpu.max"] = ["max 100000"]
    assert resources.available_memory() == 5000 * 1024
    assert resources.allowed_cpus() == 8
    files.clear()
    assert resources.available_memory() is None
    assert resources.allowed_cpus() == 8


def test_temperatures_beyond_the_partition_function_are_listed(velline, tmp_path):
    (line,) = message_of(velline("40.0, 300.0, 3001.0, 4000.0"), tmp_path, MoleculeError)
    assert line == (
        "partition function file invented-molecule.pf: not valid at every temperature of the grid;"
        " expected 50 to 3000 K, found 40 K, 3001 K, 4000 K; choose another source or other temperatures"
    )


def test_temperatures_below_the_trusted_range_of_tips_are_refused(write_recipe, tmp_path):
    (line,) = message_of(write_recipe(nodes="nodes = [[10.0, 0.1], [296.0, 0.1]]"), tmp_path, MoleculeError)
    assert line.startswith("partition function TIPS-2021 (12C)(16O): not valid at every temperature of the grid")
    assert "found 10 K" in line


def test_missing_broadening_is_refused_naming_each_broadener(write_recipe, tmp_path):
    path = write_recipe("co", ("{ air = 1.0 }", "{ H2 = 0.8, He = 0.2 }"))
    lines = message_of(path, tmp_path, MoleculeError)
    assert len(lines) == 2
    for line, name in zip(lines, ("H2", "He"), strict=True):
        assert line.startswith(f"broadening by {name}: 29 of 29 lines have no half-width; found columns for air, self;")
        assert line.endswith(
            f"give [broadening.default.{name}] with gamma, exponent and source, or a list with these columns"
        )


def test_a_default_width_is_counted(write_recipe, tmp_path):
    default = '[broadening.default.H2]\ngamma = 0.07\nexponent = 0.5\nsource = "from memory"\n\n[profile]'
    path = write_recipe("co", ("{ air = 1.0 }", "{ H2 = 1.0 }"), ("[profile]", default))
    plan = planned(path, tmp_path)
    assert (
        "H2 width from the recipe's default 0.07 cm-1/bar, exponent 0.5 (from memory)",
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


def test_a_mass_for_a_molecule_that_is_known_is_refused(write_recipe, tmp_path):
    path = write_recipe("co", ('formula = "CO"', 'formula = "CO"\nmass = 28.0'))
    (line,) = message_of(path, tmp_path, RecipeError)
    assert line == f"{path}: molecule.mass: hapi knows CO and its isotopologues' masses; remove the key"


def test_an_unknown_molecule_needs_its_mass(velline, tmp_path):
    assert planned(velline(), tmp_path).lines > 0
    (line,) = message_of(velline(text=VELLINE.replace("mass = 24.0\n", "")), tmp_path, LineListError)
    assert "unknown isotopologue" in line


def test_tips_does_not_serve_an_unknown_molecule(velline, tmp_path):
    text = VELLINE.replace('source = "file"\nfile = "{samples}/invented-molecule.pf"', 'source = "TIPS-2021"')
    (line,) = message_of(velline(text=text), tmp_path, MoleculeError)
    assert line == 'partition function TIPS-2021: hapi does not know Vl; give source = "file"'


@pytest.mark.parametrize(
    "abundance, message",
    [
        ('{ "(13C)(16O)" = 1.0 }', "no lines of isotopologue (13C)(16O); expected (12C)(16O) (1)"),
        ('{ "1" = 0.5, "(12C)(16O)" = 0.5 }', "(12C)(16O) is given twice; name it by formula or by number"),
    ],
)
def test_a_choice_that_does_not_fit_the_lines_names_the_recipe(write_recipe, tmp_path, abundance, message):
    path = write_recipe("co", ('abundance = "pure"', f"abundance = {abundance}"))
    assert message_of(path, tmp_path, RecipeError) == [f"{path}: abundance: {message}"]


def test_a_coarse_step_is_named_with_node_and_share(write_recipe, tmp_path):
    plan = planned(write_recipe(wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.01 }"), tmp_path)
    assert [(one.temperature, one.pressure) for one in plan.coarse_nodes] == [(296.0, 0.01), (480.0, 0.01)]
    assert plan.coarse_nodes[0].at_risk == pytest.approx(0.5, abs=0.01)
    # Doppler half-width 3.581e-7 x 2147 x sqrt(296/28) = 0.0025 cm-1, and a third as much by pressure.
    assert plan.coarse_nodes[0].narrowest_half_width == pytest.approx(0.0028, abs=2e-4)
    (warning,) = plan.warnings
    assert warning.startswith(
        "the step is too coarse at 2 of 4 nodes: at 296 K, 0.01 bar 50% of the strength is in lines that it does not"
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


def test_no_line_in_reach_is_warned_of(write_recipe, tmp_path):
    plan = planned(write_recipe(wavenumber="{ start = 3000.0, stop = 3001.0, step = 0.01 }"), tmp_path)
    assert plan.warnings == ("no line reaches the grid: every value will be 0",)
    assert plan.lines == 0
    assert plan.profile_values == 0.0


def test_editions_that_differ_are_named(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(plan_module, "editions_differ", lambda one, t: -0.02 if t > 400.0 else 0.001)
    plan = planned(write_recipe(), tmp_path)
    assert plan.warnings == ("partition function of (12C)(16O): TIPS-2021 and TIPS-2025 differ by -2.0% at 480 K",)
