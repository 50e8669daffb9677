"""Builds of small recipes on grids of every shape: the values, the bits, and what is kept, rebuilt or left behind."""

from __future__ import annotations

import hashlib
import json
import os
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from opacity.cross_sections.exact import exact_spectrum
from opacity.errors import ResourceError
from opacity.pipeline import folders as folders_module
from opacity.pipeline import units as units_module
from opacity.pipeline.build import Crew, build_table
from opacity.pipeline.inputs import load_inputs
from opacity.recipe.load import load_recipe
from opacity.tables.read import open_table
from opacity.tables.sealed import is_whole

SHORT = "{ start = 2146.9, stop = 2147.3, step = 0.004 }"
LONG = "{ start = 2145.0, stop = 2149.0, step = 0.0001 }"


def built(path: Path, folder: Path, workers: int | None = None, **options):
    return build_table(load_recipe(path), folder, quiet=True, crew=Crew(workers), **options)


def sha256(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def left_in(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


@pytest.mark.parametrize(
    "changes, shape",
    [
        ({}, (2, 2, 1001)),
        ({"wavenumber": "{ start = 2145.0, stop = 2149.0, resolving_power = 600000.0 }"}, (2, 2, 1119)),
        ({"nodes": "nodes = [[480.0, 0.01], [296.0, 1.0], [480.0, 1.0]]"}, (3, 1001)),
        ({"nodes": "temperature = [296.0]\npressure = [0.1]"}, (1, 1, 1001)),
        ({"nodes": "temperature = [296.0]\npressure = [0.01, 0.1, 1.0]"}, (1, 3, 1001)),
        ({"nodes": "nodes = [[296.0, 0.1]]", "wavenumber": SHORT}, (1, 101)),
        ({"wavenumber": "{ start = 2147.0, stop = 2147.0, step = 0.004 }"}, (2, 2, 1)),
        # Ten tiles of the kernels and three stored blocks.
        ({"wavenumber": LONG, "nodes": "nodes = [[296.0, 0.1]]"}, (1, 40001)),
    ],
    ids=["grid", "log grid", "profile", "one node", "one temperature", "one node of a profile", "one point", "blocks"],
)
def test_every_shape_of_grid_is_built_right(write_recipe, tmp_path, changes, shape):
    path = write_recipe(**changes)
    made = built(path, tmp_path / "out")
    assert not made.reused
    assert made.table == tmp_path / "out" / "co.cross-section.h5"
    recipe = load_recipe(path)
    lines = load_inputs(recipe).lines.lines
    with open_table(made.table) as table:
        table.verify()
        assert table.shape == shape
        assert table.formula == "CO"
        assert table.recipe == recipe.text
        assert table.checks == made.figures
        np.testing.assert_array_equal(table.wavenumber, recipe.grid.wavenumber)
        for number, (temperature, pressure) in enumerate(recipe.grid.node_list()):
            index = np.unravel_index(number, shape[:-1])
            every = slice(None, None, 1 + shape[-1] // 300)
            exact = exact_spectrum(lines.at(temperature, pressure), table.wavenumber[every], 25.0)
            np.testing.assert_allclose(table.spectrum(*index)[every], exact, rtol=1e-3 + 1.2e-7)
    verdicts = {row["check"]: row["verdict"] for row in made.figures["results"]}
    assert verdicts["audit against the exact sum"] == "agrees"
    assert verdicts["closure"] == ("cannot judge" if shape[-1] == 1 else "agrees")
    assert left_in(tmp_path / "out") == ["co.cross-section.h5", "co.log.json"]


def test_the_bits_do_not_depend_on_workers_time_or_folder(write_recipe, tmp_path, monkeypatch):
    # More tiles than workers, so that they are really dealt out.
    path = write_recipe(wavenumber=LONG, nodes="nodes = [[296.0, 0.1]]")
    hashes = set()
    for workers, folder in ((1, "a"), (2, "b"), (5, "c")):
        if hashes:
            time.sleep(0.6)  # HDF5 can keep whole seconds: three builds are never within one
        monkeypatch.setattr(folders_module.platform, "node", lambda name=folder: f"host {name}")
        hashes.add(sha256(built(path, tmp_path / folder / "deep", workers=workers).table))
    assert len(hashes) == 1


def test_the_table_names_neither_folder_nor_host(write_recipe, tmp_path, monkeypatch):
    monkeypatch.setattr(folders_module.platform, "node", lambda: "a-host-of-this-name")
    path = write_recipe(wavenumber=SHORT)
    made = built(path, tmp_path / "a-folder-of-this-name")
    with open_table(made.table) as table:
        texts = [json.dumps(table.provenance), json.dumps(table.checks)]
    for text in texts:
        assert str(tmp_path) not in text
        assert "of-this-name" not in text
    log = json.loads(made.log.read_text())
    assert log["host"] == "a-host-of-this-name"
    assert log["recipe"] == str(path)
    assert log["workers"] >= 1
    assert log["seconds"] > 0.0


def test_a_failing_write_leaves_what_was_there(write_recipe, tmp_path, monkeypatch):
    path, out = write_recipe(wavenumber=SHORT), tmp_path / "out"

    def full(*_):
        raise OSError(28, "No space left on device")

    with monkeypatch.context() as patched:
        patched.setattr(os, "write", full)
        with pytest.raises(ResourceError, match=r"cannot be written \(No space left on device\); make room"):
            built(path, out)
    assert left_in(out) == []
    old = sha256(built(path, out).table)
    changed = write_recipe(wavenumber=SHORT, tolerance="1e-4")
    with monkeypatch.context() as patched:
        patched.setattr(os, "fsync", full)
        with pytest.raises(ResourceError, match="No space left"):
            built(changed, out)
    # What is done is kept for the next attempt.
    assert left_in(out) == ["co.cross-section.h5", "co.log.json", "co.shards"]
    assert [is_whole(one) for one in (out / "co.shards").iterdir()] == [True]
    assert sha256(out / "co.cross-section.h5") == old


def test_an_interrupt_leaves_nothing_behind(write_recipe, tmp_path, monkeypatch):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    path, out = write_recipe(wavenumber=SHORT), tmp_path / "out"
    monkeypatch.setattr(units_module, "add_spectra", interrupted)
    with pytest.raises(KeyboardInterrupt):
        built(path, out, workers=2)
    assert left_in(out) == []


def fail_if_computed(monkeypatch):
    monkeypatch.setattr(units_module, "compute", lambda *a: pytest.fail("found out too late"))


def test_a_folder_that_cannot_be_is_refused_before_the_work(write_recipe, tmp_path, monkeypatch):
    fail_if_computed(monkeypatch)
    path = write_recipe(wavenumber=SHORT)
    with pytest.raises(ResourceError, match=r"co\.toml: the folder for the tables cannot be made \(File exists\)"):
        built(path, path)
    with pytest.raises(ResourceError, match=r"cannot be made \(Not a directory\)"):
        built(path, path / "below")
    with pytest.raises(ResourceError, match=r"cannot be made \(File name too long\)"):
        built(path, tmp_path / ("long" * 100))


def test_a_read_only_folder_is_refused_before_the_work(write_recipe, tmp_path, monkeypatch):
    fail_if_computed(monkeypatch)
    path, out = write_recipe(wavenumber=SHORT), tmp_path / "out"
    # Root may write anywhere, so the system's answer is played.
    monkeypatch.setattr(os, "access", lambda place, mode: Path(place) != out)
    with pytest.raises(ResourceError, match=r"out: nothing can be written here; choose a folder in which you may"):
        built(path, out)


@pytest.mark.parametrize("name", ["co.cross-section.h5", "co.log.json"])
def test_a_folder_in_a_files_place_is_refused_before_the_work(write_recipe, tmp_path, monkeypatch, name):
    fail_if_computed(monkeypatch)
    (tmp_path / name).mkdir()
    with pytest.raises(ResourceError, match=rf"{name}: is a folder; expected a file or nothing; move it away"):
        built(write_recipe(wavenumber=SHORT), tmp_path)


def test_without_a_line_in_reach_the_table_is_zero_and_checks_are_content(write_recipe, tmp_path):
    path = write_recipe(wavenumber="{ start = 3000.0, stop = 3000.4, step = 0.004 }")
    made = built(path, tmp_path)
    assert "no line reaches the grid: every value will be 0" in made.plan.warnings
    assert made.plan.lines == 0
    assert [row["verdict"] for row in made.figures["results"]] == ["cannot judge", "agrees"]
    with open_table(made.table) as table:
        assert all(not table.spectrum(i, j).any() for i in range(2) for j in range(2))


def test_values_too_small_for_four_bytes_are_kept_in_eight(write_recipe, tmp_path):
    # 40 K: the lines with J'' near 50 are e-120 of what they are at 296 K.
    path = write_recipe(
        wavenumber="{ start = 1886.0, stop = 1887.0, step = 0.01 }", cutoff="1.0", nodes="nodes = [[40.0, 1e-4]]"
    )
    made = built(path, tmp_path)
    with open_table(made.table) as table:
        assert table.dtype == np.dtype("<f8")
        assert 0.0 < table.spectrum(0).max() < 1e-100
    assert [row["verdict"] for row in made.figures["results"]][1] == "agrees"


def test_a_wrong_engine_is_found_out_and_the_table_says_so(write_recipe, tmp_path, monkeypatch):
    """Even values where none may be, infinitely wrong, are reported and do not break the build."""
    real = units_module.make_shard

    def wrong(rows, start, chunk, spectra, notes):
        return real(rows, start, chunk, spectra + 1e-30, notes)

    monkeypatch.setattr(units_module, "make_shard", wrong)
    made = built(write_recipe(wavenumber="{ start = 3000.0, stop = 3000.4, step = 0.004 }"), tmp_path)
    rows = {row["check"]: row for row in made.figures["results"]}
    assert rows["audit against the exact sum"]["verdict"] == "differs"
    assert rows["audit against the exact sum"]["value"] is None


def test_two_lists_of_their_own_ranges_are_as_good_as_one(write_recipe, tmp_path, samples):
    whole = f'files = ["{samples}/carbon-monoxide.par"]\nreference = "the sample list"\n'
    low = whole + "range = [0.0, 2146.0]\n"
    high = '\n[[line_list]]\nformat = "hitran"\n' + (whole + "range = [2146.0, 9000.0]\n").replace(
        "carbon-monoxide.par", "../data-samples/carbon-monoxide.par"
    )
    one = built(write_recipe("one", wavenumber=SHORT), tmp_path)
    # The same file may not be named twice: a copy serves.
    copy = tmp_path / "copy.par"
    copy.write_bytes((samples / "carbon-monoxide.par").read_bytes())
    high = high.replace(f"{samples}/../data-samples/carbon-monoxide.par", "copy.par")
    two = built(write_recipe("two", (whole, low + high), wavenumber=SHORT), tmp_path)
    with open_table(one.table) as a, open_table(two.table) as b:
        np.testing.assert_array_equal(a.spectrum(1, 1), b.spectrum(1, 1))
    assert len(json.loads(json.dumps(two.plan.as_dict()))["assumptions"]) == 1


def test_a_file_name_that_is_no_text_is_recorded(write_recipe, tmp_path, samples):
    odd = os.fsencode(tmp_path) + b"/odd\xff.par"
    with open(odd, "wb") as stream:
        stream.write((samples / "carbon-monoxide.par").read_bytes())
    path = write_recipe("co", (f"{samples}/carbon-monoxide.par", "odd*.par"), wavenumber=SHORT)
    with open_table(built(path, tmp_path / "out").table) as table:
        assert table.provenance["line_lists"][0]["file"] == "odd\\xff.par"


def test_provenance_names_inputs_and_hashes(write_recipe, tmp_path, samples):
    made = built(write_recipe(wavenumber=SHORT), tmp_path)
    with open_table(made.table) as table:
        provenance = table.provenance
    listed = provenance["line_lists"][0]
    assert listed["file"] == "carbon-monoxide.par"
    assert listed["sha256"] == sha256(samples / "carbon-monoxide.par")
    assert provenance["records_read"] == 202
    assert provenance["isotopologues"][0]["formula"] == "(12C)(16O)"
    assert provenance["isotopologues"][0]["abundance"] == 1.0
    steps = [{"cutoff": 25.0, "to_pressure": None}]
    assert provenance["profile"] == {"cutoff": steps, "tolerance": 1e-3, "plinth": False, "chi": None}
    assert provenance["references"][0] == "the sample list"
    assert "Gamache" in provenance["references"][1]
    inputs = load_inputs(load_recipe(write_recipe(wavenumber=SHORT)))
    assert inputs.sha256 == provenance["inputs_sha256"]
    assert made.figures["audit"]["seed"] == inputs.seed == int(inputs.sha256[:12], 16)
    other = load_inputs(replace(load_recipe(write_recipe(wavenumber=SHORT)), text="another text"))
    assert other.sha256 != inputs.sha256
