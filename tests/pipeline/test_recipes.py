"""The recipes that come with the project: complete, every value with its source, and built where lines are at hand."""

from __future__ import annotations

import importlib
import importlib.util
import json
import math
import os
import re
import shutil
import tomllib
from pathlib import Path

import pytest

from opacity.errors import RecipeError
from opacity.molecule.isotopologue import isotopologues_of
from opacity.molecule.partition_function import tips
from opacity.molecule.published_bands import FROM_MEMORY, published_bands
from opacity.pipeline.recipe_check import require_complete
from opacity.recipe.downloads import load_downloads
from opacity.recipe.load import load_recipe
from opacity.recipe.marks import comments_of
from opacity.recipe.unverified import unverified_values

ROOT = Path(__file__).parents[2]
RECIPES = ROOT / "recipes"
REAL_LINES = os.environ.get("OPACITY_REAL_LINES", "")
needs_real_lines = pytest.mark.skipif(not REAL_LINES, reason="OPACITY_REAL_LINES names no folder of real lines")

MOLECULES = {
    "water": "H2O",
    "carbon-dioxide": "CO2",
    "carbon-monoxide": "CO",
    "methane": "CH4",
    "ammonia": "NH3",
    "hydrogen-cyanide": "HCN",
    "silicon-monoxide": "SiO",
    "hydrogen-chloride": "HCl",
    "nitrous-oxide": "N2O",
    "nitric-oxide": "NO",
}
IN_AIR = list(MOLECULES)
IN_HYDROGEN = [f"{name}-in-hydrogen" for name in MOLECULES]
ALL = IN_AIR + IN_HYDROGEN

# Sources that were seen, or are quoted by one that was: nothing else may stand behind a value, but "from memory".
SOURCES = (
    "Gordon et al. 2022, JQSRT 277, 107949",
    "Gamache et al. 2021, JQSRT 271, 107713",
    "Gamache et al. 2025, JQSRT 345, 109568",
    "Mueller et al. 2013, J. Phys. Chem. A 117, 13843 (CDMS 044505, version 2)",
    "CDMS 044505",
    "hapi's",
    "the list's own",
    "common practice",
    "Zou & Varanasi 2002, JQSRT 75, 63",
    "Toth et al. 2008, JQSRT 109, 906",
    "Benedict, Herman, Moore & Silverman 1956",
    "Appl. Opt. 30, 3023, 1991",
    "10.48577/jpl.TX6WB5",
    "means of 12351 lines",
    "a choice",
    "from memory",
)
TOML_OF = {name: tomllib.loads((RECIPES / f"{name}.toml").read_text()) for name in ALL}


def text_of(name: str) -> str:
    return (RECIPES / f"{name}.toml").read_text()


@pytest.fixture
def beside(tmp_path: Path):
    """Put a recipe into a folder of its own, with empty files for its lists, or real ones; return its path."""

    def put(name: str, text: str | None = None, lists: dict[str, Path] | None = None) -> Path:
        folder = tmp_path / "recipes"
        folder.mkdir(exist_ok=True)
        (tmp_path / "lines").mkdir(exist_ok=True)
        for file in TOML_OF[name]["line_list"][0]["files"]:
            (folder / file).touch()
            if file.endswith(".data"):
                sample = ROOT / "data-samples" / "carbon-monoxide.header"
                shutil.copy(sample, (folder / file).with_suffix(".header"))
        for file, real in (lists or {}).items():
            shutil.copy(real, tmp_path / "lines" / file)
        shutil.copy(RECIPES / "silicon-monoxide.pf", folder)
        path = folder / f"{name}.toml"
        path.write_text(text_of(name) if text is None else text)
        return path

    return put


def accepting(name: str) -> str:
    return text_of(name).replace("accept_unverified = false", "accept_unverified = true")


def test_there_are_two_atmospheres_for_each_of_ten_molecules():
    assert len(MOLECULES) == 10
    for name, formula in MOLECULES.items():
        assert TOML_OF[name]["molecule"]["formula"] == formula
        assert set(TOML_OF[name]["broadening"]["mixture"]) <= {"air", "self"}
        other = TOML_OF[f"{name}-in-hydrogen"]
        assert other["molecule"] == TOML_OF[name]["molecule"]
        assert set(other["broadening"]["mixture"]) == {"H2", "He"}
        assert other.get("band_strength") == TOML_OF[name].get("band_strength")
    shipped = {path.stem for path in RECIPES.glob("*.toml")}
    assert shipped == {*ALL, "demo", "invented"}


@pytest.mark.parametrize("name", ALL)
def test_a_recipe_is_complete_once_its_lines_are_there_and_memory_is_accepted(beside, name):
    recipe = require_complete(beside(name, accepting(name)))
    assert all(one.reference for one in recipe.line_lists)
    assert recipe.grid.node_list()
    if not TOML_OF[name].get("accept_unverified", True):
        with pytest.raises(RecipeError) as caught:
            require_complete(beside(name))
        assert len(caught.value.problems) == len(unverified_values(text_of(name)))


@pytest.mark.parametrize("name", ALL)
def test_only_what_no_table_rests_on_is_accepted_as_shipped(name):
    keys = [one.name for one in unverified_values(text_of(name))]
    widths = [key for key in keys if not key.startswith("band_strength")]
    # Absent where nothing is from memory; true where that is band strengths alone; else the user's to decide.
    assert TOML_OF[name].get("accept_unverified") == (None if not keys else not widths)


@pytest.mark.parametrize("name", ALL)
def test_every_value_names_its_source(name):
    """Values with a key for their source say it there, others behind them on their line."""
    document = TOML_OF[name]
    said = {one.key: one.text for one in comments_of(text_of(name)) if not one.alone}
    rows = text_of(name).splitlines()
    wanted = [("isotopologues", "abundance"), ("partition_function", "source"), ("broadening", "mixture")]
    wanted += [("profile", "cutoff")] + ([("molecule", "mass")] if "mass" in document["molecule"] else [])
    wanted += [("partition_function", "file")] if "file" in document["partition_function"] else []
    texts = {}
    for key in wanted:
        if key == ("partition_function", "source") and document["partition_function"]["source"] == "file":
            continue
        assert key in said, f"{key} says nothing of its source"
        texts[key] = said[key]
    for number, one in enumerate(document["line_list"]):
        texts["line_list", number] = one["reference"]
    for gas, one in document["broadening"].get("default", {}).items():
        texts["default", gas] = one["source"]
    for one in document.get("band_strength", []):
        texts["band", one["name"]] = one["source"]
    grid = rows.index("[grid]")
    assert rows[grid + 1].startswith("# A choice.")
    for key, text in texts.items():
        assert any(source in text for source in SOURCES), f"{key}: {text}"
        # A reference with a year stands in the list above; what does not is no reference.
        if re.search(r"\b(19|20)\d\d\b", text):
            assert any(source in text for source in SOURCES if re.search(r"\d{3,}|hapi", source)), f"{key}: {text}"


@pytest.mark.parametrize("name", ALL)
def test_band_strengths_are_those_that_ship(name):
    document = TOML_OF[name]
    low, high = document["grid"]["wavenumber"]["start"], document["grid"]["wavenumber"]["stop"]
    known = {one.name: one for one in published_bands(document["molecule"]["formula"])}
    for one in document.get("band_strength", []):
        band = known[one["name"]]
        assert tuple(one["range"]) == band.range
        assert (one["strength"], one["unit"], one["temperature"]) == (band.strength, band.unit, band.temperature)
        assert one["uncertainty"] == ("unknown" if band.uncertainty is None else band.uncertainty)
        assert one["isotopologue"] == (band.isotopologue or "natural")
        assert one["source"] == ("from memory" if band.status == FROM_MEMORY else band.source)
        assert low <= band.range[0] < band.range[1] <= high
    inside = {
        one.name
        for one in known.values()
        if one.range and low <= one.range[0] and one.range[1] <= high and one.range[1] - one.range[0] > 1.0
    }
    # A second value of the same band, from memory, is not needed.
    assert {one["name"] for one in document.get("band_strength", [])} >= inside - {"1-0, natural", "1-0, second value"}
    assert document.get("band_strength") or document["molecule"]["formula"] == "SiO"


@pytest.mark.parametrize("name", [name for name in ALL if not name.startswith("silicon")])
def test_lists_reach_as_far_as_the_cut_off_and_temperatures_are_valid(beside, name):
    recipe = load_recipe(beside(name))
    (one,) = load_downloads(RECIPES / f"{name}.toml")
    (query,) = one.downloads
    known = {iso.local: iso for iso in isotopologues_of(recipe.molecule.formula)}
    assert {known[local].molecule for local in query.isotopologues} == {query.molecule}
    cutoff = max(step.cutoff for step in recipe.profile.cutoff.steps)
    nu = recipe.grid.wavenumber
    if recipe.molecule.formula not in ("CO", "H2O"):  # whose bands end within the ranges asked for
        assert query.range[0] <= nu[0] - cutoff
        assert query.range[1] >= nu[-1] + cutoff
    stated = re.search(r"from (\d+) to (\d+) K", text_of(name))
    ranges = [tips(recipe.partition_function.source, known[local]) for local in query.isotopologues]
    assert float(stated[1]) == max(q.lowest for q in ranges)
    assert float(stated[2]) == min(q.highest for q in ranges)
    assert all(float(stated[1]) <= t <= float(stated[2]) for t in recipe.grid.temperature)
    if name in IN_HYDROGEN:
        assert query.parameters == ("gamma_h2", "n_h2", "gamma_he", "n_he")


@pytest.mark.parametrize(
    "name, gas, gamma, exponent",
    [
        # cm-1/atm at 296 K: middle of 0.05 to 0.08 (10.48577/jpl.TX6WB5); of 0.06 to 0.14 at 200 K (Appl. Opt. 30,
        # 3023) times (200/296)^0.57 (Margolis & Sarangi 1976); CO P(10) in the HITRAN record; the mean of H2O.
        ("methane-in-hydrogen", "H2", 0.065, None),
        ("ammonia-in-hydrogen", "H2", 0.10 * (200.0 / 296.0) ** 0.57, 0.57),
        ("silicon-monoxide-in-hydrogen", "H2", 0.0697, 0.64),
        ("silicon-monoxide-in-hydrogen", "He", 0.0469, 0.58),
        ("silicon-monoxide", "air", 0.0586, 0.75),
        ("water", "self", 0.4331, 0.675),
    ],
)
def test_widths_with_a_source_are_its_value_in_bar(name, gas, gamma, exponent):
    found = TOML_OF[name]["broadening"]["default"][gas]
    digits = len(str(found["gamma"]).rstrip("0").split(".")[1])
    assert found["gamma"] == pytest.approx(gamma / 1.01325, abs=0.51 * 10.0**-digits)
    assert exponent is None or found["exponent"] == exponent


def built(opacity, path: Path, folder: Path) -> dict[str, dict]:
    """The results of building a recipe, by name of the check."""
    code, out, err = opacity("build", path, "-o", folder, "--json", "--quiet")
    assert code == 0, err
    found = json.loads(out)
    assert found["passed"]
    code, out, _ = opacity("check", path, "-o", folder, "--json")
    assert code == 0
    return {row["check"]: row for row in json.loads(out)["results"]}


def on_a_small_grid(text: str, wavenumber: str, temperature: str, pressure: str) -> str:
    for key, value in (("wavenumber", wavenumber), ("temperature", temperature), ("pressure", pressure)):
        text, count = re.subn(rf"(?m)^{key} = (\{{.*\}}|\[.*\])$", f"{key} = {value}", text)
        assert count == 1
    return text


@pytest.mark.real_lines
@needs_real_lines
@pytest.mark.parametrize("name", ["carbon-monoxide", "carbon-monoxide-in-hydrogen"])
def test_carbon_monoxide_is_built_and_meets_its_published_band(opacity, beside, tmp_path, name):
    lists = {"CO.par": Path(REAL_LINES) / "CO.par"}
    if name in IN_HYDROGEN:
        lists = {f"CO.{end}": Path(REAL_LINES) / f"CO_broadeners.{end}" for end in ("data", "header")}
    text = on_a_small_grid(text_of(name), "{ start = 1950.0, stop = 2300.0, step = 0.005 }", "[296.0]", "[0.05, 1.0]")
    rows = built(opacity, beside(name, text, lists), tmp_path / "out")
    assert {row["verdict"] for row in rows.values()} == {"agrees"}
    # Zou & Varanasi 2002 (0.7 %), per molecule of (12C)(16O).
    assert abs(rows["band 1-0"]["value"]) < 2 * 0.007
    assert "uncertainties); 296 K" in rows["band 1-0"]["detail"]


@pytest.mark.real_lines
@needs_real_lines
@pytest.mark.parametrize("name", ["water", "water-in-hydrogen"])
def test_water_is_built(opacity, beside, tmp_path, name):
    text = on_a_small_grid(accepting(name), "{ start = 3375.0, stop = 4200.0, step = 0.02 }", "[296.0]", "[1.0]")
    if name in IN_HYDROGEN:  # the extract is of records without columns for H2 and He: the defaults serve
        text = text.replace('"hapi"', '"hitran"').replace("H2O.data", "H2O.par")
        text = re.sub(r"\[line_list\.hitran\](.|\n)*?(?=\[isotopologues\])", "", text)
    rows = built(opacity, beside(name, text, {"H2O.par": Path(REAL_LINES) / "H2O.par"}), tmp_path / "out")
    assert {row["verdict"] for row in rows.values()} == {"agrees"}
    assert "within a factor 1.5" in rows["band 2.7 um region"]["detail"]


def catalogue(name: str) -> Path:
    spec = importlib.util.find_spec("linecat")
    if spec is None or not spec.submodule_search_locations:
        pytest.skip("the package linecat, which carries the lists, is not installed")
    return Path(next(iter(spec.submodule_search_locations))) / "data" / "molecules" / name


@pytest.mark.parametrize("name", ["silicon-monoxide", "silicon-monoxide-in-hydrogen"])
def test_silicon_monoxide_is_built_from_the_catalogue(opacity, beside, tmp_path, name):
    text = on_a_small_grid(accepting(name), "{ start = 1.0, stop = 5.0, step = 0.002 }", "[300.0]", "[0.1]")
    path = beside(name, text, {"c044505.cat": catalogue("SiO/c044505.cat")})
    rows = built(opacity, path, tmp_path / "out")
    assert {row["verdict"] for row in rows.values()} == {"agrees"}
    with_table = importlib.import_module("opacity").open_table(tmp_path / "out" / f"{name}.cross-section.h5")
    with with_table as table:
        nu, sigma = table.wavenumber, table.spectrum(0, 0)
        accepted = {one["key"] for one in table.provenance["unverified"]}
    assert "molecule.mass" in accepted
    # The line v=0 J=2-1, 1.0964e-21 cm/molecule at 300 K by the catalogue, alone within 0.4 cm-1: its integral there.
    near = abs(nu - 2.896904) <= 0.4
    # Half-width 0.1 bar times the mixture's, at 300 K; the share of a Lorentz profile within 0.4 cm-1.
    widths = TOML_OF[name]["broadening"]
    gamma = 0.1 * sum(
        x * widths["default"][gas]["gamma"] * (296.0 / 300.0) ** widths["default"][gas]["exponent"]
        for gas, x in widths["mixture"].items()
    )
    share = 2.0 / math.pi * math.atan(0.4 / gamma)
    total = float(((sigma[1:] + sigma[:-1]) / 2.0 * (nu[1:] - nu[:-1]))[near[:-1]].sum())
    # v = 1 holds 0.3 % beside it, wings of J = 1-0 and 3-2 add less, and so does the sampling.
    assert total / share == pytest.approx(1.09643e-21, rel=0.01)


@pytest.mark.parametrize(
    "file, tag, reach", [("NH3/c017506.cat", "(14N)H3", (0.5, 1.5)), ("OH/c017507.cat", "", (0, 1))]
)
def test_other_catalogues_do_with_the_recipe_for_ammonia(opacity, beside, tmp_path, file, tag, reach):
    """The recipe for ammonia in hydrogen, on the lines of a catalogue in place of HITRAN's; OH with its formula."""
    name = "ammonia-in-hydrogen"
    text = re.sub(r"\[line_list\.hitran\](.|\n)*?(?=\[isotopologues\])", "", accepting(name))
    text = text.replace('format = "hapi"', f'format = "catalogue"\nisotopologue = "{tag or "(16O)H"}"')
    text = text.replace("NH3.data", Path(file).name)
    text = text[: text.index("[[band_strength]]")]
    if not tag:
        text = text.replace('formula = "NH3"', 'formula = "OH"')
    grid = f"{{ start = {max(reach[0], 0.01)}, stop = {reach[1]}.0, step = 0.002 }}".replace(".5.0", ".5")
    text = on_a_small_grid(text, grid, "[200.0, 300.0]", "[0.1]")
    rows = built(opacity, beside(name, text, {Path(file).name: catalogue(file)}), tmp_path / "out")
    assert {row["verdict"] for row in rows.values()} == {"agrees"}


def test_the_partition_function_of_silicon_monoxide_is_what_its_script_writes(monkeypatch):
    monkeypatch.syspath_prepend(str(ROOT / "data-samples"))
    script = importlib.import_module("make_silicon_monoxide_pf")
    assert script.text_of(catalogue("SiO/c044505.cat")) == (RECIPES / "silicon-monoxide.pf").read_text()
