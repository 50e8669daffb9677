"""The README says what the program does: its sample error is one that the program prints."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from opacity.errors import RecipeError
from opacity.recipe.load import load_recipe

ROOT = Path(__file__).parents[1]


def test_the_sample_error_is_what_is_printed(tmp_path, monkeypatch):
    (shown,) = re.findall(r"^```\n(recipes/\S+\.toml:.*)\n```$", (ROOT / "README.md").read_text(), flags=re.MULTILINE)
    name = shown.partition(":")[0]
    wrong, right = re.search(r"grid\.(\w+): .* did you mean (\w+)\?", shown).groups()
    text = (ROOT / name).read_text().replace("../data-samples", str(ROOT / "data-samples"))
    assert text.count(f"\n{right} = ") == 1
    path = tmp_path / name
    path.parent.mkdir()
    path.write_text(text.replace(f"\n{right} = ", f"\n{wrong} = "))
    monkeypatch.chdir(tmp_path)
    with pytest.raises(RecipeError) as caught:
        load_recipe(name)
    assert caught.value.problems == (shown,)
