from __future__ import annotations

import json
import tomllib

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from opacity.recipe.positions import KeyPath, key_lines, line_of

TRICKY = '''\
top = "a # no comment, = no key, [no] {table}"  # comment = 1

"(12C)(16O)" = 0.9
'lit.eral' = 'C:\\'
"tab\\tkey\\u00e9" = 1
  indented   =   2
dotted . "in ner" . last = 3
multi = """
not = a key
[not.a.table]
quotes "" inside, \\""" escaped
ends in two quotes"""""
after_multi = 1
raw = \'\'\'
also = not a key \\\'\'\'\'
after_raw = 1
empty = ["", \'\', [], {}]
list = [ # comment ] here
  1, "]", # , 2
  [3,
   4], { in = 5, x.y = 6 },
]
inline = { a = [
  1,
  2 ], b = "}", c.d = 1979-05-27T07:32:00Z }
date = 1979-05-27 07:32:00 # a blank inside a value

[ table . sub ]
key = 1
[[array]]
name = 1
[array.child]
x = 1
[[array.many]]
y = 1
[[array.many]]
y = 2
[[ array ]]
[[array."many"]]
y = 3
[table]
late = 1'''


@pytest.mark.parametrize(
    "key, line",
    [
        (("top",), 1),
        (("(12C)(16O)",), 3),
        (("lit.eral",), 4),
        (("tab\tkeyé",), 5),
        (("indented",), 6),
        (("dotted", "in ner", "last"), 7),
        (("multi",), 8),
        (("after_multi",), 13),
        (("raw",), 14),
        (("after_raw",), 16),
        (("empty",), 17),
        (("list",), 18),
        (("list", 0), 19),
        (("list", 1), 19),
        (("list", 2), 20),
        (("list", 2, 0), 20),
        (("list", 2, 1), 21),
        (("list", 3, "in"), 21),
        (("list", 3, "x", "y"), 21),
        (("inline", "a"), 23),
        (("inline", "a", 0), 24),
        (("inline", "a", 1), 25),
        (("inline", "b"), 25),
        (("inline", "c", "d"), 25),
        (("date",), 26),
        (("table", "sub"), 28),
        (("table", "sub", "key"), 29),
        (("array",), 30),
        (("array", 0), 30),
        (("array", 0, "name"), 31),
        (("array", 0, "child"), 32),
        (("array", 0, "child", "x"), 33),
        (("array", 0, "many", 0, "y"), 35),
        (("array", 0, "many", 1, "y"), 37),
        (("array", 1), 38),
        (("array", 1, "many"), 39),
        (("array", 1, "many", 0), 39),
        (("array", 1, "many", 0, "y"), 40),
        (("table",), 41),
        (("table", "late"), 42),
    ],
)
def test_lines_in_tricky_text(key: KeyPath, line: int) -> None:
    assert line_of(key_lines(TRICKY), key) == line


def test_all_keys_of_tricky_text_are_known_and_no_others() -> None:
    keys = {key for key in key_lines(TRICKY) if not isinstance(key[-1], int)}
    assert keys == set(_keys(tomllib.loads(TRICKY)))


def _keys(value: object, path: KeyPath = ()) -> list[KeyPath]:
    """Every key path of a parsed document, indices of arrays left to their children."""
    if isinstance(value, dict):
        return [key for name, inner in value.items() for key in [(*path, name), *_keys(inner, (*path, name))]]
    if isinstance(value, list):
        return [key for index, inner in enumerate(value) for key in _keys(inner, (*path, index))]
    return []


def test_unknown_keys_fall_back_to_the_nearest_parent() -> None:
    lines = key_lines("a = 1\n[b]\n[b.c]\nd = [1, 2]\n")
    assert line_of(lines, ("b", "c", "nothing", 3)) == 3
    assert line_of(lines, ("b", "c", "d", 1)) == 4
    assert line_of(lines, ("nothing",)) == 1


def test_text_that_is_no_toml_ends_the_scan() -> None:
    for text in ("[", "a = ", "a = [", 'a = "', "= 1", "a = {b", "[[x", "a.", "]"):
        key_lines(text)


NAMES = st.one_of(st.sampled_from(["a", "b-1", "c_d", "7"]), st.text("a #=.[]{}\"'\\\n\té", max_size=6))
STRINGS = st.text("ab#=[]{},.\"'\\\n ", max_size=8)
VALUES = st.recursive(
    st.one_of(st.integers(-9, 9), st.booleans(), st.floats(allow_nan=False, width=16), STRINGS),
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(NAMES, inner, max_size=3)),
    max_leaves=6,
)


class _Writer:
    """TOML text of nested values, written in a style drawn by hypothesis, with the line of each key."""

    def __init__(self, draw: st.DrawFn) -> None:
        self._draw = draw
        self.text = ""
        self.lines: dict[KeyPath, int] = {}

    def mark(self, path: KeyPath) -> None:
        self.lines[path] = self.text.count("\n") + 1

    def blank(self) -> None:
        self.text += self._draw(st.sampled_from(["", " ", "\n", " # x = [1]\n", "\n\n\t"]))

    def key(self, name: str) -> None:
        bare = name != "" and name.isascii() and name.replace("_", "").replace("-", "").isalnum()
        literal = name.isprintable() and "'" not in name
        quoted = f"'{name}'" if literal and self._draw(st.booleans()) else json.dumps(name)
        self.text += name if bare and self._draw(st.booleans()) else quoted
        self.text += self._draw(st.sampled_from(["", " "]))

    def string(self, value: str) -> None:
        escaped = json.dumps(value)[1:-1]
        styles = [f'"{escaped}"', f'"""\n{escaped}"""']
        if "'" not in value:
            styles += [f"'''\n{value}'''", f"'''\n{value}'''"] if "\n" in value else [f"'{value}'"]
        if "\\" not in value and '"' not in value:
            styles.append(f'"""\n{value}"""')
        self.text += self._draw(st.sampled_from(styles))

    def value(self, value: object, path: KeyPath) -> None:
        if isinstance(value, dict):
            self.inline_table(value, path)
        elif isinstance(value, list):
            self.array(value, path)
        elif isinstance(value, str):
            self.string(value)
        else:
            self.text += json.dumps(value).replace("Infinity", "inf")

    def array(self, values: list[object], path: KeyPath) -> None:
        self.text += "["
        for index, value in enumerate(values):
            self.blank()
            self.mark((*path, index))
            self.value(value, (*path, index))
            self.blank()
            self.text += "," if index + 1 < len(values) or self._draw(st.booleans()) else ""
        self.blank()
        self.text += "]"

    def inline_table(self, values: dict[str, object], path: KeyPath) -> None:
        self.text += "{"
        for index, (name, value) in enumerate(values.items()):
            self.text += ", " if index else " "
            self.assign(name, value, path)
        self.text += "}"

    def assign(self, name: str, value: object, path: KeyPath) -> None:
        self.mark((*path, name))
        self.key(name)
        self.text += "= "
        self.value(value, (*path, name))

    def document(self, document: dict[str, object]) -> None:
        for name, value in document.items():
            if not isinstance(value, dict):
                self.assign(name, value, ())
                self.text += "\n"
                self.blank()
                self.text += "\n"
        for name, value in document.items():
            if isinstance(value, dict):
                self.section(name, value)

    def section(self, name: str, values: dict[str, object]) -> None:
        is_array = self._draw(st.booleans())
        path: KeyPath = (name, 0) if is_array else (name,)
        self.mark((name,))
        self.text += "[[" if is_array else "["
        self.key(name)
        self.text += "]]\n" if is_array else "]\n"
        for key, value in values.items():
            self.assign(key, value, path)
            self.text += "\n"


@st.composite
def documents(draw: st.DrawFn) -> tuple[str, dict[KeyPath, int]]:
    writer = _Writer(draw)
    writer.document(draw(st.dictionaries(NAMES, VALUES, max_size=4)))
    return writer.text, writer.lines


@given(documents())
@settings(derandomize=True, max_examples=300, deadline=None)
def test_lines_in_generated_text(document: tuple[str, dict[KeyPath, int]]) -> None:
    text, expected = document
    tomllib.loads(text)
    lines = key_lines(text)
    assert {key: line_of(lines, key) for key in expected} == expected
