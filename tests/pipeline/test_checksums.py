"""Files whose sha256 the recipe or a record beside them gives are refused where they are others."""

from __future__ import annotations

import hashlib
import json
import shutil

import pytest

from opacity.errors import LineListError
from opacity.pipeline import sources
from opacity.pipeline.fetch.checksum import record_sha256
from opacity.pipeline.fingerprint import fingerprint
from opacity.recipe.load import load_recipe

WRONG = "0" * 64
COMMANDS = ("plan", "build", "ingest")


@pytest.fixture
def lines(tmp_path, samples):
    path = tmp_path / "carbon-monoxide.par"
    shutil.copyfile(samples / path.name, path)
    return path


def digest_of(path):
    return hashlib.sha256(path.read_bytes()).hexdigest()


@pytest.fixture
def stating(write_recipe, lines):
    """A recipe that states a sha256 of its list."""

    def write(sha256: str):
        keys = f'urls = ["https://lists.example/{lines.name}"]\nsha256 = {{ "{lines.name}" = "{sha256}" }}\n'
        old = 'reference = "the sample list"'
        return write_recipe("co", (old, keys + old), samples=str(lines.parent))

    return write


@pytest.mark.parametrize("command", COMMANDS)
def test_a_list_of_another_sha256_than_the_recipes_is_refused(opacity, stating, lines, tmp_path, command):
    code, out, err = opacity(command, stating(WRONG), "-o", tmp_path / "out", "--quiet")
    assert (code, out) == (1, "")
    assert err == (
        f"{lines}: not the sha256 of the recipe; expected {WRONG}, found {digest_of(lines)};"
        " move it away and fetch it again, or, if the file is meant, remove sha256 in the recipe\n"
    )
    assert not (tmp_path / "out" / "co.cross-section.h5").exists()


@pytest.mark.parametrize("command", COMMANDS)
def test_a_list_that_is_no_longer_what_was_recorded_is_refused(opacity, write_recipe, lines, tmp_path, command):
    recipe = write_recipe(samples=str(tmp_path))
    record_sha256(lines, digest_of(lines))
    assert opacity(command, recipe, "-o", tmp_path / "out", "--quiet")[0] == 0
    before = digest_of(lines)
    text = lines.read_text()
    lines.write_text(text.replace("E-19", "E-18"))
    code, out, err = opacity(command, recipe, "-o", tmp_path / "out", "--quiet")
    assert (code, out) == (1, "")
    assert err == (
        f"{lines}: not the sha256 recorded beside it; expected {before}, found {digest_of(lines)};"
        f" move it away and fetch it again, or, if the file is meant, remove {lines.name}.sha256\n"
    )


def test_the_recipes_word_goes_before_the_record(stating, lines):
    record_sha256(lines, WRONG)
    made = fingerprint(load_recipe(stating(digest_of(lines).upper())))
    assert made.content["line_lists"][0]["sha256"] == digest_of(lines)


def test_a_store_that_is_there_is_held_against_the_record_too(opacity, write_recipe, lines, tmp_path, monkeypatch):
    monkeypatch.setattr(sources, "SMALL_LIST", 0)
    recipe = write_recipe(samples=str(tmp_path))
    code, out, _ = opacity("ingest", recipe, "-o", tmp_path / "out", "--json", "--quiet")
    assert code == 0
    assert json.loads(out)["stores"][0]["made_now"]
    record_sha256(lines, WRONG)
    for command in COMMANDS:
        code, _, err = opacity(command, recipe, "-o", tmp_path / "out", "--quiet")
        assert code == 1
        assert f"{lines.name}: not the sha256 recorded beside it; expected {WRONG}, found " in err


def test_files_of_widths_and_of_q_are_held_against_their_records(write_recipe, tmp_path):
    broad, q = tmp_path / "CO__air.broad", tmp_path / "co.pf"
    broad.write_text("a0 0.07 0.5 0\n")
    q.write_text("".join(f"{t} {t}\n" for t in range(100, 1000, 10)))
    recipe = load_recipe(
        write_recipe(
            "co",
            ('source = "TIPS-2021"', 'source = "file"\nfile = "co.pf"'),
            ("mixture = { air = 1.0 }", 'mixture = { air = 1.0 }\nfiles = { air = "CO__air.broad" }'),
        )
    )
    fingerprint(recipe)
    for path in (broad, q):
        record_sha256(path, WRONG)
        with pytest.raises(LineListError, match=rf"{path.name}: not the sha256 recorded beside it; expected 0000"):
            fingerprint(recipe)
        (tmp_path / f"{path.name}.sha256").unlink()
