"""Whatever is done to a recipe's text, loading it gives a recipe or lines that name the file."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from opacity import grids
from opacity.errors import RecipeError
from opacity.recipe.formats import NAMELESS
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Recipe

PIECES = st.one_of(
    st.text("0123456789.eE+-_\"'#=[]{},\n\\ abxn", min_size=1, max_size=3),
    st.text(min_size=1, max_size=2),
    st.sampled_from(
        ["nan", "inf", "-inf", "true", "1e999", "9" * 400, "0x" + "f" * 600, "\0", "\r", "\u2028", "\x85", "{}", "[]",
         '""', '"""', "'''", "[[line_list]]\n", "[grid]\n", "1979-05-27", '"\\u0000"', "../", "*", "[!", "**/"]
    ),
)  # fmt: skip
EDITS = st.lists(st.tuples(st.floats(0, 1), st.integers(0, 6), st.one_of(st.just(""), PIECES)), min_size=1, max_size=4)


def mutated(text: str, edits: list[tuple[float, int, str]]) -> str:
    for place, length, piece in edits:
        at = int(place * len(text))
        text = text[:at] + piece + text[at + length :]
    return text


def check(folder: Path, data: bytes) -> None:
    path = folder / "co.toml"
    path.write_bytes(data)
    outcome = attempt(path)
    if isinstance(outcome, Recipe):
        assert outcome.grid.wavenumber.size > 0
        assert len(outcome.grid.node_list()) > 0
        assert all(source.paths for source in outcome.line_lists)
        assert all(source.isotopologue for source in outcome.line_lists if source.format in NAMELESS)
        assert outcome.partition_function.source != "file" or outcome.partition_function.path.is_file()
        assert all(path.is_file() for path in outcome.broadening.files.values())
        return
    assert outcome
    for line in outcome:
        assert line.startswith(f"{path}:")
        assert line.isprintable()
        assert len(line.splitlines()) == 1


def attempt(path: Path) -> Recipe | tuple[str, ...]:
    try:
        return load_recipe(path)
    except RecipeError as error:
        return error.problems


@pytest.fixture(scope="module", autouse=True)
def short_axes() -> None:
    """A changed digit may ask for a billion points; the limit is lowered so that the test stays small."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(grids, "MAX_POINTS", 100_000)
        yield


@given(edits=EDITS)
@settings(derandomize=True, max_examples=400, deadline=None)
def test_mutated_recipe(session_folder: Path, full: str, edits: list[tuple[float, int, str]]) -> None:
    check(session_folder, mutated(full, edits).encode("utf-8", "surrogatepass"))


EXOMOL = (
    ('format = "hapi"', 'format = "exomol"'),
    ('"lines/hot.data",', '"data/x*",'),
    ('bad_records = "leave-out"', 'urls = ["https://a.example/x.pf"]'),
    ('file = "CO.pf"', ""),
    ("[broadening.default.H2]", '[broadening.files]\nH2 = "data/x.broad"\n[broadening.default.H2]'),
)


@pytest.fixture(scope="module")
def exomol(session_folder: Path, full: str) -> str:
    """The full recipe with a data set in ExoMol format that holds the partition function too."""
    (session_folder / "data").mkdir()
    for name in ("x.states", "x.trans", "x.pf", "x.broad", "x.trans.bz2.part"):
        (session_folder / "data" / name).touch()
    for old, new in EXOMOL:
        assert full.count(old) == 1
        full = full.replace(old, new)
    return full


def test_the_recipe_that_is_mutated_loads(session_folder: Path, exomol: str) -> None:
    (session_folder / "co.toml").write_text(exomol)
    assert load_recipe(session_folder / "co.toml").partition_function.path == session_folder / "data" / "x.pf"


@given(edits=EDITS)
@settings(derandomize=True, max_examples=400, deadline=None)
def test_mutated_recipe_of_a_data_set(session_folder: Path, exomol: str, edits: list[tuple[float, int, str]]) -> None:
    check(session_folder, mutated(exomol, edits).encode("utf-8", "surrogatepass"))


VALUES = st.sampled_from(
    ["nan", "-inf", "true", "0", "-1", "1e308", "5e-324", "9" * 400, "0x" + "f" * 600, "[]", "{}", "[[]]", "[{}]",
     '""', '"\\u0000"', '"\\n"', '"x"', "07:32:00", "1979-05-27T07:32:00Z", "[nan, 1]", "{ a = 1 }", "[1, 2, 3]"]
)  # fmt: skip


@given(choice=st.floats(0, 0.999), value=VALUES, second=st.floats(0, 0.999))
@settings(derandomize=True, max_examples=400, deadline=None)
def test_value_of_any_kind_for_any_key(
    session_folder: Path, full: str, choice: float, second: float, value: str
) -> None:
    lines = full.splitlines()
    keys = [index for index, line in enumerate(lines) if " = " in line]
    for place in (choice, second):
        index = keys[int(place * len(keys))]
        lines[index] = lines[index].split(" = ")[0] + " = " + value
    check(session_folder, "\n".join(lines).encode())


@given(st.binary(max_size=40))
@settings(derandomize=True, max_examples=200, deadline=None)
def test_any_bytes(session_folder: Path, data: bytes) -> None:
    check(session_folder, data)
