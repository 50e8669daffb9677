"""Values of tables explained: each part against its raw record and wofz, each line traced to its record."""

from __future__ import annotations

import bz2
import dataclasses
import gzip
import json
import math
import os
import shutil
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from scipy import constants
from scipy.special import wofz

import opacity
from opacity.check import explain as explain_module
from opacity.errors import InputError, TableError
from opacity.molecule.isotopologue import isotopologue
from opacity.molecule.partition_function import tips
from opacity.pipeline import sources as sources_module

SAMPLES = Path(__file__).parents[2] / "data-samples"
Q = tips("TIPS-2021", isotopologue(5, 1))
ABUNDANCE = isotopologue(5, 1).abundance
C2 = 100.0 * constants.h * constants.c / constants.k
ATM = 1.01325

RECIPE = """\
accept_unverified = true
[molecule]
name = "carbon monoxide"
formula = "CO"
{lists}
[isotopologues]
abundance = {abundance}
[partition_function]
source = "TIPS-2021"
[broadening]
{broadening}
[profile]
cutoff = {cutoff}
{profile}
[grid]
wavenumber = {{ start = 2145.0, stop = 2149.0, step = 0.004 }}
{nodes}
[cross_section]
"""
GRID = "temperature = [296.0, 480.0]\npressure = [0.01, 1.0]"
HITRAN = '[[line_list]]\nformat = "hitran"\nreference = "invented"\nfiles = ["{file}"]\n'
EXOMOL = '[[line_list]]\nformat = "exomol"\nreference = "invented"\nfiles = ["set/*"]\nisotopologue = "(12C)(16O)"\n'
H2 = """mixture = { H2 = 1.0 }
[broadening.default.H2]
gamma = 0.07
exponent = 0.5
source = "invented"
"""
Build = Callable[..., Path]


@pytest.fixture
def build(tmp_path: Path) -> Build:
    """Write a recipe, build its table in a folder of its own and return the table's path."""

    def made(lists: str, broadening: str = "mixture = { air = 1.0 }", **changes: str) -> Path:
        parts = {"cutoff": "25.0", "profile": "", "nodes": GRID, "abundance": '"pure"', **changes}
        path = tmp_path / "co.toml"
        path.write_text(RECIPE.format(lists=lists, broadening=broadening, **parts), encoding="utf-8")
        return opacity.build(opacity.load_recipe(path), tmp_path / "tables")[0]

    return made


def sample(tmp_path: Path, name: str = "co.par") -> str:
    shutil.copy(SAMPLES / "carbon-monoxide.par", tmp_path / name)
    return HITRAN.format(file=name)


def record_of(one: opacity.Explanation, part) -> str:
    """The record that a part names, read by other means than the program's."""
    data = Path(part.file).read_bytes()
    ending = Path(part.file).suffix
    text = {".gz": gzip.decompress, ".bz2": bz2.decompress}.get(ending, bytes)(data).decode("ascii")
    return text.split("\n")[part.record - 1]


def voigt(distance: float, doppler: float, lorentz: float) -> float:
    z = math.sqrt(math.log(2.0)) * (distance + 1j * lorentz) / doppler
    return float(wofz(z).real) * math.sqrt(math.log(2.0) / math.pi) / doppler


def doppler_of(nu: float, temperature: float, mass: float = 27.994915) -> float:
    energy = 2.0 * math.log(2.0) * constants.k * temperature / (mass * constants.atomic_mass)
    return nu * math.sqrt(energy) / constants.c


def strength_at(nu: float, strength: float, energy: float, temperature: float, reference: float = 296.0) -> float:
    populations = [math.exp(-C2 * energy / t) * (1.0 - math.exp(-C2 * nu / t)) / Q(t) for t in (temperature, reference)]
    return strength * populations[0] / populations[1]


def slow_part(record: str, point: float, temperature: float, pressure: float) -> float:
    """A line's cross-section in air from the text of its 160-character record, per molecule of the isotopologue."""
    nu, strength = float(record[3:15]), float(record[15:25]) / ABUNDANCE
    gamma, energy, exponent, shift = (float(record[i:j]) for i, j in ((35, 40), (45, 55), (55, 59), (59, 67)))
    centre = nu + pressure * shift / ATM
    lorentz = pressure * gamma / ATM * (296.0 / temperature) ** exponent
    profile = voigt(point - centre, doppler_of(centre, temperature), lorentz)
    return strength_at(nu, strength, energy, temperature) * profile


@pytest.mark.parametrize("ending", ["", ".gz", ".bz2"])
@pytest.mark.parametrize("stored", [False, True])
def test_parts_are_those_of_their_records(
    build: Build, tmp_path: Path, ending: str, stored: bool, monkeypatch: pytest.MonkeyPatch
):
    if stored:
        monkeypatch.setattr(sources_module, "SMALL_LIST", 0)
    name = f"co.par{ending}"
    raw = (SAMPLES / "carbon-monoxide.par").read_bytes()
    # Blank lines count as lines of the file, and shifts make centres differ from listed wavenumbers.
    raw = b"\n\n" + b"\n".join(line[:59] + b"-.003000" + line[67:] for line in raw.splitlines()) + b"\n"
    (tmp_path / name).write_bytes({"": bytes, ".gz": gzip.compress, ".bz2": bz2.compress}[ending](raw))
    table = build(HITRAN.format(file=name))
    found = opacity.explain(table, wavenumber=2147.0851, temperature=480.0, pressure=1.0)
    assert found.wavenumber == pytest.approx(2147.084, abs=1e-9)
    assert found.at_node
    assert found.within
    assert (tmp_path / "tables" / "lines").exists() == stored
    values = [part.value for part in found.parts]
    assert values == sorted(values, reverse=True)
    assert len(values) == 10
    for part in found.parts:
        record = record_of(found, part)
        assert float(record[3:15]) == part.wavenumber
        assert part.file == str(tmp_path / name)
        # The molecule's mass to six decimals, and a store's strengths to 6e-8.
        assert part.value == pytest.approx(slow_part(record, found.wavenumber, 480.0, 1.0), rel=1e-6)
        assert part.strength_296 == pytest.approx(float(record[15:25]) / ABUNDANCE, rel=1e-6)
        assert part.lower_energy == pytest.approx(float(record[45:55]), abs=2e-5)
        assert part.shift == pytest.approx(-0.003 / ATM, rel=1e-6)
        (width,) = part.widths
        assert width.gamma == pytest.approx(float(record[35:40]) / ATM, rel=1e-12)
        assert width.source == f"{part.file}:{part.record}"
        assert width.notes == ()
    everything = [line for line in raw.decode().split("\n") if line.strip()]
    in_reach = [line for line in everything if abs(float(line[3:15]) - found.wavenumber) <= 25.0]
    truth = [slow_part(line, found.wavenumber, 480.0, 1.0) for line in in_reach]
    assert found.lines == len(in_reach)
    assert found.exact == pytest.approx(sum(truth), rel=1e-6)
    assert found.share_of_ten == pytest.approx(sum(sorted(truth)[-10:]) / sum(truth), rel=1e-6)
    with opacity.open_table(table) as opened:
        assert found.value == opened.spectrum(1, 1)[521]
    assert found.difference == pytest.approx(found.value / found.exact - 1.0)


def test_lines_gone_through_in_pieces_are_the_same(build: Build, tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    table = build(sample(tmp_path))
    point = {"wavenumber": 2147.1, "temperature": 296.0, "pressure": 1.0}
    whole = opacity.explain(table, **point)
    monkeypatch.setattr(explain_module, "LINES_AT_ONCE", 3)
    parted = opacity.explain(table, **point)
    assert parted.parts == tuple(dataclasses.replace(one, share=one.value / parted.exact) for one in whole.parts)
    assert parted.exact == pytest.approx(whole.exact, rel=1e-14)
    assert parted.lines == whole.lines


def test_files_of_one_name_in_two_folders_are_told_apart(build: Build, tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(sources_module, "SMALL_LIST", 0)
    records = (SAMPLES / "carbon-monoxide.par").read_text().splitlines()
    for folder, part in (("a", records[:109]), ("b", records[109:])):
        (tmp_path / folder).mkdir()
        (tmp_path / folder / "co.par").write_text("\n".join(part) + "\n")
    table = build('[[line_list]]\nformat = "hitran"\nreference = "invented"\nfiles = ["a/co.par", "b/co.par"]\n')
    found = opacity.explain(table, wavenumber=2147.0, temperature=296.0, pressure=1.0)
    assert {Path(part.file).parent.name for part in found.parts} == {"a", "b"}
    for part in found.parts:
        assert float(record_of(found, part)[3:15]) == part.wavenumber


@pytest.mark.parametrize("stored", [False, True])
@pytest.mark.parametrize("share", [0.0, 0.2])
def test_isotopologues_of_two_lists_have_their_own_share(
    build: Build, tmp_path: Path, stored: bool, share: float, monkeypatch: pytest.MonkeyPatch
):
    if stored:
        monkeypatch.setattr(sources_module, "SMALL_LIST", 0)
    records = (SAMPLES / "carbon-monoxide.par").read_text().splitlines()
    # Every other line is made one of the second isotopologue.
    records = [record[:2] + "12"[number % 2] + record[3:] for number, record in enumerate(records)]
    for name in ("low", "high"):
        (tmp_path / f"{name}.par").write_text("\n".join(records) + "\n")
    lists = HITRAN.format(file="low.par") + "range = [0.0, 2147.0]\n"
    lists += HITRAN.format(file="high.par") + "range = [2147.000001, 3000.0]\n"
    other = f', "(13C)(16O)" = {share}' if share > 0.0 else ""
    fractions = f'{{ "(12C)(16O)" = 0.7{other} }}'
    table = build(lists, abundance=fractions)
    found = opacity.explain(table, wavenumber=2146.0, temperature=480.0, pressure=1.0, lines=1000)
    assert found.within
    assert sum(part.value for part in found.parts) == pytest.approx(found.exact, rel=1e-12)
    isotopes = {"(12C)(16O)": (1, 0.7), "(13C)(16O)": (2, share)}
    assert {part.isotopologue for part in found.parts} == {name for name, (_, x) in isotopes.items() if x > 0.0}
    in_reach = [r for r in records if abs(float(r[3:15]) - 2146.0) <= 25.0 and (share > 0.0 or r[2] == "1")]
    assert found.lines == len(in_reach)
    for part in found.parts:
        record = record_of(found, part)
        local, fraction = isotopes[part.isotopologue]
        iso = isotopologue(5, local)
        assert record[2] == str(local)
        assert Path(part.file).name == ("low.par" if part.wavenumber <= 2147.0 else "high.par")
        assert float(record[3:15]) == part.wavenumber
        expected = float(record[15:25]) / iso.abundance * fraction
        assert part.strength_296 == pytest.approx(expected, rel=1e-6)
        assert part.doppler == pytest.approx(doppler_of(part.wavenumber, 480.0, iso.mass), rel=1e-6)


def test_a_hapi_table_names_the_record_for_each_gas(build: Build, tmp_path: Path):
    for ending in ("data", "header"):
        shutil.copy(SAMPLES / f"carbon-monoxide.{ending}", tmp_path / f"co.{ending}")
    lists = '[[line_list]]\nformat = "hapi"\nreference = "invented"\nfiles = ["co.data"]\n'
    table = build(lists, "mixture = { H2 = 0.85, He = 0.15 }")
    found = opacity.explain(table, wavenumber=2147.1, temperature=296.0, pressure=1.0, lines=2)
    assert len(found.parts) == 2
    part = found.parts[0]
    extra = [float(word) for word in record_of(found, part)[160:].split(",") if word.strip()]
    names = json.loads((tmp_path / "co.header").read_text())["extra"]
    values = dict(zip(names, extra, strict=True))
    for width, gas in zip(part.widths, ("h2", "he"), strict=True):
        assert width.gamma == pytest.approx(values[f"gamma_{gas}"] / ATM, rel=1e-12)
        assert width.exponent == values[f"n_{gas}"]
        assert width.source == f"{part.file}:{part.record}"
    lorentz = 0.85 * part.widths[0].gamma + 0.15 * part.widths[1].gamma
    assert part.lorentz == pytest.approx(lorentz, rel=1e-12)


def catalogue_record(nu: float, strength: float, energy: float, weight: int) -> str:
    mhz = nu * constants.c * 1e-4
    intensity = math.log10(strength * 2.99792458e18)
    return f"{mhz:13.4f}{0.01:8.4f}{intensity:8.4f} 2{energy:10.4f}{weight:3d}  28001 101 1           0"


@pytest.mark.parametrize("ending", ["", ".bz2"])
def test_a_catalogue_is_traced_and_its_width_is_the_default(build: Build, tmp_path: Path, ending: str):
    text = "\n".join(catalogue_record(2147.0 + 0.5 * k, 1e-20 * (k + 1), 10.0 * k, 3) for k in range(5)) + "\n"
    compress = bz2.compress if ending else bytes
    (tmp_path / f"co.cat{ending}").write_bytes(compress(text.encode()))
    lists = f'[[line_list]]\nformat = "catalogue"\nreference = "x"\nfiles = ["co.cat{ending}"]\nisotopologue = "1"\n'
    table = build(lists, H2)
    found = opacity.explain(table, wavenumber=2148.0, temperature=480.0, pressure=1.0, lines=3)
    assert found.parts[0].record == 3
    for part in found.parts:
        record = record_of(found, part)
        nu = float(record[:13]) / (constants.c * 1e-4)
        strength = 10.0 ** float(record[21:29]) / 2.99792458e18
        assert part.wavenumber == pytest.approx(nu, rel=1e-14)
        at = strength_at(nu, strength, float(record[31:41]), 480.0, reference=300.0)
        profile = voigt(found.wavenumber - nu, doppler_of(nu, 480.0), 0.07 * (296.0 / 480.0) ** 0.5)
        assert part.value == pytest.approx(at * profile, rel=1e-6)
        (width,) = part.widths
        assert width.source == "default (invented)"
        assert any("H2 width from the default 0.07" in note for note in width.notes)


@pytest.fixture
def data_set(tmp_path: Path) -> Path:
    """Five transitions of ten states in ExoMol form, in two files, one of them bz2, with widths by J''."""
    folder = tmp_path / "set"
    folder.mkdir()
    states, rows = [], []
    for k in range(5):
        energy = 10.0 * k
        states.append(f"{2 * k + 1:12d} {energy:13.6f} {2 * k + 1:6d} {k:6d}")
        states.append(f"{2 * k + 2:12d} {energy + 2146.0 + 0.5 * k:13.6f} {2 * k + 3:6d} {k + 1:6d}")
        rows.append(f"{2 * k + 2:12d} {2 * k + 1:12d} {20.0 + k:.4E}")
    (folder / "co.states").write_text("\n".join(states) + "\n")
    (folder / "co__1.trans").write_text("\n".join(rows[:1:-1]) + "\n")
    (folder / "co__2.trans.bz2").write_bytes(bz2.compress(("\n".join(rows[:2]) + "\n").encode()))
    (folder / "co__H2.broad").write_text("a0 0.0500 0.5 0\na0 0.0600 0.6 1\na0 0.0700 0.7 3\n")
    return folder


def test_a_transition_is_traced_to_its_row_its_states_and_its_row_of_widths(build: Build, data_set: Path):
    table = build(EXOMOL, "mixture = { H2 = 1.0 }")
    found = opacity.explain(table, wavenumber=2147.0, temperature=480.0, pressure=1.0)
    states = [line.split() for line in (data_set / "co.states").read_text().splitlines()]
    energies = {int(words[0]): (float(words[1]), int(words[2]), int(words[3])) for words in states}
    kinds = {0: "own", 1: "own", 2: "a neighbour's", 3: "own", 4: "beyond"}
    assert len(found.parts) == 5
    assert {Path(part.file).name for part in found.parts} == {"co__1.trans", "co__2.trans.bz2"}
    for part in found.parts:
        upper, lower, a = record_of(found, part).split()
        assert (part.upper_state, part.lower_state) == (int(upper), int(lower))
        (low, _, j), (high, weight, _) = energies[int(lower)], energies[int(upper)]
        nu = high - low
        population = math.exp(-C2 * low / 480.0) * (1.0 - math.exp(-C2 * nu / 480.0)) / Q(480.0)
        strength = weight * float(a) * population / (8.0 * math.pi * 2.99792458e10 * nu**2)
        (width,) = part.widths
        file, _, rest = width.source.partition(":")
        row = (data_set / "co__H2.broad").read_text().splitlines()[int(rest.split()[0]) - 1].split()
        assert file == str(data_set / "co__H2.broad")
        assert kinds[j] in width.source
        gamma, exponent = float(row[1]), float(row[2])
        assert (width.gamma, width.exponent) == (gamma, exponent)
        lorentz = gamma * (296.0 / 480.0) ** exponent
        profile = voigt(found.wavenumber - nu, doppler_of(nu, 480.0), lorentz)
        assert part.value == pytest.approx(strength * profile, rel=1e-6)


def test_a_width_by_j_serves_a_record_that_has_none(build: Build, tmp_path: Path):
    (tmp_path / "CO__H2.broad").write_text("a0 0.0500 0.5 0\na0 0.0600 0.6 1\n")
    broadening = 'mixture = { H2 = 0.5, air = 0.5 }\nfiles = { H2 = "CO__H2.broad" }'
    table = build(sample(tmp_path), broadening)
    found = opacity.explain(table, wavenumber=2147.1, temperature=296.0, pressure=1.0, lines=1)
    by_h2, by_air = found.parts[0].widths  # R 0: J'' is 0
    assert by_h2.source == f"{tmp_path / 'CO__H2.broad'}:1 (row of its own quantum numbers)"
    assert by_h2.gamma == pytest.approx(0.05, rel=1e-12)
    assert by_air.source == f"{found.parts[0].file}:{found.parts[0].record}"


@pytest.mark.parametrize("profile", ["plinth = true", 'chi = "Tonkov-1996"'])
def test_plinth_and_chi_are_the_recipes(build: Build, tmp_path: Path, profile: str):
    point = {"wavenumber": 2149.0, "temperature": 296.0, "pressure": 1.0}
    plain = opacity.explain(build(sample(tmp_path), cutoff="8.0"), **point)
    found = opacity.explain(build(sample(tmp_path), cutoff="8.0", profile=profile), **point)
    assert found.within
    assert found.exact < 0.999 * plain.exact
    assert found.lines == plain.lines
    for part in found.parts:
        slow = slow_part(record_of(found, part), found.wavenumber, 296.0, 1.0)
        if profile.startswith("plinth"):
            edge = part.strength * voigt(8.0, part.doppler, part.lorentz)
            assert part.value == pytest.approx(slow - edge, rel=1e-5)
        else:
            # Tonkov et al. 1996, from memory as in the program: 1 up to 3 cm-1, then 1.084 exp(-0.027 d).
            d = abs(part.distance)
            chi = 1.0 if d <= 3.0 else 1.084 * math.exp(-0.027 * d)
            assert part.value == pytest.approx(chi * slow, rel=1e-6)
    assert any(abs(part.distance) > 3.0 for part in found.parts)


def test_between_nodes_the_exact_sum_is_at_the_very_place(build: Build, tmp_path: Path):
    table = build(sample(tmp_path))
    found = opacity.explain(table, wavenumber=2147.0, temperature=350.0, pressure=0.1)
    assert not found.at_node
    assert found.within is None
    assert (found.temperature, found.pressure) == (350.0, 0.1)
    with opacity.open_table(table) as opened:
        assert found.value == opened.at(350.0, 0.1)[500]
    for part in found.parts:
        assert part.value == pytest.approx(slow_part(record_of(found, part), 2147.0, 350.0, 0.1), rel=1e-6)


def test_a_value_that_is_wrong_is_not_within_the_tolerance(build: Build, tmp_path: Path):
    table = build(sample(tmp_path), profile="tolerance = 1e-2")
    recipe = opacity.load_recipe(tmp_path / "co.toml")
    found = opacity.explain(table, wavenumber=2147.0, temperature=296.0, pressure=1.0, recipe=recipe)
    point = explain_module.Point(2147.0, 296.0, 1.0, 1.02 * found.exact, True)
    weighed = explain_module.Weighed(found.exact, 0.0, found.lines, 1.0, ())
    assert explain_module.judge_value(point, weighed, recipe.profile) == (pytest.approx(0.02), False)
    nothing = dataclasses.replace(weighed, total=0.0)
    assert explain_module.judge_value(point, nothing, recipe.profile) == (None, False)


def test_where_no_line_reaches_there_is_none(build: Build, tmp_path: Path):
    table = build(sample(tmp_path), cutoff="0.5")
    with opacity.open_table(table) as opened:
        place = opened.wavenumber[np.argmin(opened.spectrum(0, 1))]
    found = opacity.explain(table, wavenumber=place, temperature=296.0, pressure=1.0)
    assert (found.value, found.exact, found.lines, found.parts) == (0.0, 0.0, 0, ())
    assert found.difference == 0.0
    assert found.within


def test_a_profile_has_its_own_nodes_only(build: Build, tmp_path: Path):
    table = build(sample(tmp_path), nodes="nodes = [[300.0, 0.01], [450.0, 0.1]]")
    found = opacity.explain(table, wavenumber=2147.0, temperature=450.0, pressure=0.1)
    assert found.at_node
    assert found.within
    with pytest.raises(TableError, match="values at its own nodes only"):
        opacity.explain(table, wavenumber=2147.0, temperature=300.0, pressure=0.1)


@pytest.mark.parametrize(
    "changes, words",
    [
        ({"wavenumber": 2149.1}, "wavenumber outside the table; expected 2145 to 2149 cm-1, found 2149.1 cm-1"),
        ({"temperature": 200.0}, "temperature outside the table; expected 296 to 480 K"),
        ({"pressure": 2.0}, "pressure outside the table; expected 0.01 to 1 bar"),
    ],
)
def test_what_lies_outside_is_refused(build: Build, tmp_path: Path, changes: dict[str, float], words: str):
    table = build(sample(tmp_path))
    with pytest.raises(TableError, match=words):
        opacity.explain(table, **{"wavenumber": 2147.0, "temperature": 296.0, "pressure": 1.0, **changes})


@pytest.mark.parametrize("changes", [{"wavenumber": -1.0}, {"pressure": "1"}, {"lines": 0}, {"lines": 2.5}])
def test_impossible_arguments_are_refused(build: Build, tmp_path: Path, changes: dict[str, object]):
    table = build(sample(tmp_path))
    with pytest.raises(InputError, match=next(iter(changes))):
        opacity.explain(table, **{"wavenumber": 2147.0, "temperature": 296.0, "pressure": 1.0, **changes})


def test_without_the_recipe_or_with_another_it_is_refused(build: Build, tmp_path: Path):
    table = build(sample(tmp_path))
    point = {"wavenumber": 2147.0, "temperature": 296.0, "pressure": 1.0}
    text = (tmp_path / "co.toml").read_text()
    other = tmp_path / "other.toml"
    other.write_text(text.replace("25.0", "20.0"))
    with pytest.raises(TableError, match=r"was not built from .*other\.toml as it stands now"):
        opacity.explain(table, **point, recipe=other)
    os.remove(table.with_name("co.log.json"))
    with pytest.raises(TableError, match="--recipe RECIPE"):
        opacity.explain(table, **point)
    assert opacity.explain(table, **point, recipe=tmp_path / "co.toml").within
    with open(tmp_path / "co.par", "a", encoding="ascii") as file:
        file.write("\n")
    with pytest.raises(TableError, match=r"line lists of .* changed since the table was built"):
        opacity.explain(table, **point, recipe=tmp_path / "co.toml")


def test_a_changed_file_of_widths_is_refused(build: Build, tmp_path: Path):
    broad = tmp_path / "CO__H2.broad"
    broad.write_text("a0 0.0500 0.5 0\n")
    table = build(sample(tmp_path), 'mixture = { H2 = 1.0 }\nfiles = { H2 = "CO__H2.broad" }')
    broad.write_text("a0 0.0700 0.5 0\n")
    with pytest.raises(TableError, match=r"broadening files of .* changed since the table was built"):
        opacity.explain(table, wavenumber=2147.0, temperature=296.0, pressure=1.0)


def test_as_dict_is_plain(build: Build, tmp_path: Path):
    found = opacity.explain(build(sample(tmp_path)), wavenumber=2147.0, temperature=296.0, pressure=1.0, lines=1)
    plain = json.loads(json.dumps(found.as_dict(), allow_nan=False))
    assert plain["parts"][0]["widths"][0]["broadener"] == "air"
    assert plain["exact"] == found.exact


@pytest.mark.real_lines
@pytest.mark.skipif(not os.environ.get("OPACITY_REAL_LINES"), reason="OPACITY_REAL_LINES is not set")
def test_real_lines_of_water(build: Build, tmp_path: Path):
    """At the strongest point and at the weakest: the parts' sum is the table's, and each is its record's."""
    shutil.copy(Path(os.environ["OPACITY_REAL_LINES"]) / "H2O.par", tmp_path / "H2O.par")
    text = RECIPE.replace("CO", "H2O").replace("carbon monoxide", "water").replace("{abundance}", '"terrestrial"')
    text = text.replace("2145.0, stop = 2149.0", "3700.0, stop = 3704.0")
    parts = {"cutoff": "25.0", "profile": "", "nodes": GRID, "broadening": "mixture = { air = 0.9, self = 0.1 }"}
    (tmp_path / "h2o.toml").write_text(text.format(lists=HITRAN.format(file="H2O.par"), **parts))
    (table,) = opacity.build(opacity.load_recipe(tmp_path / "h2o.toml"), tmp_path / "tables")
    with opacity.open_table(table) as opened:
        sigma, nu = opened.spectrum(1, 0), opened.wavenumber
    for place in (int(np.argmax(sigma)), int(np.argmin(sigma))):
        found = opacity.explain(table, wavenumber=nu[place], temperature=480.0, pressure=0.01, lines=1000)
        assert found.within
        assert found.value == sigma[place]
        assert sum(part.value for part in found.parts) == pytest.approx(found.exact, rel=1e-4)
        for part in found.parts[:20]:
            record = record_of(found, part)
            nu0, strength, energy = float(record[3:15]), float(record[15:25]), float(record[45:55])
            iso = isotopologue(int(record[:2]), int(record[2]))
            q = tips("TIPS-2021", iso)
            populations = [math.exp(-C2 * energy / t) * (1.0 - math.exp(-C2 * nu0 / t)) / q(t) for t in (480.0, 296.0)]
            air, own, exponent, shift = (float(record[i:j]) for i, j in ((35, 40), (40, 45), (55, 59), (59, 67)))
            centre = nu0 + 0.01 * 0.9 * shift / ATM
            lorentz = 0.01 * (0.9 * air + 0.1 * own) / ATM * (296.0 / 480.0) ** exponent
            profile = voigt(found.wavenumber - centre, doppler_of(centre, 480.0, iso.mass), lorentz)
            assert part.value == pytest.approx(strength * populations[0] / populations[1] * profile, rel=1e-6)
            notes = part.widths[1].notes
            assert "no temperature exponent for self given: that of air taken" in notes
