"""Definitions, old and new form; what is missing or impossible is named."""

from __future__ import annotations

import bz2
import json
import re
from dataclasses import replace

import pytest

from opacity.errors import LineListError
from opacity.line_list.exomol.definition import BroadenerFile, read_definition


def fails(path, message):
    with pytest.raises(LineListError, match="^" + re.escape(str(path)) + message) as caught:
        read_definition(path)
    assert str(caught.value).isprintable()


def test_all_of_a_definition(write, definition):
    found = read_definition(write("a.def", definition()))
    assert (found.formula, found.slug, found.dataset) == ("(1H)2(222Rn)", "1H2-222Rn", "INVENTED")
    assert (found.version, found.mass) == ("20240131", 224.033228)
    assert (found.gamma, found.exponent) == (0.0734, 0.52)
    assert (found.max_temperature, found.max_wavenumber) == (2000.0, 4000.0)
    assert (found.states, found.transitions, found.transition_files) == (5, 7, 2)
    assert (found.has_uncertainty, found.has_lifetime, found.has_lande_g) == (True, True, False)
    assert found.state_columns == ("uncertainty", "lifetime", "v1", "+/-")
    assert found.broadeners == (
        BroadenerFile("H2", "1H2-222Rn__H2.broad"),
        BroadenerFile("He", "1H2-222Rn__He.broad"),
    )
    assert found.notes == ()


def test_both_forms_say_the_same(write, definition, document):
    text, tree = read_definition(write("a.def", definition())), read_definition(write("a.def.json", document))
    assert replace(text, path="") == replace(tree, path="")


@pytest.mark.parametrize("name", ["a.def.bz2", "a.def.json.bz2"])
def test_compressed(write, definition, document, name):
    content = json.dumps(document) if "json" in name else "\r\n".join(definition())
    assert read_definition(write(name, bz2.compress(content.encode()))).states == 5


def test_json_is_known_by_its_content_too(write, document):
    assert read_definition(write("definition", document)).mass == 224.033228


def test_only_five_records_are_needed(write, definition):
    lines = [line for line in definition() if re.search(r"# (ID|Iso-slug|IsoF|Isotopologue|Version)", line)]
    found = read_definition(write("a.def", lines))
    assert len(lines) == 6
    assert (found.gamma, found.exponent, found.max_temperature, found.states) == (None, None, None, None)
    assert (found.has_uncertainty, found.state_columns, found.broadeners) == (False, (), ())


def test_a_default_width_of_0_is_not_given(write, definition):
    found = read_definition(write("a.def", definition(Default_value_of_Lorentzian="0.0")))
    assert (found.gamma, found.exponent) == (None, 0.52)


def test_broadeners_that_do_not_add_up_are_noted(write, definition):
    found = read_definition(write("a.def", definition(pressure_broadeners_available="6")))
    assert found.notes == ("6 broadeners counted, 2 listed",)


@pytest.mark.parametrize(
    ("changes", "missing", "expected"),
    [
        ({"IsoFormula": None}, "isotopologue formula", '"... # IsoFormula"'),
        ({"Iso-slug": None}, "isotopologue slug", '"... # Iso-slug"'),
        ({"dataset_name": None}, "dataset name", '"... # Isotopologue dataset name"'),
        ({"Version": None}, "version", '"... # Version number"'),
        ({"mass_(Da)": None}, "mass", '"... # Isotopologue mass (Da) and (kg)"'),
    ],
)
def test_a_needed_record_that_is_missing(write, definition, changes, missing, expected):
    fails(
        write("a.def", definition(**changes)),
        re.escape(f": no {missing} in this definition; expected a record {expected} or a key ") + r"\w+",
    )


@pytest.mark.parametrize(
    ("changes", "line", "message"),
    [
        ({"IsoFormula": " "}, 2, "isotopologue formula is impossible"),
        ({"Iso-slug": "x\x07"}, 3, "isotopologue slug is impossible"),
        ({"mass_(Da)": "heavy"}, 9, 'mass is impossible; expected a number from 0.9 to 100000, found "heavy"'),
        ({"mass_(Da)": " "}, 9, "mass is impossible"),
        ({"mass_(Da)": "0.0 0.0"}, 9, "mass is impossible"),
        ({"mass_(Da)": "-18.0"}, 9, "mass is impossible"),
        ({"mass_(Da)": "nan"}, 9, "mass is impossible"),
        ({"mass_(Da)": "1e999"}, 9, "mass is impossible"),
        ({"mass_(Da)": "1_8"}, 9, "mass is impossible"),
        ({"Maximum_temperature": "hot"}, 13, "maximum temperature is impossible"),
        ({"Uncertainty_availability": "2"}, 18, "uncertainty flag is impossible"),
        ({"Life_time": "yes"}, 16, "lifetime flag is impossible"),
        ({"Lande": "0.5"}, 17, "Lande flag is no count"),
        ({"states_in": "-1"}, 19, "number of states is impossible"),
        ({"states_in": "10.5"}, 19, "number of states is no count"),
        ({"Total_number": "1e30"}, 28, "number of transitions is impossible"),
        ({"Default_value_of_Lorentzian": "-0.07"}, 31, "default half-width is impossible"),
        ({"Default_value_of_temperature": "11"}, 32, "default exponent is impossible"),
        ({"Filename": " "}, 34, "name of a broadener's file is impossible"),
    ],
)
def test_a_value_that_cannot_be_right(write, definition, changes, line, message):
    fails(write("a.def", definition(**changes)), re.escape(f":{line}: {message}"))


def test_records_that_do_not_fit_together(write, definition):
    lines = definition()
    fails(write("a.def", [*lines, "20230101 # Version number"]), r":40: version given twice")
    fails(write("a.def", ["xyz", *lines]), r":1: not a record of a definition; expected value # comment")
    fails(write("a.def", lines[1:]), r':1: not a definition; expected "EXOMOL.def # ID"')
    fails(write("a.def", []), r": holds no record")
    without_file = [line for line in lines if "__H2.broad" not in line]
    fails(write("a.def", without_file), r":37: broadener H2 without the name of its file")
    fails(write("a.def", lines[:-1]), r": broadener He without the name of its file")
    without_label = [line for line in lines if not line.startswith("H2 ")]
    fails(write("a.def", without_label), r":33: a broadener's file without its broadener")
    fails(write("a.def", [*lines, *lines[-2:]]), r":41: broadener He listed twice")


def test_keys_may_move_between_sections(write, document):
    document["broad"] = {"H2": "x__H2.broad", "He": "x__He.broad"}
    document["default_gammaL"], document["default_n"] = 0.0734, 0.52
    document["dataset"] |= document["dataset"].pop("transitions")
    found = read_definition(write("a.def.json", document))
    assert (found.gamma, found.exponent, found.transitions) == (0.0734, 0.52, 7)
    assert found.broadeners == (BroadenerFile("H2", "x__H2.broad"), BroadenerFile("He", "x__He.broad"))


def test_broadeners_in_a_list(write, document):
    document["broad"] = {"broadeners": [{"label": "H2", "file": "x__H2.broad"}, {"label": "He", "file": "y.broad"}]}
    found = read_definition(write("a.def.json", document))
    assert found.broadeners == (BroadenerFile("H2", "x__H2.broad"), BroadenerFile("He", "y.broad"))


@pytest.mark.parametrize(
    ("fields", "columns", "uncertainty"),
    [
        (["i", "E", "g_tot", "J"], (), False),
        (["ID", "E", "gtot", "J", "tau", "unc2"], ("lifetime", "unc2"), False),
        (["ID", "E", "gtot", "F", "uncertainty", "g_lande", "v"], ("uncertainty", "Lande g", "v"), True),
    ],
)
def test_the_list_of_columns_decides(write, document, fields, columns, uncertainty):
    document["dataset"]["states"]["states_file_fields"] = [{"name": name} for name in fields]
    found = read_definition(write("a.def.json", document))
    assert (found.state_columns, found.has_uncertainty) == (columns, uncertainty)


def test_without_a_list_of_columns_the_flags_decide(write, document):
    del document["dataset"]["states"]["states_file_fields"]
    found = read_definition(write("a.def.json", document))
    assert (found.state_columns, found.has_uncertainty) == (("uncertainty", "lifetime"), True)


@pytest.mark.parametrize(
    ("section", "key", "value", "message"),
    [
        ("isotopologue", "mass_in_Da", None, ": no mass in this definition; expected a record "),
        ("isotopologue", "mass_in_Da", "heavy", ': mass is impossible; expected .*, found "heavy"'),
        ("isotopologue", "mass_in_Da", 1e999, r": not a definition in JSON \(Infinity is no number\)"),
        ("isotopologue", "iso_formula", None, ": no isotopologue formula in this definition"),
        ("isotopologue", "iso_formula", "é", ": isotopologue formula is impossible"),
        ("isotopologue", "iso_slug", [], ": no isotopologue slug in this definition"),
        ("dataset", "name", None, ": no dataset name in this definition"),
        ("dataset", "version", {}, ": no version in this definition"),
        ("broad", "default_gamma_L", -1, ": default half-width is impossible"),
        ("states", "number_of_states", True, None),
        ("states", "states_file_fields", [{"name": "E"}], ": columns of the .states file not understood"),
        ("states", "states_file_fields", ["ID", "E", "gtot", "J"], ": columns of the .states file not understood"),
        (
            "states",
            "states_file_fields",
            [{"name": name} for name in ("ID", "E", "gtot", "J", "tau", "unc")],
            ": uncertainty in the wrong column of the .states file; expected directly behind J",
        ),
    ],
)
def test_json_that_cannot_be_right(write, document, section, key, value, message):
    target = document["dataset"]["states"] if section == "states" else document[section]
    if value is None:
        del target[key]
    else:
        target[key] = value
    path = write("a.def.json", document)
    if message is None:
        assert read_definition(path).states == 1
    else:
        fails(path, message)


@pytest.mark.parametrize("content", [b"", b"{", b"[]", b"7", b'"x"', b"\xff\xfe{", b"[" * 100_000, b"{}"])
def test_json_that_is_none(write, content):
    fails(write("a.def.json", content), ": (not a definition in JSON|no isotopologue formula)")


def test_a_file_that_is_not_there(tmp_path):
    fails(tmp_path / "a.def", r": cannot be read \(No such file or directory\)")
