"""Transitions joined with states: the sample in ExoMol form gives the same lines, and bad rows are named."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from opacity.errors import LineListError
from opacity.kernels.line_strength import strength_ratio
from opacity.line_list.exomol.broadening import read_broadening
from opacity.line_list.exomol.dataset import sort_files
from opacity.line_list.exomol.states import read_states
from opacity.line_list.exomol.transitions import StateJoin, default_names, state_join, transition_batches
from opacity.line_list.model import LineList
from opacity.line_list.packed import decode_energy, decode_intensity, log_population
from opacity.line_list.packed import join as sorted_by_wavenumber
from opacity.line_list.read import read_lines
from opacity.molecule.isotopologue import isotopologue
from opacity.molecule.partition_function import tips

SAMPLE = Path(__file__).parents[3] / "data-samples" / "carbon-monoxide.par"
Q296 = tips("TIPS-2021", isotopologue(5, 1))(296.0)


def write_states(folder: Path, lines: LineList) -> Path:
    """Two states a line: ids 2i + 1 (lower) and 2i + 2 (upper); g = 2J + 1 of a molecule without nuclear spin."""
    rows = []
    for i in range(len(lines)):
        low = lines.lower_energy[i]
        for k, (energy, weight) in enumerate(
            ((low, lines.lower_weight[i]), (low + lines.wavenumber[i], lines.upper_weight[i]))
        ):
            rows.append(f"{2 * i + 1 + k:12d} {energy:14.6f} {weight:6.0f} {(weight - 1) / 2:7.1f}")
    rows += ["900001 150000.0 1 0.0", "900002 151000.0 3 1.0"]  # an energy that no line can have
    path = folder / "co.states"
    path.write_text("\n".join(rows) + "\n", encoding="ascii")
    return path


def write_transitions(path: Path, lines: LineList, columns: int = 3, order: np.ndarray | None = None) -> Path:
    """A from S, to ten digits, so that rounding of A is no part of a comparison."""
    light = 2.99792458e10
    pure = lines.strength / lines.isotopologues[0].abundance
    population = np.exp(log_population(lines.wavenumber, lines.lower_energy, 296.0))
    a = pure * Q296 * 8.0 * np.pi * light * lines.wavenumber**2 / (lines.upper_weight * population)
    rows = [
        f"{2 * i + 2:12d} {2 * i + 1:12d} {a[i]:.10E}" + (f" {lines.wavenumber[i]:15.6f}" if columns == 4 else "")
        for i in (range(len(lines)) if order is None else order)
    ]
    path.write_text("\n".join(rows) + "\n", encoding="ascii")
    return path


@pytest.fixture
def lines() -> LineList:
    return read_lines(SAMPLE)


@pytest.fixture
def join(tmp_path: Path, lines: LineList) -> StateJoin:
    broad = tmp_path / "co__H2.broad"
    broad.write_text("a0 0.0700 0.65 0.0\na0 0.0650 0.60 10.0\nm0 0.01 0.1 3\n", encoding="ascii")
    tables = {name: read_broadening(path) for name, path in default_names([broad]).items()}
    return state_join(read_states(write_states(tmp_path, lines)), tables, isotopologue(5, 1))


def all_of(path: Path, join: StateJoin, leave_out: bool = False, within: tuple[float, float] | None = None):
    (batch,) = transition_batches(path, join, leave_out, within, None)
    assert batch.ledger.adds_up()
    return replace(batch, packed=sorted_by_wavenumber([batch.packed]))


@pytest.mark.parametrize("columns", [3, 4])
def test_the_sample_in_exomol_form_gives_the_same_lines(
    tmp_path: Path, lines: LineList, join: StateJoin, columns: int
) -> None:
    order = np.random.default_rng(3).permutation(len(lines))
    batch = all_of(write_transitions(tmp_path / "co.trans", lines, columns, order), join)
    packed = batch.packed
    np.testing.assert_allclose(packed.wavenumber, lines.wavenumber, atol=1.1e-6)
    energy = decode_energy(packed.lower_energy)
    np.testing.assert_allclose(energy, lines.lower_energy, atol=1.3e-5)
    pure = lines.strength / lines.isotopologues[0].abundance
    for temperature in (70.0, 296.0, 2000.0):
        population = log_population(packed.wavenumber, energy, temperature)
        found = np.exp(decode_intensity(packed.intensity) + population)
        expected = pure * Q296 * strength_ratio(lines.wavenumber, lines.lower_energy, temperature, np.array(1.0))
        np.testing.assert_allclose(found, expected, rtol=1e-6)


def test_widths_by_lower_j_from_the_broad_file(tmp_path: Path, lines: LineList, join: StateJoin) -> None:
    packed = all_of(write_transitions(tmp_path / "co.trans", lines), join).packed
    gamma = packed.classes.broadeners["h2"].gamma[packed.width_class]
    j = (lines.lower_weight - 1.0) / 2.0
    assert np.all(gamma[j >= 10] == 0.065)
    assert np.all(gamma[j == 0] == 0.07)
    assert np.all(packed.classes.broadeners["h2"].exponent[packed.width_class][j >= 10] == 0.60)


@pytest.mark.parametrize(
    ("row", "what"),
    [
        ("2 1", "row cannot be read"),
        ("2 1 x", "row cannot be read"),
        ("2 1 1.0 2.0 3.0", "row cannot be read"),
        ("2.5 1 1.0", "row cannot be read"),
        ("-2 1 1.0", "row cannot be read"),
        ("2 1 nan", "row cannot be read"),
        ("999999 1 1.0", "upper state is not in the states file"),
        ("2 999999 1.0", "lower state is not in the states file"),
        ("1 2 1.0", "upper state lies below the lower one"),
        ("2 2 1.0", "both states have the same energy: wavenumber 0"),
        ("2 1 -1.0", "Einstein A is impossible"),
        ("2 1 9E999", "Einstein A is impossible"),
        ("2 1 1.0E50", "strength out of range"),
        ("2 1 1.0E-200", "strength out of range"),
        ("900002 900001 1.0", "lower-state energy out of range"),
    ],
)
def test_bad_rows_are_named_or_counted(tmp_path: Path, lines: LineList, join: StateJoin, row: str, what: str) -> None:
    path = write_transitions(tmp_path / "co.trans", lines)
    path.write_text(path.read_text(encoding="ascii") + row + "\n" + "2 1 1.0\n", encoding="ascii")
    number = len(lines) + 1
    with pytest.raises(LineListError, match=rf"^[^\n]*co\.trans:{number}: {what}; expected [^\n]*$"):
        all_of(path, join)
    batch = all_of(path, join, leave_out=True)
    assert batch.ledger.left_out[what] == 1
    assert len(batch.packed) == len(lines) + 1


def test_lines_served_by_the_file_and_those_of_strength_0_are_counted(
    tmp_path: Path, lines: LineList, join: StateJoin
) -> None:
    path = write_transitions(tmp_path / "co.trans", lines)
    path.write_text(path.read_text(encoding="ascii") + "2 1 0.0\n", encoding="ascii")
    notes = all_of(path, join).ledger.notes
    j = (np.append(lines.lower_weight, lines.lower_weight[0]) - 1.0) / 2.0
    assert notes["H2 width by J'' from co__H2.broad"] == len(lines) + 1
    beyond = notes["H2 width by J'' from co__H2.broad, beyond its last J'': last row taken"]
    between = notes["H2 width by J'' from co__H2.broad, between its rows: a neighbour taken"]
    assert beyond == np.count_nonzero(j > 10)
    assert 0 < between < np.count_nonzero((j > 0) & (j < 10))  # the row of m0 serves two lines exactly
    assert notes["strength 0: contributes nothing"] == 1


def test_an_upper_state_of_weight_0_gives_a_line_of_strength_0(
    tmp_path: Path, lines: LineList, join: StateJoin
) -> None:
    """Levels that nuclear spin forbids may stand in a list: a line from them has no strength, and is no fault."""
    states = write_states(tmp_path, lines)
    states.write_text(states.read_text(encoding="ascii") + "900003 99000.0 0 3.0\n", encoding="ascii")
    path = tmp_path / "co.trans"
    path.write_text("900003 1 1.0\n1 900003 1.0\n", encoding="ascii")
    more = read_states(states)
    wider = replace(join, states=more, table=state_join(more, {}, isotopologue(5, 1)).table)
    batch = all_of(path, wider, leave_out=True)
    assert batch.ledger.notes["strength 0: contributes nothing"] == 1
    assert decode_intensity(batch.packed.intensity).tolist() == [-np.inf]
    assert batch.ledger.left_out == {"upper state lies below the lower one": 1}


def test_the_broadener_in_the_name_of_a_file() -> None:
    names = ["CO__H2.broad", "CO__He.broad.gz", "CO__air.broad.bz2"]
    assert list(default_names([Path(name) for name in names])) == ["H2", "He", "air"]
    for name in ("CO.broad", "CO__.broad"):
        with pytest.raises(LineListError, match=rf"^{name}: no broadener in the name of the file; .* \[broadening\]"):
            default_names([Path(name)])


def test_a_broad_file_that_the_recipe_names_needs_no_broadener_in_its_name() -> None:
    files = [Path("co.states"), Path("co.trans"), Path("co.broad")]
    assert sort_files(files, "recipe", "CO", "1", {"H2": Path("co.broad")}).broad == {"H2": Path("co.broad")}


def test_range_notes_and_empty_files(tmp_path: Path, lines: LineList, join: StateJoin) -> None:
    path = write_transitions(tmp_path / "co.trans", lines, columns=4)
    batch = all_of(path, join, within=(2100.0, 2200.0))
    assert len(batch.packed) == np.count_nonzero((lines.wavenumber >= 2100.0) & (lines.wavenumber <= 2200.0))
    assert batch.ledger.left_out["outside the range asked for"] == len(lines) - len(batch.packed)
    shifted = path.read_text(encoding="ascii").replace(f"{lines.wavenumber[0]:.6f}", "1.0", 1)
    path.write_text(shifted, encoding="ascii")
    assert sum(n for note, n in all_of(path, join).ledger.notes.items() if note.startswith("wavenumber given")) == 1
    path.write_text("\n\n", encoding="ascii")
    with pytest.raises(LineListError, match="holds no transition"):
        all_of(path, join)
