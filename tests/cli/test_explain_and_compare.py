"""The commands `explain` and `compare`: what is printed, exit codes, failures in one line."""

from __future__ import annotations

import json
import os
from pathlib import Path

import pytest

from opacity.tables.read import open_table


@pytest.fixture
def numbers(table: Path) -> Path:
    """The table's second spectrum as columns, raised by 2 % beyond 2147.1 cm-1."""
    with open_table(table) as opened:
        nu, sigma = opened.wavenumber, opened.spectrum(0, 1)
    path = table.with_name("other.txt")
    rows = (f"{x:.6f} {y * (1.02 if x > 2147.1 else 1.0):.8e}\n" for x, y in zip(nu, sigma, strict=True))
    path.write_text("".join(rows))
    return path


def test_explain_says_value_lines_and_where_they_stand(opacity, table: Path, samples: Path):
    code, out, err = opacity("explain", table, "--at", "2147.0812,296,1", "--lines", "2")
    assert (code, err) == (0, "")
    with open_table(table) as opened:
        value = opened.spectrum(0, 1)[45]
    assert "2147.08 cm-1, the grid point nearest 2147.0812" in out
    assert "296 K, 1 bar, a node" in out
    assert f"{value:.6e} cm2/molecule" in out
    assert "within the table's tolerance 0.001" in out
    # The record of R 0, by another way of looking.
    records = (samples / "carbon-monoxide.par").read_text().splitlines()
    (line,) = [number for number, record in enumerate(records, 1) if record[3:15].strip() == "2147.081134"]
    assert f"(12C)(16O) {samples / 'carbon-monoxide.par'}:{line}" in out
    assert out.count("from the record") == 2
    code, out, _ = opacity("explain", table, "--at", "2147.1,350,0.1", "--json")
    found = json.loads(out)
    assert code == 0
    assert not found["at_node"]
    assert found["within"] is None
    assert len(found["parts"]) == min(10, found["lines"])


def test_explain_between_nodes_says_both(opacity, table: Path):
    _, out, _ = opacity("explain", table, "--at", "2147.1,350,0.1")
    assert "350 K, 0.1 bar, between nodes: the table's value is interpolated" in out
    assert "at this temperature and pressure" in out
    assert "what interpolating between nodes costs here" in out.replace("\n            ", "")


@pytest.mark.parametrize(
    "arguments, code, words",
    [
        (["--at", "2147.1,296"], 2, "expected NU,T,P in cm-1, K and bar"),
        (["--at", "2147.1,296,nan"], 2, "expected NU,T,P"),
        (["--at", "2147.1,296,0"], 2, "expected NU,T,P"),
        ([], 2, "--at"),
        (["--at", "2147.1,296,1", "--lines", "0"], 2, "expected a whole number, 1 to 1000"),
        (["--at", "2100,296,1"], 1, "wavenumber outside the table; expected 2146.9 to 2147.3 cm-1"),
        (["--at", "2147.1,100,1"], 1, "temperature outside the table"),
        (["--at", "2147.1,296,1", "--recipe", "missing.toml"], 2, "missing.toml"),
    ],
)
def test_explain_fails_in_one_line(opacity, table: Path, arguments: list[str], code: int, words: str):
    found, out, err = opacity("explain", table, *arguments)
    assert (found, out) == (code, "")
    assert err.count("\n") == 1
    assert words in err


def test_explain_needs_the_recipe_and_names_the_remedy(opacity, table: Path):
    os.remove(table.with_name("co.log.json"))
    code, _, err = opacity("explain", table, "--at", "2147.1,296,1")
    assert code == 1
    assert err.count("\n") == 1
    assert "--recipe RECIPE" in err
    code, _, _ = opacity("explain", table, "--at", "2147.1,296,1", "--recipe", "co.toml")
    assert code == 0


def test_explain_refuses_a_recipe_that_is_not_the_tables(opacity, table: Path):
    recipe = Path("co.toml")
    recipe.write_text(recipe.read_text().replace("25.0", "24.0"))
    code, _, err = opacity("explain", table, "--at", "2147.1,296,1")
    assert code == 1
    assert err.count("\n") == 1
    assert "was not built from" in err


def test_compare_in_words(opacity, table: Path, numbers: Path):
    code, out, err = opacity("compare", table, numbers, "--at", "296,1", "--bands", "2146.9,2147.1,2147.3")
    assert (code, err) == (0, "")
    assert "1 common node, without 3 of A" in out
    assert "the same 101 points" in out
    assert "largest difference -1.96e-02" in out
    assert "2147.3      0.98" in out
    assert "lines of A at 2147." in out
    assert "carbon-monoxide.par:" in out


def test_compare_within_decides_the_exit_code(opacity, table: Path, numbers: Path):
    code, out, _ = opacity("compare", table, numbers, "--at", "296,1", "--within", "0.03", "--lines", "0")
    assert code == 0
    assert "yes: every ratio of bands (10) is within 0.03 of 1" in out
    assert "lines of A" not in out
    code, out, _ = opacity("compare", table, numbers, "--at", "296,1", "--within", "0.01")
    assert code == 1
    assert "NO: 5 of 10 ratios of bands are further than 0.01 from 1; the worst is 0.02 from 1" in out
    code, out, _ = opacity("compare", table, numbers, "--at", "296,1", "--within", "0.01", "--json")
    found = json.loads(out)
    assert code == 1
    assert found["ratios_beyond"] == 5
    assert len(found["nodes"][0]["ratio"]) == 10


def test_compare_draws_the_worst_node(opacity, table: Path, numbers: Path):
    code, out, _ = opacity("compare", table, numbers, "--at", "296,1", "--plot", "pair.png")
    assert code == 0
    assert out.endswith("picture: pair.png\n")
    assert Path("pair.png").read_bytes().startswith(b"\x89PNG")
    first = Path("pair.png").read_bytes()
    code, out, err = opacity("compare", table, numbers, "--at", "296,1", "--plot", "pair.png", "--json")
    assert Path("pair.png").read_bytes() == first
    assert json.loads(out)["quantity"] == "cross-sections"
    assert err == "picture: pair.png\n"


@pytest.mark.parametrize(
    "arguments, code, words",
    [
        (["missing.txt", "--at", "296,1"], 1, "missing.txt: cannot be read"),
        (["missing.h5"], 1, "missing.h5: cannot be opened"),
        (["pipe", "--at", "296,1"], 1, "pipe: not a file"),
        (["empty.txt", "--at", "296,1"], 1, "empty.txt: fewer than two rows of numbers"),
        (["nan.txt", "--at", "296,1"], 1, "nan.txt:2: cross-section is impossible"),
        (["order.txt", "--at", "296,1"], 1, "order.txt:3: out of order"),
        (["far.txt", "--at", "296,1"], 1, "no overlap of the wavenumbers"),
        (["far.txt", "--at", "2000,1"], 1, "no node in common"),
        (["far.txt"], 2, "is no table and does not say it"),
        (["far.txt", "--at", "296"], 2, "expected T,P in K and bar"),
        (["far.txt", "--at", "296,1", "--bands", "0"], 2, "expected a width above 0 or rising edges"),
        (["far.txt", "--at", "296,1", "--bands", "5,4"], 2, "expected a width above 0 or rising edges"),
        (["far.txt", "--at", "296,1", "--within", "-1"], 2, "expected a number above 0"),
        (["far.txt", "--at", "296,1", "--columns", "1,1"], 2, "expected two different columns"),
        (["far.txt", "--at", "296,1", "--unit", "barn"], 2, "invalid choice"),
        (["far.txt", "--at", "296,1", "--mass", "0"], 2, "expected a mass above 0 g/mol"),
    ],
)
def test_compare_fails_in_one_line(opacity, table: Path, arguments: list[str], code: int, words: str):
    os.mkfifo("pipe")
    for name, text in (
        ("empty.txt", ""),
        ("nan.txt", "1 1\n2 nan\n"),
        ("order.txt", "1 1\n3 1\n2 1\n"),
        ("far.txt", "1 1\n2 1\n3 1\n"),
    ):
        Path(name).write_text(text)
    found, out, err = opacity("compare", table, *arguments)
    assert (found, out) == (code, "")
    assert err.count("\n") == 1
    assert words in err


def test_compare_takes_a_table_first(opacity, table: Path, numbers: Path):
    code, _, err = opacity("compare", numbers, table)
    assert code == 1
    assert "not a table; expected a table first" in err


def test_many_nodes_and_bands_are_the_worst_of_them(opacity, table: Path):
    code, out, _ = opacity("compare", table, table, "--bands", "0.01")
    assert code == 0
    assert "all nodes of both" in out
    assert "the 20 worst of 40 bands; --json tells all" in out
    assert "ratio of integrals 1.000000 to 1.000000" in out
