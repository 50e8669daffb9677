"""A look at a data set in ExoMol format: its files are found, and planted faults are counted."""

from __future__ import annotations

import bz2
import gzip
import json
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.line_list.read import read_lines
from opacity.molecule.isotopologue import isotopologue
from opacity.molecule.partition_function import tips
from opacity.pipeline.data_set_check import check_data_set
from opacity.recipe.load import load_recipe

SAMPLE = Path(__file__).parents[2] / "data-samples" / "carbon-monoxide.par"
STEM = "12C-16O__MADE"
Q = tips("TIPS-2021", isotopologue(5, 1))
DEFINITION = {
    "IsoFormula": "(12C)(16O)",
    "Iso-slug": "12C-16O",
    "Isotopologue dataset name": "MADE",
    "Version number with format YYYYMMDD": "20240131",
    "Isotopologue mass (Da) and (kg)": "27.994915 4.6e-26",
    "No. of states in .states file": "155",
    "Total number of transitions": "202",
    "No. of transition files": "2",
    "No. of pressure broadeners available": "1",
    "Maximum wavenumber (in cm-1)": "2300.0",
    "Label for a particular broadener": "H2",
    "Filename of particular broadener": "12C-16O__H2.broad",
}


class MadeSet:
    """The sample's lines between their own levels, each level once; parts can be changed before it is written."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        lines = read_lines(SAMPLE)
        ids: dict[tuple[int, float], int] = {}
        self.states: list[str] = []
        self.rows: list[str] = []

        def level(energy: float, weight: float) -> int:
            # Levels of the same J lie some 2000 cm-1 apart: the vibrational state is their number.
            key = (round(energy / 1800.0 - weight**2 / 3800.0), weight)
            if key not in ids:
                ids[key] = len(ids) + 1
                self.states.append(f"{ids[key]:12d} {energy:13.6f} {weight:6.0f} {(weight - 1) / 2:6.1f}")
            return ids[key]

        for i in range(len(lines)):
            low = float(lines.lower_energy[i])
            lower = level(low, float(lines.lower_weight[i]))
            upper = level(low + float(lines.wavenumber[i]), float(lines.upper_weight[i]))
            self.rows.append(f"{upper:12d} {lower:12d} {lines.einstein_a[i]:.5E}")
        self.definition = dict(DEFINITION)
        self.broad = ["a0 0.0700 0.500 0", "a0 0.0600 0.500 60", "v1 0.0500 0.100 1 0"]
        self.partition = [f"{t:8.1f} {Q(t):.8E}" for t in np.arange(50.0, 3001.0, 10.0)]

    def write(self) -> Path:
        """Write the files; gives the path of the definition."""
        put = self.folder.joinpath
        put(f"{STEM}.states.bz2").write_bytes(bz2.compress(_text(self.states)))
        put(f"{STEM}__01900-02100.trans").write_bytes(_text(self.rows[:100]))
        put(f"{STEM}__02100-02300.trans.bz2").write_bytes(bz2.compress(_text(self.rows[100:])))
        put(f"{STEM}.pf").write_bytes(_text(self.partition))
        put("12C-16O__H2.broad").write_bytes(_text(self.broad))
        records = ["EXOMOL.def # ID", *(f"{value} # {comment}" for comment, value in self.definition.items())]
        put(f"{STEM}.def").write_bytes(_text(records))
        put("13C-16O__OTHER.states").write_bytes(_text(self.states[:5]))
        put("13C-16O__OTHER.trans").write_bytes(_text(self.rows[:5]))
        return put(f"{STEM}.def")


def _text(lines: list[str]) -> bytes:
    return ("\n".join(lines) + "\n").encode("ascii")


@pytest.fixture
def made(tmp_path: Path) -> MadeSet:
    return MadeSet(tmp_path)


def test_a_good_data_set_has_nothing_against_it(made: MadeSet) -> None:
    report = check_data_set(made.write())
    assert (report.lines, report.molecule, report.isotopologues) == (202, "CO", ("(12C)(16O)",))
    assert report.ledger.left_out == {}
    assert report.reach == pytest.approx((1886.458, 2289.717), abs=1e-3)
    assert report.problems == ()
    assert report.remarks == (
        "transitions given twice are not looked for here: `opacity ingest RECIPE`, which sorts the lines, counts them",
    )
    states = report.facts["states"]
    assert (states["count"], states["highest_j"], states["notes"]) == (155, 51.0, {})
    # Levels up to v = 2: at the highest temperature that they are trusted at, those above are missing.
    for name in (f"{STEM}.pf", "TIPS-2021"):
        assert -0.01 < states["partition"][name]["largest_difference"] < 0.0
        assert states["partition"][name]["temperature"] > 1000.0
    assert states["partition_296"] == pytest.approx(Q(296.0), rel=1e-4)
    broad = report.facts["broadening"]["H2"]
    assert (broad["used"], broad["skipped"]) == ({"a0": 2}, {"v1": 1})
    (band,) = (one for one in report.bands if one.name == "1-0")
    assert band.verdict == "agrees"
    # A is written with three digits in the sample's records, and Q is that of the states.
    assert band.difference == pytest.approx(0.0, abs=2e-3)


def test_planted_faults_are_counted_by_kind(made: MadeSet) -> None:
    upper, lower, _ = made.rows[0].split()
    made.rows += [
        *[f"9999 {lower} 1.0"] * 2,
        *[f"{upper} 9999 1.0"] * 3,
        f"{lower} {upper} 1.0",
        *[f"{upper} {upper} 1.0"] * 4,
        *[f"{upper} {lower} -1.0"] * 5,
        *["x y z"] * 6,
        f"{upper} {lower} 1.0",
    ]
    report = check_data_set(made.write())
    assert report.ledger.left_out == {
        "upper state is not in the states file": 2,
        "lower state is not in the states file": 3,
        "upper state lies below the lower one": 1,
        "both states have the same energy: wavenumber 0": 4,
        "Einstein A is impossible": 5,
        "row cannot be read": 6,
    }
    assert (report.lines, report.ledger.read) == (203, 224)
    assert "202 transitions by the definition, 224 found" in report.problems


def test_one_file_of_transitions_is_looked_at_with_its_states(made: MadeSet) -> None:
    made.rows.append("9999 1 1.0")
    made.write()
    report = check_data_set(made.folder / f"{STEM}__02100-02300.trans.bz2")
    assert (report.lines, report.ledger.read) == (102, 103)
    assert f"one of 2 .trans files of {STEM} that are here" in report.remarks
    assert not any("by the definition" in one for one in report.problems)
    assert report.bands[0].verdict == "cannot judge"
    report = check_data_set(made.folder / "13C-16O__OTHER.trans")
    assert report.isotopologues == ("(13C)(16O)",)
    assert "no definition (.def) beside it: nothing is held against one" in report.remarks
    assert report.lines > 0


def test_states_alone_are_judged_by_themselves(made: MadeSet) -> None:
    made.write()
    for path in made.folder.glob("*"):
        if not path.name.startswith(f"{STEM}.states"):
            path.unlink()
    report = check_data_set(made.folder / f"{STEM}.states.bz2")
    assert (report.lines, report.ledger.read, report.bands, report.reach) == (0, 0, (), None)
    said = [words for word, words in report.rows if word == "states"]
    assert said[0].startswith("155 states up to ")
    assert "no .pf file beside it: Q summed over the states is not held against one" in said
    assert any(one.startswith("Q summed over the states against TIPS-2021: largest difference -") for one in said)


def test_states_that_cannot_be_right_are_counted(made: MadeSet) -> None:
    fields = [row.split() for row in made.states]
    fields[0][2] = "0"
    fields[1][2] = "1.5"
    fields[2][1] = "-0.5"
    made.states = [" ".join(row) for row in fields]
    made.definition["No. of states in .states file"] = "160"
    report = check_data_set(made.write())
    assert report.facts["states"]["notes"] == {
        "energy below 0: used as it stands": 1,
        "states missing: the definition counts 160": 5,
        "total weight 0: such a state adds nothing": 1,
        "total weight is no whole multiple of 2J + 1": 1,
    }


def test_a_missing_ground_state_is_told(made: MadeSet) -> None:
    energies = sorted(float(row.split()[1]) for row in made.states)
    made.states = [row for row in made.states if float(row.split()[1]) > 0.0]
    report = check_data_set(made.write())
    assert any(words.startswith(f"the lowest energy is {energies[1]:g} cm-1, not 0") for words in report.problems)
    assert set(report.ledger.left_out) == {"lower state is not in the states file"}


def test_states_without_weight_have_no_partition_function(made: MadeSet) -> None:
    made.states = [f"{row[:26]} 0 {row[34:]}" for row in made.states]
    report = check_data_set(made.write())
    assert "the sum over the states is 0: there is no Q of theirs" in report.problems
    assert report.facts["states"]["notes"] == {"total weight 0: such a state adds nothing": 155}


def test_another_partition_function_is_told(made: MadeSet) -> None:
    made.partition = [f"{t:8.1f} {12.0 * Q(t):.8E}" for t in np.arange(50.0, 3001.0, 10.0)]
    report = check_data_set(made.write())
    found = report.facts["states"]["partition"][f"{STEM}.pf"]
    assert found["largest_difference"] == pytest.approx(1.0 / 12.0 - 1.0, abs=1e-3)
    made.partition = ["no", "table"]
    report = check_data_set(made.write())
    assert any(words.startswith(f"Q not compared: {made.folder}/{STEM}.pf:1: ") for _, words in report.rows)


def test_what_the_definition_says_otherwise_is_told(made: MadeSet) -> None:
    made.definition |= {
        "No. of transition files": "3",
        "Maximum wavenumber (in cm-1)": "2200.0",
        "Isotopologue mass (Da) and (kg)": "28.1 4.6e-26",
        "Filename of particular broadener": "12C-16O__he.broad",
        "Iso-slug": "13C-16O",
    }
    assert check_data_set(made.write()).problems == (
        "the definition is of (12C)(16O) by its formula, of 13C-16O by its slug",
        "mass 28.1 g/mol in the definition, 27.994915 g/mol in hapi's tables (+0.38 %)",
        "12C-16O__he.broad is in the definition, and not beside it",
        "3 .trans files by the definition, 2 found",
        "lines up to 2289.716892 cm-1, and only to 2200 by the definition",
    )


@pytest.mark.parametrize("broad", [["v1 0.05 0.1 1 0"], ["a0 x 0.5 0"]])
def test_a_broadening_file_of_no_use_is_told_and_stops_nothing(made: MadeSet, broad: list[str]) -> None:
    made.broad = broad
    report = check_data_set(made.write())
    assert report.lines == 202
    assert "12C-16O__H2.broad" in report.facts["broadening"]["H2"]["error"]
    assert report.problems[0].startswith(f"widths by H2: {made.folder}/12C-16O__H2.broad")
    assert not any("width" in note for note in report.ledger.notes)


def test_a_missing_file_is_one_line_with_a_remedy(made: MadeSet) -> None:
    path = made.write()
    for kind, target in (("trans", path), ("states", path), ("states", made.folder / f"{STEM}__02100-02300.trans.bz2")):
        made.write()
        for one in made.folder.glob(f"{STEM}*.{kind}*"):
            if one != target:
                one.unlink()
        what = "transitions" if kind == "trans" else "states"
        pattern = rf"^[^\n]*{target.name}: its {what} are not beside it; expected {STEM}[^\n]*; put the files [^\n]*$"
        with pytest.raises(LineListError, match=pattern):
            check_data_set(target)
    with pytest.raises(LineListError, match=r"nowhere\.def: no such file; mend the name, or fetch the file"):
        check_data_set(made.folder / "nowhere.def")


def test_a_file_that_lies_there_twice_is_read_once(made: MadeSet) -> None:
    path = made.write()
    plain = made.folder / f"{STEM}__01900-02100.trans"
    plain.with_name(plain.name + ".gz").write_bytes(gzip.compress(plain.read_bytes()))
    assert check_data_set(path).ledger.read == 202


def test_a_recipe_may_say_what_the_set_is_of(made: MadeSet, write_recipe) -> None:
    path = made.write()
    samples = SAMPLE.parent
    recipe = write_recipe(
        "co",
        (f'"{samples}/carbon-monoxide.par"', f'"{STEM}*"'),
        ('"hitran"', '"exomol"\nisotopologue = "13C-16O"'),
    )
    report = check_data_set(path, load_recipe(recipe))
    assert report.isotopologues == ("(13C)(16O)",)
    assert "the definition is of (12C)(16O), and the recipe takes it for (13C)(16O)" in report.problems


@pytest.mark.parametrize("name", [f"{STEM}.def", f"{STEM}.states.bz2", f"{STEM}__02100-02300.trans.bz2"])
def test_the_command_says_it_in_words_and_as_json(opacity, made: MadeSet, name: str) -> None:
    made.rows.append("9999 1 1.0")
    made.write()
    code, out, err = opacity("check", made.folder / name)
    assert (code, err) == (0, "")
    text = " ".join(out.split())
    assert "of (12C)(16O)" in text
    assert "states 155 states up to" in text
    assert ("left out 1: upper state is not in the states file" in text) == ("states" not in name)
    assert ("band 1-0: " in text) == ("states" not in name)
    code, out, err = opacity("check", made.folder / name, "--json")
    assert (code, err) == (0, "")
    found = json.loads(out)
    assert found["data_set"]["name"] == STEM
    assert found["states"]["count"] == 155
    told = "problem 202 transitions by the definition, 203 found note " in text
    assert told == ("202 transitions by the definition, 203 found" in found["problems"]) == name.endswith(".def")
    code, out, err = opacity("check", made.folder / f"none-{name}")
    assert (code, out) == (1, "")
    assert err.count("\n") == 1
