"""What commands say of the lists' own uncertainty, apart from the checks of the numbers."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from opacity.cli.text import uncertainty_lines

SAMPLES = Path(__file__).parents[2] / "data-samples"
HEADING = "the list's own uncertainty, by band and node; it is no check of the table's numbers:"


@pytest.fixture
def recipe(tmp_path: Path, write_recipe: Callable[..., Path]) -> Path:
    """A recipe whose lines all have intensities to 2-5 % and half-widths to 5-10 %."""
    rows = (SAMPLES / "carbon-monoxide.par").read_text().splitlines()
    (tmp_path / "carbon-monoxide.par").write_text("\n".join(f"{row[:127]}665000{row[133:]}" for row in rows) + "\n")
    return write_recipe(samples=str(tmp_path))


def after_heading(out: str) -> str:
    before, heading, after = out.partition(HEADING)
    assert heading
    # Apart from the table of results, whose verdicts it has no part in.
    assert "uncertainty" not in before
    assert before.endswith("\n\n")
    return " ".join(after.split())


def test_build_check_and_show_tell_it(opacity: Callable, recipe: Path, tmp_path: Path):
    tables = tmp_path / "tables"
    code, out, _ = opacity("build", recipe, "-o", tables)
    assert code == 0
    words = after_heading(out)
    assert words.startswith("strengths 5 % if all lines err together, ")
    assert "not stated" not in words
    (path,) = tables.glob("*.h5")
    for arguments in ((path,), (recipe, "-o", tables)):
        code, out, _ = opacity("check", *arguments, "--quiet")
        assert code == 0
        assert words.startswith(after_heading(out))
    code, out, _ = opacity("show", path)
    shown = " ".join(out.split())
    assert code == 0
    assert "list's own uncertainty of strengths 5 % if all lines err together, " in shown
    assert "stated by codes of the records (Rothman et al. 2005" in shown


def test_json_has_it_all_without_verdicts(opacity: Callable, recipe: Path, tmp_path: Path):
    tables = tmp_path / "tables"
    assert opacity("build", recipe, "-o", tables, "--quiet")[0] == 0
    code, out, _ = opacity("check", recipe, "-o", tables, "--json", "--quiet")
    found = json.loads(out)
    assert code == 0
    assert all("own" not in row["check"] for row in found["results"])
    stated = found["figures"]["uncertainty"]
    assert {value for row in stated["strength_correlated"] for value in row if value is not None} == {0.05}
    _, out, _ = opacity("show", *tables.glob("*.h5"), "--json")
    assert json.loads(out)["checks"]["uncertainty"] == stated


def test_tables_without_it_say_nothing(opacity: Callable, tmp_path: Path):
    old = Path(__file__).parents[1] / "tables" / "data"
    for path in sorted(old.glob("*.h5")):
        assert "list's own" not in opacity("show", path)[1]


def figures(**changes: list) -> dict:
    names = ("strength_correlated", "strength_uncorrelated", "width", "position")
    nothing = {name: [[None, None]] for name in names}
    return nothing | {f"{x}not_stated": [[1.0, None]] for x in ("", "width_", "position_")} | changes


def test_words():
    assert uncertainty_lines(figures()) == ["strengths: not stated"]
    changes = {
        "strength_correlated": [[0.02, None], [0.05, 0.03]],
        "strength_uncorrelated": [[0.001, None], [0.004, 0.004]],
        "not_stated": [[0.0, None], [0.12, 0.0]],
        "position": [[0.0015, 3.0]],
        "position_not_stated": [[0.0, 0.0]],
    }
    assert uncertainty_lines(figures(**changes)) == [
        "strengths 2 to 5 % if all lines err together, 0.1 to 0.4 % if each for itself (not stated for up to 12 % of"
        " a band)",
        "positions 0.15 to 300 % of a half-width",
    ]
