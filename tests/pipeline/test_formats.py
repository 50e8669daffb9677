"""The same physics from every format, and stores that spare reading text again."""

from __future__ import annotations

import bz2
from pathlib import Path

import numpy as np
import pytest

import opacity
from opacity.cli.main import main
from opacity.constants import SECOND_RADIATION
from opacity.cross_sections import source as source_module
from opacity.cross_sections.prepare import partition_of
from opacity.cross_sections.source import ListInMemory
from opacity.line_list import text as text_module
from opacity.line_list.ledger import Ledger
from opacity.line_list.packed import log_population
from opacity.line_list.read import read_lines
from opacity.molecule.isotopologue import isotopologue
from opacity.molecule.partition_function import tips
from opacity.pipeline import inputs as inputs_module
from opacity.pipeline import open_lists as open_lists_module
from opacity.pipeline import sources as sources_module
from opacity.pipeline import units as units_module

SAMPLES = Path(__file__).parents[2] / "data-samples"
Q = tips("TIPS-2021", isotopologue(5, 1))

RECIPE = """
[molecule]
name = "carbon monoxide"
formula = "CO"
[[line_list]]
{list}
reference = "sample of this project"
[isotopologues]
abundance = "pure"
[partition_function]
{partition}
[broadening]
mixture = {{ H2 = 1.0 }}
[broadening.default.H2]
gamma = 0.07
exponent = 0.5
source = "invented"
[profile]
cutoff = 25.0
[grid]
wavenumber = {{ start = 2100.0, stop = 2160.0, step = 0.01 }}
temperature = [{temperature}]
pressure = [0.1, 1.0]
[cross_section]
"""

HITRAN = f'format = "hitran"\nfiles = ["{SAMPLES}/carbon-monoxide.par"]'
EXOMOL = 'format = "exomol"\nfiles = ["set/*"]\nisotopologue = "(12C)(16O)"'
TIPS = 'source = "TIPS-2021"'


@pytest.fixture
def data_set(tmp_path: Path) -> Path:
    """The sample's lines in ExoMol form, two states a line, transitions unsorted in two files, one of them bz2."""
    folder = tmp_path / "set"
    folder.mkdir()
    lines = read_lines(SAMPLES / "carbon-monoxide.par")
    pure = lines.strength / lines.isotopologues[0].abundance
    population = np.exp(log_population(lines.wavenumber, lines.lower_energy, 296.0))
    a = pure * Q(296.0) * 8.0 * np.pi * 2.99792458e10 * lines.wavenumber**2 / (lines.upper_weight * population)
    states, rows = [], []
    for i in range(len(lines)):
        low, high = lines.lower_energy[i], lines.lower_energy[i] + lines.wavenumber[i]
        g_low, g_high = lines.lower_weight[i], lines.upper_weight[i]
        states.append(f"{2 * i + 1:12d} {low:13.6f} {g_low:6.0f} {(g_low - 1) / 2:6.1f}")
        states.append(f"{2 * i + 2:12d} {high:13.6f} {g_high:6.0f} {(g_high - 1) / 2:6.1f}")
        rows.append(f"{2 * i + 2:12d} {2 * i + 1:12d} {a[i]:.10E}")
    order = np.random.default_rng(2).permutation(len(rows))
    half = len(rows) // 2
    write = folder.joinpath
    write("co.states").write_text("\n".join(states) + "\n", encoding="ascii")
    write("co__1.trans").write_text("\n".join(rows[i] for i in order[:half]) + "\n", encoding="ascii")
    write("co__2.trans.bz2").write_bytes(bz2.compress(("\n".join(rows[i] for i in order[half:]) + "\n").encode()))
    t = np.arange(50.0, 3001.0, 10.0)
    write("co.pf").write_text("\n".join(f"{x:8.1f} {Q(x):.8E}" for x in t) + "\n", encoding="ascii")
    return folder


def write_recipe(tmp_path: Path, name: str, temperature: str = "300.0, 900.0", **parts: str) -> Path:
    path = tmp_path / f"{name}.toml"
    path.write_text(RECIPE.format(temperature=temperature, **parts), encoding="utf-8")
    return path


def table_of(path: Path, folder: Path) -> np.ndarray:
    (table,) = opacity.build(opacity.load_recipe(path), folder, workers=2)
    with opacity.open_table(table) as opened:
        nodes = np.ndindex(opened.shape[:-1])
        return np.array([opened.spectrum(*node) for node in nodes])


@pytest.mark.parametrize("partition", [TIPS, 'source = "file"'])
def test_exomol_and_hitran_form_give_the_same_cross_section(tmp_path: Path, data_set: Path, partition: str) -> None:
    hitran = table_of(write_recipe(tmp_path, "hitran", list=HITRAN, partition=TIPS), tmp_path / "out")
    exomol = table_of(write_recipe(tmp_path, "exomol", list=EXOMOL, partition=partition), tmp_path / "out")
    # Records round wavenumbers to 1e-6 cm-1 and S to four digits, which A was made from: no difference but rounding
    # of the store (6e-8) and of f4; the tolerance of both tables is 1e-3.
    assert hitran.min() > 0.0
    np.testing.assert_allclose(exomol, hitran, rtol=2e-5)


def test_the_sum_over_states_serves_where_it_holds(tmp_path: Path, data_set: Path) -> None:
    path = write_recipe(tmp_path, "states", list=EXOMOL, partition='source = "states"', temperature="300.0")
    found = table_of(path, tmp_path / "out")
    lines = read_lines(SAMPLES / "carbon-monoxide.par")
    energies = np.concatenate([lines.lower_energy, lines.lower_energy + lines.wavenumber])
    weights = np.concatenate([lines.lower_weight, lines.upper_weight])
    summed = float(np.sum(weights * np.exp(-SECOND_RADIATION * energies / 300.0)))
    with_tips = table_of(
        write_recipe(tmp_path, "tips", list=EXOMOL, partition=TIPS, temperature="300.0"), tmp_path / "out"
    )
    np.testing.assert_allclose(found * summed, with_tips * Q(300.0), rtol=1e-5)


def test_a_second_build_reads_no_text(tmp_path: Path, data_set: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    table_of(write_recipe(tmp_path, "first", list=EXOMOL, partition=TIPS), tmp_path / "out")
    monkeypatch.setattr(text_module, "open", lambda *a: pytest.fail("text was read"), raising=False)
    table_of(
        write_recipe(tmp_path, "second", list=EXOMOL, partition=TIPS, temperature="310.0, 500.0"), tmp_path / "out"
    )


@pytest.mark.parametrize("at_once", [10, 60])
def test_lines_too_many_to_hold_give_the_same_values(
    tmp_path: Path, data_set: Path, monkeypatch: pytest.MonkeyPatch, at_once: int
) -> None:
    path = write_recipe(tmp_path, "exomol", list=EXOMOL, partition=TIPS)
    held = table_of(path, tmp_path / "held")
    for module in (source_module, units_module, inputs_module):
        monkeypatch.setattr(module, "LINES_AT_ONCE", at_once)
    monkeypatch.setattr(units_module, "BLOCK", 512)
    monkeypatch.setattr("opacity.tables.layout.BLOCK", 512)
    monkeypatch.setattr(units_module, "WINDOW", 2048)
    monkeypatch.setattr("opacity.cross_sections.planner.LARGEST_TILE", 512)
    again = table_of(path, tmp_path / "stored")
    np.testing.assert_allclose(again, held, rtol=1e-12)
    with opacity.open_table(tmp_path / "stored" / "exomol.cross-section.h5") as table:
        assert {row["verdict"] for row in table.checks["results"]} == {"agrees"}
        assert table.checks["assumptions"][0]["lines"] > 0


def test_a_large_list_of_records_goes_through_a_store(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    path = write_recipe(tmp_path, "hitran", list=HITRAN, partition=TIPS)
    plain = table_of(path, tmp_path / "plain")
    monkeypatch.setattr(sources_module, "SMALL_LIST", 0)
    stored = table_of(path, tmp_path / "stored")
    np.testing.assert_allclose(stored, plain, rtol=3e-7)
    assert main(["ingest", str(path), "-o", str(tmp_path / "stored")]) == 0
    out = " ".join(capsys.readouterr().out.split())
    assert "up to date: no text was read" in out
    assert "202 lines" in out
    (segment,) = (tmp_path / "stored").rglob("*.lines.h5")
    whole = segment.read_bytes()
    segment.write_bytes(whole[:-1])  # a copy that was cut
    assert main(["ingest", str(path), "-o", str(tmp_path / "stored")]) == 0
    assert "made now" in capsys.readouterr().out
    assert segment.read_bytes() == whole
    assert main(["ingest", str(path), "-o", str(tmp_path / "new"), "--memory", "100MB", "--json"]) == 0


def test_check_of_a_list_reports(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["check", str(SAMPLES / "carbon-monoxide.data")]) == 0
    out = capsys.readouterr().out
    assert "202 of CO" in out
    assert "no pressure shift by h2" in out


def test_a_partition_file_is_compared_with_the_states(tmp_path: Path, data_set: Path) -> None:
    """The sample has two states for each line, so that the sum over them is far from Q of the molecule."""
    path = write_recipe(tmp_path, "file", list=EXOMOL, partition='source = "file"')
    (table,) = opacity.build(opacity.load_recipe(path), tmp_path / "out")
    with opacity.open_table(table) as opened:
        found = opened.provenance["partition_function"]["over_sum_of_states"]
        assert abs(found["largest_difference"]) > 0.1
        assert any("differs by" in warning and "co.pf" in warning for warning in opened.checks["warnings"])


def test_each_isotopologue_has_the_sum_over_its_own_states() -> None:
    heavy, light = isotopologue(5, 2), isotopologue(5, 1)
    own = {light.formula: Q, heavy.formula: tips("TIPS-2021", heavy)}
    assert partition_of(own, heavy)(300.0) == own[heavy.formula](300.0)
    assert partition_of(own, light)(300.0) == Q(300.0)
    with pytest.raises(
        opacity.MoleculeError, match=r"no states are there to sum for \(12C\)\(18O\); expected states of"
    ):
        partition_of(own, isotopologue(5, 3))


def test_a_broadening_file_for_another_gas_makes_another_store(tmp_path: Path) -> None:
    broad = tmp_path / "x.broad"
    broad.write_text("a0 0.05 0.5 0\n", encoding="ascii")
    keys = set()
    for gas in ("H2", "He"):
        path = write_recipe(tmp_path, gas, list=HITRAN, partition=TIPS)
        text = path.read_text(encoding="utf-8").replace("mixture = { H2 = 1.0 }", f"mixture = {{ {gas} = 1.0 }}")
        text = text.replace("[broadening.default.H2]", f"[broadening.default.{gas}]")
        path.write_text(
            text.replace("[broadening]\n", f'[broadening]\nfiles = {{ {gas} = "x.broad" }}\n'), encoding="utf-8"
        )
        recipe = opacity.load_recipe(path)
        keys.add(sources_module.list_inputs(recipe, recipe.line_lists[0], None).key)
    assert len(keys) == 2


def test_windows_are_as_short_as_their_lines_are_many(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    recipe = opacity.load_recipe(write_recipe(tmp_path, "hitran", list=HITRAN, partition=TIPS))
    lines = inputs_module.load_inputs(recipe, tmp_path).lines
    nu = np.linspace(2000.0, 2300.0, 10 * units_module.BLOCK)
    assert units_module.windows(nu, 5.0, lines) == [slice(0, units_module.WINDOW), slice(units_module.WINDOW, nu.size)]
    monkeypatch.setattr(units_module, "LINES_AT_ONCE", 15)
    parts = units_module.windows(nu, 5.0, lines)
    assert [part.start for part in parts[1:]] == [part.stop for part in parts[:-1]]
    assert all(part.start % units_module.BLOCK == 0 for part in parts)
    assert all(lines.count(nu[p.start] - 5.0, nu[p.stop - 1] + 5.0) <= 15 for p in parts if p.stop - p.start > 16384)
    assert len(parts) > 2


def test_a_grid_beyond_what_a_definition_is_made_for_is_told(tmp_path: Path, data_set: Path) -> None:
    facts = {
        "definition": {
            "dataset": "made up",
            "formula": "(12C)(16O)",
            "max_temperature": 500.0,
            "transitions": 7,
            "notes": ["a note"],
        },
        "states": {"notes": {}},
    }
    recipe = opacity.load_recipe(write_recipe(tmp_path, "exomol", list=EXOMOL, partition=TIPS))
    one = open_lists_module.OpenList(
        ListInMemory(read_lines(SAMPLES / "carbon-monoxide.par")), Ledger(202, 202), {}, facts
    )
    warnings = open_lists_module.definition_warnings(recipe, [one])
    assert warnings == (
        "made up is made for temperatures up to 500 K, and the grid goes to 900 K",
        "made up has 7 transitions by its definition, and 202 were read",
        "made up: a note",
    )
