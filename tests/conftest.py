"""Small recipes and lines of the sample lists, used by the tests of checks, pipeline and command line."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

SAMPLES = Path(__file__).parents[1] / "data-samples"

RECIPE = """\
[molecule]
name = "carbon monoxide"
formula = "CO"

[[line_list]]
format = "hitran"
files = ["{samples}/carbon-monoxide.par"]
reference = "the sample list"

[isotopologues]
abundance = "pure"

[partition_function]
source = "TIPS-2021"

[broadening]
mixture = {{ air = 1.0 }}

[profile]
cutoff = {cutoff}
tolerance = {tolerance}

[grid]
wavenumber = {wavenumber}
{nodes}

[cross_section]
{extra}"""

DEFAULTS = {
    "samples": str(SAMPLES),
    "cutoff": "25.0",
    "tolerance": "1e-3",
    "wavenumber": "{ start = 2145.0, stop = 2149.0, step = 0.004 }",
    "nodes": "temperature = [296.0, 480.0]\npressure = [0.01, 1.0]",
    "extra": "",
}


@pytest.fixture(scope="session")
def samples() -> Path:
    return SAMPLES


@pytest.fixture(scope="session")
def recipe_text() -> Callable[..., str]:
    """The text of a small recipe (two lines of CO, four nodes, 1001 points), with parts of it changed."""

    def text(**changes: str) -> str:
        return RECIPE.format(**{**DEFAULTS, **changes})

    return text


@pytest.fixture
def write_recipe(tmp_path: Path, recipe_text: Callable[..., str]) -> Callable[..., Path]:
    """Write such a recipe to a file of its own folder and return the path."""

    def write(name: str = "co", *replacements: tuple[str, str], **changes: str) -> Path:
        text = recipe_text(**changes)
        for old, new in replacements:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        path = tmp_path / f"{name}.toml"
        path.write_text(text, encoding="utf-8")
        return path

    return write


@pytest.fixture
def opacity(capsys: pytest.CaptureFixture[str]) -> Callable[..., tuple[int, str, str]]:
    """Run a command in this process: exit code, stdout, stderr."""
    from opacity.cli.main import main

    def run(*arguments: object) -> tuple[int, str, str]:
        capsys.readouterr()
        try:
            code = main([str(one) for one in arguments])
        except SystemExit as stop:
            code = int(stop.code or 0)
        out, err = capsys.readouterr()
        return code, out, err

    return run
