"""Whatever bytes these files hold, what they say is read, or an error of one line names the file."""

from __future__ import annotations

import json
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from opacity.errors import OpacityError
from opacity.line_list.exomol.broadening import CODES, read_broadening, widths
from opacity.line_list.exomol.definition import read_definition
from opacity.line_list.exomol.states import partition_sum, read_states

from ..test_any_bytes import EDIT, EDITS, FUZZ, Tally, edited


def number(text):
    """As float, and Fortran's exponents of three digits without a letter."""
    return float(re.sub(r"(?<=[\d.])([+-]\d{3})$", r"E\1", text))


def judge(read, path):
    """What was read, None for an error of one line that names the file."""
    try:
        return read(path)
    except OpacityError as error:
        message = str(error)
        assert message.startswith(str(path))
        assert message.isprintable()
        return None


def run(path, data, read, check, edits=EDITS):
    tally = Tally()

    @FUZZ
    @given(edits=edits)
    def search(edits):
        path.write_bytes(edited(data, edits))
        found = judge(read, path)
        tally.add(found is not None)
        if found is not None:
            check(found, path.read_bytes())

    search()
    tally.check()


def test_states(write, states, definition):
    described = read_definition(write("a.def", definition()))

    def check(found, data):
        rows = [line.decode().split() for line in data.split(b"\n") if line.strip()]
        assert len(found) == len(rows)
        assert found.energy == pytest.approx([number(row[1]) for row in rows], rel=1e-15)
        assert found.total_weight == pytest.approx([number(row[2]) for row in rows], rel=1e-15)
        assert found.j.tolist() == [number(row[3]) for row in rows]
        assert found.uncertainty == pytest.approx([number(row[4]) for row in rows], rel=1e-6, abs=1e-37)
        assert found.rows_of([int(row[0]) for row in rows]).tolist() == list(range(len(rows)))
        assert np.isfinite(partition_sum(found, [1.0, 300.0])).all()

    path = write("a.states", states)
    run(path, path.read_bytes(), lambda one: read_states(one, described, chunk=100), check)


def test_broadening(write, broad):
    def check(found, data):
        rows = [line.decode().split() for line in data.split(b"\n") if line.strip()]
        assert len(rows) == len(found) + sum(found.skipped.values()) + found.notes["half-width 0: taken as not given"]
        lines = data.split(b"\n")
        for i in range(len(found)):
            code, gamma, exponent, *quanta = lines[found.line[i] - 1].decode().split()
            assert code.lower() == CODES[found.code[i]]
            assert (found.gamma[i], found.exponent[i]) == (float(gamma), float(exponent))
            low = float(quanta[0])
            if code.lower() == "a1":
                assert widths(found, [low], [float(quanta[1])]) == ([float(gamma)], [float(exponent)])
        gamma, exponent = widths(found, np.arange(40) / 2.0, np.arange(40) / 2.0)
        assert np.array_equal(np.isnan(gamma), np.isnan(exponent))
        assert not np.any(gamma <= 0.0)

    path = write("a.broad", broad)
    run(path, path.read_bytes(), read_broadening, check)


def check_definition(found, data):
    assert found.mass >= 0.9
    assert found.gamma is None or 0.0 < found.gamma <= 100.0
    for text in (found.formula, found.slug, found.dataset, found.version, *found.state_columns):
        assert text.strip() == text
        assert text.isprintable()
        assert text
    for count in (found.states, found.transitions, found.transition_files):
        assert count is None or count >= 0
    assert len({one.name for one in found.broadeners}) == len(found.broadeners)
    assert found.has_uncertainty == ("uncertainty" in found.state_columns[:1])


def test_the_text_of_a_definition(write, definition):
    def check(found, data):
        check_definition(found, data)
        lines = [line.partition(b"#") for line in data.split(b"\n")]
        mass = [
            value for value, _, comment in lines if comment.strip().lower().startswith((b"isotopologue mass", b"mass"))
        ]
        assert found.mass == float(mass[0].split()[0])

    path = write("a.def", definition())
    run(path, path.read_bytes(), read_definition, check)


def test_the_text_of_a_document(write, document):
    path = write("a.def.json", document)
    run(path, path.read_bytes(), read_definition, check_definition, st.lists(EDIT, min_size=1, max_size=2))


VALUES = st.one_of(
    st.none(), st.booleans(), st.integers(-5, 200), st.integers(), st.floats(), st.text(max_size=5),
    st.sampled_from(["1e999", "x.broad", "1_0", " ", "uncertainty", "\ud800"]),
    st.lists(st.sampled_from(["unc", {"name": "ID"}, {"name": 3}, None]), max_size=5),
    st.dictionaries(st.sampled_from(["name", "mass", "H2", "version"]), st.sampled_from(["x.broad", 7, None])),
)  # fmt: skip
KEYS = {
    "isotopologue": ("iso_formula", "iso_slug", "mass_in_Da", "mass", "name"),
    "dataset": ("name", "version", "max_temperature", "states", "transitions", "num_pressure_broadeners"),
    "states": ("number_of_states", "uncertainties_available", "states_file_fields"),
    "broad": ("default_gamma_L", "default_n_L", "H2", "air"),
    "": ("isotopologue", "dataset", "broad", "mass", "default_n"),
}
PLACES = st.sampled_from([(section, key) for section, keys in KEYS.items() for key in keys])


def test_the_content_of_a_document(write, document):
    path, tally = write("a.def.json", document), Tally()
    text = json.dumps(document)

    @FUZZ
    @given(place=PLACES, value=VALUES)
    def search(place, value):
        tree = json.loads(text)
        section, key = place
        target = tree["dataset"]["states"] if section == "states" else tree[section] if section else tree
        target[key] = value
        path.write_text(json.dumps(tree))
        found = judge(read_definition, path)
        tally.add(found is not None)
        if found is not None:
            check_definition(found, b"")

    search()
    tally.check()


READERS = [
    ("a.def", read_definition),
    ("a.def.json", read_definition),
    ("a.states", read_states),
    ("a.broad", read_broadening),
]


@pytest.mark.parametrize(("name", "read"), READERS)
@pytest.mark.parametrize("ending", ["", ".bz2", ".gz"])
def test_bytes_of_nothing(tmp_path, name, read, ending):
    path = tmp_path / (name + ending)

    @FUZZ
    @given(data=st.binary(max_size=400))
    def search(data):
        path.write_bytes(data)
        assert judge(read, path) is None

    search()
