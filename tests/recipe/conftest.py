from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from opacity.errors import RecipeError
from opacity.recipe.load import load_recipe

FULL = """\
# every section that a recipe can have
[molecule]
name = "carbon monoxide"
formula = "CO"
mass = 28

[[line_list]]
format = "hitran"
files = ["lines/CO-*.par"]
range = [0, 9000.0]
reference = "Gordon et al. 2022, doi:10.1016/j.jqsrt.2021.107949"

[[line_list]]
format = "hapi"
files = [
    "lines/hot.data",
]
isotopologue = "(12C)(16O)"
reference = "second"
bad_records = "leave-out"

[isotopologues]
abundance = { "(12C)(16O)" = 0.9, "2" = 0.1 }

[partition_function]
source = "file"
file = "CO.pf"

[broadening]
mixture = { H2 = 0.85, He = 0.15 }

[broadening.default.H2]
gamma = 0.07
exponent = 0.5
source = "from memory"

[profile]
cutoff = [{ to_pressure = 200.0, cutoff = 25.0 }, { cutoff = 100.0 }]
tolerance = 1e-4
plinth = true

[grid]
wavenumber = { start = 2000.0, stop = 2010.0, step = 0.5 }
temperature = [300.0, 1000]
pressure = { start = 1e-6, stop = 100.0, count = 9, spacing = "log" }

[cross_section]

[[band_strength]]
name = "1-0"
range = [2000.0, 2250.0]
strength = 1.013e-17
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.007
source = "Zou & Varanasi 2002, JQSRT 75, 63"
"""


@pytest.fixture(scope="session")
def full() -> str:
    return FULL


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A folder with the files that the full recipe names; of recipes only their existence matters."""
    make_files(tmp_path)
    return tmp_path


@pytest.fixture(scope="session")
def session_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("recipe")
    make_files(path)
    return path


def make_files(folder: Path) -> None:
    (folder / "lines").mkdir()
    for name in ("CO-b.par", "CO-a.par", "hot.data", "hot.header", "bare.data"):
        (folder / "lines" / name).touch()
    (folder / "CO.pf").touch()


@pytest.fixture
def faults(folder: Path, full: str) -> Callable[..., list[str]]:
    """Load the full recipe with pieces of its text replaced; the problems without the folder's name."""

    def load(*changes: tuple[str, str], text: str = full) -> list[str]:
        for old, new in changes:
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        path = folder / "co.toml"
        path.write_text(text, encoding="utf-8")
        with pytest.raises(RecipeError) as caught:
            load_recipe(path)
        prefix = f"{folder}/"
        assert all(line.startswith(prefix) for line in caught.value.problems)
        return [line.removeprefix(prefix).replace(str(folder), "FOLDER") for line in caught.value.problems]

    return load
