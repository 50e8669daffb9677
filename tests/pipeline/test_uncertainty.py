"""The lists' own uncertainty as builds store it, against plain loops over the texts of the lists, in every format."""

from __future__ import annotations

import bz2
import json
import math
import os
import random
import shutil
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from scipy import constants

import opacity
from opacity.molecule.isotopologue import isotopologue
from opacity.molecule.partition_function import tips
from opacity.pipeline import sources as sources_module
from opacity.pipeline import uncertainty as uncertainty_module

SAMPLES = Path(__file__).parents[2] / "data-samples"
C2 = 100.0 * constants.h * constants.c / constants.k
ATM = 1.01325
NAN = math.nan
# Upper ends of the classes by code; Rothman et al. 2005, JQSRT 96, 139, table 5, from memory.
RELATIVE = {"4": 0.20, "5": 0.10, "6": 0.05, "7": 0.02, "8": 0.01}
POSITION = {str(k): 10.0 ** (1 - k) for k in range(1, 10)}

HEAD = """\
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
"""
TAIL = """\
[profile]
cutoff = 25.0
[grid]
wavenumber = { start = 2100.0, stop = 2150.0, step = 0.01 }
temperature = [296.0, 900.0]
pressure = [1e-4, 1.0]
[cross_section]
"""
LIST = '[[line_list]]\nformat = "{}"\nreference = "invented"\nfiles = [{}]\n'
H2 = 'mixture = { H2 = 1.0 }\n[broadening.default.H2]\ngamma = 0.07\nexponent = 0.5\nsource = "invented"\n'
ABUNDANCES = {"pure": '"pure"', "terrestrial": '"terrestrial"'}
NODES = [(t, p) for t in (296.0, 900.0) for p in (1e-4, 1.0)]
BANDS = [(2100.0 + 5.0 * k, 2105.0 + 5.0 * k) for k in range(10)]


class Line:
    """A line with what its text says: S at `reference` K; half-widths per bar, exponent and uncertainty of each gas."""

    def __init__(self, nu, strength, energy, gases, shift, u, v, q, mass, reference=296.0):
        self.nu, self.energy, self.gases, self.shift, self.u, self.v = nu, energy, gases, shift, u, v
        self.q, self.mass, self.strength, self.reference = q, mass, strength, reference

    def at(self, t, p):
        populations = [
            math.exp(-C2 * self.energy / at) * (1.0 - math.exp(-C2 * self.nu / at)) / self.q(at)
            for at in (t, self.reference)
        ]
        lorentz = p * sum(x * gamma * (296.0 / t) ** n for x, gamma, n, _ in self.gases)
        uncertain = p * sum(x * gamma * (296.0 / t) ** n * u for x, gamma, n, u in self.gases)
        energy = 2.0 * math.log(2.0) * constants.k * t / (self.mass * constants.atomic_mass)
        doppler = (self.nu + p * self.shift) * math.sqrt(energy) / constants.c
        half_width = 0.5346 * lorentz + math.sqrt(0.2166 * lorentz**2 + doppler**2)
        return self.strength * populations[0] / populations[1], uncertain / half_width, self.v / half_width


def of_record(record: str, mixture: dict[str, float], fraction: float = 1.0, pure: bool = True) -> Line:
    iso = isotopologue(int(record[:2]), int(record[2]))
    scale = fraction / iso.abundance if pure else fraction
    n, gases = float(record[55:59]), []
    for place, (name, column) in enumerate({"air": (35, 40), "self": (40, 45)}.items(), start=2):
        if name in mixture:
            code = RELATIVE.get(record[127 + place], NAN)
            gases.append((mixture[name], float(record[slice(*column)]) / ATM, n, code))
    return Line(
        float(record[3:15]), scale * float(record[15:25]), float(record[45:55]), gases,
        mixture.get("air", 0.0) * float(record[59:67]) / ATM,
        RELATIVE.get(record[128], NAN), POSITION.get(record[127], NAN), tips("TIPS-2021", iso), iso.mass,
    )  # fmt: skip


def agree(found: float | None, wanted: float | None) -> bool:
    """Equal to the three digits that are kept, beside 2e-6 for what stores round."""
    if found is None or wanted is None:
        return found is wanted
    if abs(wanted) < 1e-12:
        return found == 0.0
    return abs(found - wanted) <= 0.5 * 10.0 ** (math.floor(math.log10(wanted)) - 2) + 2e-6 * wanted


def assert_is(found: dict, lines: list[Line], bands=BANDS, nodes=NODES) -> None:
    assert found["bands"] == [pytest.approx(list(one), abs=1e-9) for one in bands]
    assert found["nodes"] == [list(one) for one in nodes]
    for k, (low, high) in enumerate(found["bands"]):
        here = [line for line in lines if low <= line.nu <= high]
        for i, (t, p) in enumerate(nodes):
            values = [(line, *line.at(t, p)) for line in here]
            total = math.fsum(s for _, s, _, _ in values)
            wanted: dict[str, float | None] = dict.fromkeys(("strength_correlated", "strength_uncorrelated"))
            known = [(s, line.u) for line, s, _, _ in values if not math.isnan(line.u)]
            stated = math.fsum(s for s, _ in known)
            if stated:
                wanted["strength_correlated"] = math.fsum(s * u for s, u in known) / stated
                wanted["strength_uncorrelated"] = math.sqrt(math.fsum((s * u) ** 2 for s, u in known)) / stated
            wanted["not_stated"] = 1.0 - stated / total if total else None
            for name, place in (("width", 2), ("position", 3)):
                some = [(one[1], one[place]) for one in values if not math.isnan(one[place])]
                of = math.fsum(s for s, _ in some)
                wanted[name] = math.fsum(s * x for s, x in some) / of if of else None
                wanted[f"{name}_not_stated"] = 1.0 - of / total if total else None
            for name, value in wanted.items():
                assert agree(found[name][k][i], value), (name, low, t, p, found[name][k][i], value)


Build = Callable[..., dict]


@pytest.fixture
def stated(tmp_path: Path) -> Build:
    """Build a recipe's table; what it stores of the lists' uncertainty."""

    def made(
        lists: str, broadening: str = "mixture = { air = 1.0 }", tail: str = TAIL, abundance: str = "pure"
    ) -> dict:
        path = tmp_path / "co.toml"
        head = HEAD.format(lists=lists, broadening=broadening, abundance=ABUNDANCES[abundance])
        path.write_text(head + tail, encoding="utf-8")
        with opacity.open_table(opacity.build(opacity.load_recipe(path), tmp_path / "tables")[0]) as table:
            found = table.checks["uncertainty"]
        assert found["of"].startswith("the line list's own")
        return json.loads(json.dumps(found, allow_nan=False))

    return made


def with_codes(name: str, seed: int = 1) -> list[str]:
    """The sample's records with codes planted at random, bad ones among them."""
    draw = random.Random(seed)
    rows = (SAMPLES / name).read_text().splitlines()
    return [row[:127] + "".join(draw.choice("0123456789 x") for _ in range(6)) + row[133:] for row in rows]


@pytest.mark.parametrize("is_stored", [False, True])
@pytest.mark.parametrize("mixture", [{"air": 1.0}, {"air": 0.7, "self": 0.3}])
def test_records(stated: Build, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, is_stored: bool, mixture: dict):
    if is_stored:
        monkeypatch.setattr(sources_module, "SMALL_LIST", 0)
    rows = with_codes("carbon-monoxide.par")
    # Two files whose lines alternate, one of them compressed and neither in order.
    draw = random.Random(2)
    for name, some in (("a.par", rows[::2]), ("b.par.bz2", rows[1::2])):
        text = ("\n".join(draw.sample(some, len(some))) + "\n").encode()
        (tmp_path / name).write_bytes(bz2.compress(text) if name.endswith("bz2") else text)
    words = ", ".join(f"{name} = {x}" for name, x in mixture.items())
    found = stated(LIST.format("hitran", '"a.par", "b.par.bz2"'), f"mixture = {{ {words} }}", abundance="terrestrial")
    assert_is(found, [of_record(row, mixture, pure=False) for row in rows])
    assert "table 5, from memory" in found["source"]
    assert any(value is not None and 0.0 < value < 1.0 for row in found["not_stated"] for value in row)


def test_a_hapi_table(stated: Build, tmp_path: Path):
    shutil.copy(SAMPLES / "carbon-monoxide.header", tmp_path / "co.header")
    rows = with_codes("carbon-monoxide.data")
    (tmp_path / "co.data").write_text("\n".join(rows) + "\n")
    lists = LIST.format("hapi", '"co.data"')
    assert_is(stated(lists), [of_record(row, {"air": 1.0}) for row in rows])
    found = stated(lists, "mixture = { H2 = 0.85, He = 0.15 }")
    assert {value for row in found["width"] for value in row} == {None}
    assert any(value is not None for row in found["strength_correlated"] for value in row)


def test_a_catalogue_states_positions(stated: Build, tmp_path: Path):
    q, mass = tips("TIPS-2021", isotopologue(5, 1)), isotopologue(5, 1).mass
    lines, rows = [], []
    for k in range(30):
        nu, energy, error, log = 2101.0 + 1.7 * k, 11.5 * k, 0.01 * k, -4.0 - 0.03 * k
        mhz = float(f"{nu * constants.c * 1e-4:13.4f}")
        rows.append(f"{mhz:13.4f}{error:8.4f}{log:8.4f} 2{energy:10.4f}  3  28001 101")
        v = error / (constants.c * 1e-4) if error else NAN
        gases, strength = [(1.0, 0.07, 0.5, NAN)], 10.0**log / 2.99792458e18
        lines.append(Line(mhz / (constants.c * 1e-4), strength, energy, gases, 0.0, NAN, v, q, mass, 300.0))
    (tmp_path / "co.cat").write_text("\n".join(rows) + "\n")
    found = stated(LIST.format("catalogue", '"co.cat"') + 'isotopologue = "1"\n', H2)
    assert_is(found, lines)
    assert found["source"] == uncertainty_module.ERRORS


@pytest.mark.parametrize("with_definition", [True, False])
def test_states_of_a_list_in_exomol_format(stated: Build, tmp_path: Path, with_definition: bool):
    folder = tmp_path / "set"
    folder.mkdir()
    q, mass = tips("TIPS-2021", isotopologue(5, 1)), isotopologue(5, 1).mass
    draw, states, rows, lines = random.Random(3), [], [], []
    for k in range(60):
        low, high = 10.0 * k + 1e-6 * draw.randrange(1000), 2100.5 + 10.8 * k
        errors = [0.0 if k == 0 else float(f"{10.0 ** draw.uniform(-6, -2):.6f}") for _ in range(2)]
        for place, energy in enumerate((low, high)):
            states.append(f"{2 * k + place + 1:12d} {energy:13.6f} {2 * k + 1:6d} {k:6d} {errors[place]:12.6f}")
        rows.append(f"{2 * k + 2:12d} {2 * k + 1:12d} {20.0 + k:.4E}")
        nu = float(f"{high:.6f}") - float(f"{low:.6f}")
        population = math.exp(-C2 * low / 296.0) * (1.0 - math.exp(-C2 * nu / 296.0)) / q(296.0)
        strength = (2 * k + 1) * (20.0 + k) * population / (8.0 * math.pi * 2.99792458e10 * nu**2)
        v = math.hypot(*errors) or NAN
        v = v if with_definition else NAN
        lines.append(Line(nu, strength, low, [(1.0, 0.07, 0.5, NAN)], 0.0, NAN, v, q, mass))
    (folder / "co.states").write_text("\n".join(states) + "\n")
    (folder / "co__1.trans").write_text("\n".join(rows[:20:-1]) + "\n")
    (folder / "co__2.trans").write_text("\n".join(rows[:21]) + "\n")
    if with_definition:
        # Only what is needed; the mass is that of hapi's tables.
        records = [
            ("EXOMOL.def", "ID"), ("(12C)(16O)", "IsoFormula"), ("12C-16O", "Iso-slug"), ("INVENTED", "Isotopologue"
            " dataset name"), ("20240131", "Version number with format YYYYMMDD"), (f"{mass} 4.6e-26", "Isotopologue"
            " mass (Da) and (kg)"), ("1", "Uncertainty availability (1=yes, 0=no)"),
        ]  # fmt: skip
        (folder / "co.def").write_text("".join(f"{value}  # {what}\n" for value, what in records))
    found = stated(LIST.format("exomol", '"set/*"') + 'isotopologue = "(12C)(16O)"\n', H2)
    assert_is(found, lines)
    assert found["source"] == (uncertainty_module.STATES if with_definition else uncertainty_module.NO_STATES)


def test_species_count_by_their_strength(tmp_path: Path):
    mixtures, fractions = {"CO": {"air": 1.0}, "NO": {"self": 1.0}}, {"CO": 0.01, "NO": 0.2}
    lines, tail = [], ""
    for seed, (name, mixture) in enumerate(mixtures.items(), start=4):
        rows = with_codes("carbon-monoxide.par", seed)
        # Invented lines of NO: those of CO under its number.
        rows = rows if name == "CO" else [f" 8{row[2:]}" for row in rows]
        (tmp_path / f"{name}.par").write_text("\n".join(rows) + "\n")
        (gas,) = mixture
        lists = LIST.format("hitran", f'"{name}.par"')
        head = HEAD.format(lists=lists, broadening=f"mixture = {{ {gas} = 1.0 }}", abundance='"pure"')
        (tmp_path / f"{name}.toml").write_text(head.replace('formula = "CO"', f'formula = "{name}"') + TAIL)
        tail += f'[[species]]\nrecipe = "{name}.toml"\nfraction = {fractions[name]}\n'
        lines += [of_record(row, mixture, fractions[name]) for row in rows]
    (tmp_path / "mix.toml").write_text(tail + TAIL)
    (path,) = opacity.build(opacity.load_recipe(tmp_path / "mix.toml"), tmp_path / "tables")
    with opacity.open_table(path) as table:
        assert_is(table.checks["uncertainty"], lines)


def test_no_line_is_read_for_lists_that_cannot_state_anything(
    stated: Build, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
):
    header = json.loads((SAMPLES / "carbon-monoxide.header").read_text())
    del header["position"]["ierr"]
    (tmp_path / "co.header").write_text(json.dumps(header))
    shutil.copy(SAMPLES / "carbon-monoxide.data", tmp_path / "co.data")

    def never(*_: object) -> None:
        raise AssertionError

    monkeypatch.setattr(uncertainty_module.ListedLines, "stretches", never)
    found = stated(LIST.format("hapi", '"co.data"'))
    assert found["source"] == uncertainty_module.NO_CODES
    for name, rows in found.items():
        if name not in ("of", "source", "bands", "nodes"):
            assert rows == [[1.0 if name.endswith("not_stated") else None] * 4] * 10


@pytest.fixture
def opacity_command(request: pytest.FixtureRequest) -> Callable:
    return request.getfixturevalue("opacity")


def test_k_tables_have_the_same_and_keep_it(stated: Build, tmp_path: Path, opacity_command: Callable):
    rows = with_codes("carbon-monoxide.par", 6)
    (tmp_path / "a.par").write_text("\n".join(rows) + "\n")
    lists = LIST.format("hitran", '"a.par"')
    spectra = stated(lists)
    tail = TAIL.replace("[cross_section]", "[k_coefficient]\nbands = { width = 25.0 }\ng_points = 8\n")
    bands = stated(lists, tail=tail)
    assert bands == spectra
    (path,) = (tmp_path / "tables").glob("*.k-coefficient.h5")
    assert opacity_command("g-points", path, "--count", 4, "-o", tmp_path / "other", "--quiet")[0] == 0
    with opacity.open_table(tmp_path / "other" / path.name) as table:
        assert table.checks["uncertainty"] == bands


def test_lists_too_long_are_not_looked_at(stated: Build, tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setattr(uncertainty_module, "MOST_RECORDS", 200)
    (tmp_path / "a.par").write_text("\n".join(with_codes("carbon-monoxide.par")) + "\n")
    found = stated(LIST.format("hitran", '"a.par"'))
    assert found["source"].startswith("not looked at")
    assert {value for row in found["not_stated"] for value in row} == {1.0}
    assert {value for row in found["strength_correlated"] for value in row} == {None}


def test_the_same_bits_for_any_number_of_workers_and_stretches(
    stated: Build, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
):
    from opacity.pipeline import listed as listed_module

    (tmp_path / "a.par").write_text("\n".join(with_codes("carbon-monoxide.par")) + "\n")
    found = stated(LIST.format("hitran", '"a.par"'))
    recipe = opacity.load_recipe(tmp_path / "co.toml")
    assert found == uncertainty_module.stated_uncertainty(recipe, tmp_path, frozenset(), quiet=True, workers=3)
    monkeypatch.setattr(listed_module, "LINES_AT_ONCE", 7)
    assert found == uncertainty_module.stated_uncertainty(recipe, tmp_path, frozenset(), quiet=True)


@pytest.mark.real_lines
@pytest.mark.skipif(not os.environ.get("OPACITY_REAL_LINES"), reason="OPACITY_REAL_LINES is not set")
@pytest.mark.parametrize(
    ("molecule", "mixture"), [("CO", {"air": 1.0}), ("H2O", {"air": 0.99, "self": 0.01}), ("H2O", {"self": 1.0})]
)
def test_real_lines(stated: Build, tmp_path: Path, molecule: str, mixture: dict):
    path = Path(os.environ["OPACITY_REAL_LINES"]) / f"{molecule}.par"
    shutil.copy(path, tmp_path / path.name)
    start = 2100.0 if molecule == "CO" else 3700.0
    head = HEAD.replace("CO", molecule).replace("carbon monoxide", "a molecule")
    words = ", ".join(f"{name} = {x}" for name, x in mixture.items())
    lists = LIST.format("hitran", f'"{path.name}"')
    text = head.format(lists=lists, broadening=f"mixture = {{ {words} }}", abundance='"terrestrial"')
    tail = TAIL.replace("2100.0", f"{start}").replace("2150.0", f"{start + 50.0}")
    (tmp_path / "real.toml").write_text(text + tail)
    (table,) = opacity.build(opacity.load_recipe(tmp_path / "real.toml"), tmp_path / "tables")
    records = path.read_text().splitlines()
    bands = [(low, low + 5.0) for low in np.arange(start, start + 50.0, 5.0)]
    with opacity.open_table(table) as opened:
        lines = [of_record(row, mixture, pure=False) for row in records]
        assert_is(opened.checks["uncertainty"], lines, bands)
