"""`opacity new FORMULA --from DATA SET`, and what `opacity check` says of the recipe until it can be built."""

from __future__ import annotations

import bz2
import re
import tomllib
from pathlib import Path

import pytest

STEM = "12C-16O__Made"
DEFINITION = """\
EXOMOL.def # ID
(12C)(16O) # IsoFormula
12C-16O # Iso-slug
Made # Isotopologue dataset name
20240131 # Version number with format YYYYMMDD
XX # Inchi key of molecule
2 # Number of atoms
12 C # Isotope number 1 and element symbol 1
16 O # Isotope number 2 and element symbol 2
27.994915 4.6486e-26 # Isotopologue mass (Da) and (kg)
Cv # Symmetry group
1 # Number of irreducible representations
1 A1 1 # Irreducible representation ID
2500.0 # Maximum temperature of linelist
2 # No. of pressure broadeners available
0 # Dipole availability (1=yes, 0=no)
0 # No. of cross section files available
0 # No. of k-coefficient files available
0 # Life time availability (1=yes, 0=no)
0 # Lande g-factor availability (1=yes, 0=no)
4 # No. of states in .states file
0 # No. of quanta cases
0 # No. of quanta defined
3 # Total number of transitions
1 # No. of transition files
13.0 # Maximum wavenumber (in cm-1)
14.0 # Higest energy with complete set of transitions (in cm-1)
0.07 # Default value of Lorentzian half-width for all lines (in cm-1/bar)
0.5 # Default value of temperature exponent for all lines
"""
# The lowest levels of CO and the A of its rotational lines (CDMS 28503), so that the build is of something real.
STATES = "1 0.0000 1 0\n2 3.8450 3 1\n3 11.5349 5 2\n4 23.0695 7 3\n"
TRANSITIONS = "2 1 7.2028e-08\n3 2 6.9103e-07\n4 3 2.4969e-06\n"
PARTITION = "".join(f"{t} {t / 2.7664 + 1 / 3:.6f}\n" for t in range(20, 2520, 20))


@pytest.fixture
def data_set(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    folder = tmp_path / "lists"
    folder.mkdir()
    (folder / f"{STEM}.def").write_text(DEFINITION)
    (folder / f"{STEM}.states.bz2").write_bytes(bz2.compress(STATES.encode()))
    (folder / f"{STEM}.trans").write_text(TRANSITIONS)
    (folder / f"{STEM}.pf").write_text(PARTITION)
    for name in ("H2", "He"):
        (folder / f"12C-16O__{name}.broad").write_text("a0 0.07 0.5 0\na0 0.06 0.5 3\n")
    monkeypatch.chdir(tmp_path)
    return folder


def decided(path: Path) -> str:
    """The recipe's text with the decisions taken."""
    text = re.sub(r" +# DECIDE:[^\n]*", "", path.read_text()).replace('reference = ""', 'reference = "CDMS 28503"')
    text = re.sub(r"wavenumber = \{[^}]*\}", "wavenumber = { start = 1.0, stop = 13.0, step = 0.01 }", text)
    text = re.sub(r"temperature = \{[^}]*\}", "temperature = [100.0, 296.0]", text)
    text = re.sub(r"pressure = \{[^}]*\}", "pressure = [1.0]", text)
    return re.sub(r"\n\[\[band_strength\]\][^[]*(\[[^[]*)?", "\n", text)


@pytest.mark.parametrize("source", [".", f"{STEM}.def", f"{STEM}.states.bz2"])
def test_what_the_files_tell_is_filled_in(opacity, data_set, source):
    code, out, err = opacity("new", "CO", "--from", data_set / source, "-o", "co.toml")
    assert (code, err) == (0, "")
    assert out == "co.toml: fill in what is marked DECIDE; `opacity check co.toml` says what is missing\n"
    recipe = tomllib.loads(Path("co.toml").read_text())
    (one,) = recipe["line_list"]
    assert one["format"] == "exomol"
    assert one["isotopologue"] == "(12C)(16O)"
    assert sorted(one["files"]) == sorted(
        f"lists/{name}"
        for name in (f"{STEM}.def", f"{STEM}.states.bz2", f"{STEM}.trans", f"{STEM}.pf", "12C-16O__H2.broad",
                     "12C-16O__He.broad")
    )  # fmt: skip
    assert recipe["partition_function"] == {"source": "file"}
    assert recipe["isotopologues"]["abundance"] == "pure"
    assert recipe["broadening"]["mixture"] == {"H2": 0.85, "He": 0.15}
    assert recipe["grid"]["wavenumber"]["stop"] == 13.0
    assert recipe["grid"]["temperature"]["stop"] == 2500.0
    assert "0.07 cm-1/bar, exponent 0.5" in Path("co.toml").read_text()
    assert "mass" not in recipe["molecule"]


def test_from_new_to_a_table(opacity, data_set):
    """Every decision is asked for in the order of the file; decided, the recipe is complete, and it builds."""
    assert opacity("new", "CO", "--from", data_set)[0] == 0
    path = Path("CO.toml")
    lines = path.read_text().splitlines()
    code, out, err = opacity("check", "CO.toml")
    assert (code, out) == (2, "")
    marked = [number for number, line in enumerate(lines, start=1) if "# DECIDE:" in line]
    assert [int(line.split(":")[1]) for line in err.splitlines()] == marked
    assert [line.split(": ")[1] for line in err.splitlines()] == [
        "line_list[0].reference",
        "broadening.mixture",
        "grid.wavenumber",
        "grid.temperature",
        "grid.pressure",
    ]
    assert all("not decided yet; expected " in line for line in err.splitlines())
    path.write_text(decided(path))
    code, out, err = opacity("check", "CO.toml")
    assert (code, err) == (0, "")
    assert "nothing is missing" in out
    assert opacity("build", "CO.toml", "--quiet")[0] == 0
    code, out, _ = opacity("check", "CO.toml")
    assert code == 0
    assert "recomputed from CO.toml" in " ".join(out.split())


def test_many_files_of_transitions_are_a_pattern(opacity, data_set):
    (data_set / f"{STEM}.trans").unlink()
    for start in range(6):
        (data_set / f"{STEM}__{start:05}-{start + 1:05}.trans").write_text(TRANSITIONS)
    assert opacity("new", "CO", "--from", data_set)[0] == 0
    (one,) = tomllib.loads(Path("CO.toml").read_text())["line_list"]
    assert f"lists/{STEM}__*.trans" in one["files"]
    assert len(one["files"]) == 6


def test_without_partition_file_and_broadening_files(opacity, data_set):
    for path in [*data_set.glob("*.broad"), *data_set.glob("*.pf"), *data_set.glob("*.def")]:
        path.unlink()
    assert opacity("new", "CO", "--from", data_set)[0] == 0
    recipe = tomllib.loads(Path("CO.toml").read_text())
    assert recipe["partition_function"] == {"source": "states"}
    Path("CO.toml").write_text(decided(Path("CO.toml")))
    code, _, err = opacity("check", "CO.toml")
    assert code == 2
    first, second = err.splitlines()
    assert (
        "broadening.mixture.H2: nothing gives half-widths by H2 for line_list[0]; expected a file __H2.broad" in first
    )
    assert "broadening.mixture.He: nothing gives half-widths by He" in second


def test_a_molecule_that_hapi_does_not_know_takes_the_mass_of_the_definition(opacity, data_set):
    for old in list(data_set.iterdir()):
        text = old.read_bytes().replace(b"(12C)(16O)", b"(28Si)(16O)").replace(b"12C-16O", b"28Si-16O")
        old.with_name(old.name.replace("12C-16O", "28Si-16O")).write_bytes(text)
        old.unlink()
    code, out, _ = opacity("new", "SiO", "--from", data_set)
    assert code == 0
    assert "not in hapi's tables" not in out
    recipe = tomllib.loads(Path("SiO.toml").read_text())
    assert recipe["molecule"]["mass"] == 27.994915
    assert recipe["line_list"][0]["isotopologue"] == "(28Si)(16O)"


def test_what_leads_to_no_data_set(opacity, data_set):
    def fails(code: int, words: str, *arguments: object) -> None:
        assert (code, "") == opacity("new", *arguments, "-o", "x.toml")[:2]
        assert re.search(words, opacity("new", *arguments, "-o", "x.toml")[2])
        assert not Path("x.toml").exists()

    fails(2, r"^FORMULA: the data set is of another molecule; expected H2O, found \(12C\)\(16O\) in 12C-16O__Made\n$",
          "H2O", "--from", data_set)  # fmt: skip
    fails(2, r"^--from: leads to no data set; expected a folder, or a .def", "CO", "--from", data_set / f"{STEM}.pf")
    fails(1, r"none.def: no such file", "CO", "--from", data_set / "none.def")
    (data_set / "empty").mkdir()
    fails(1, r"empty: no data set here; expected a .def or .states file", "CO", "--from", data_set / "empty")
    (data_set / "13C-16O__Made.def").write_text(DEFINITION)
    fails(2, r"^--from: several data sets; expected one, found 12C-16O__Made.def, 13C-16O__Made.def; name its file",
          "CO", "--from", data_set)  # fmt: skip
