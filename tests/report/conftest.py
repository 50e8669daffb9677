"""Reports on small tables of both kinds, and a page taken apart without a browser."""

from __future__ import annotations

import shutil
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from html.parser import HTMLParser
from pathlib import Path

import pytest

from opacity.pipeline.build import build_tables
from opacity.pipeline.report import report
from opacity.recipe.load import load_recipe

VOID = {"meta", "link", "br", "hr", "img", "input"}

BAND = """
[[band_strength]]
name = "middle of 1-0"
range = [2145.0, 2149.0]
strength = 9.45e-20
unit = "cm/molecule"
temperature = 296.0
uncertainty = 0.01
source = "invented for this test"
"""
K_COEFFICIENT = "[k_coefficient]\nbands = { width = 1.0 }\ng_points = 8\n"


@dataclass
class Element:
    """An element of a page: name, attributes, and what stands in it."""

    tag: str
    attributes: dict[str, str]
    children: list[Element] = field(default_factory=list)
    words: list[str] = field(default_factory=list)

    def all(self, tag: str) -> list[Element]:
        found = [child for child in self.children if child.tag == tag]
        return found + [one for child in self.children for one in child.all(tag)] if self.children else found

    @property
    def text(self) -> str:
        return " ".join("".join(self.words).split())


class Page(HTMLParser):
    """A page as a tree; whatever is not closed where it should be is a fault."""

    def __init__(self, path: Path) -> None:
        super().__init__(convert_charrefs=True)
        self.source = path.read_text(encoding="utf-8")
        self.root = Element("", {})
        self.faults: list[str] = []
        self.ids: Counter[str] = Counter()
        self._open = [self.root]
        self.feed(self.source)
        self.close()
        self.faults += [f"{one.tag} is not closed" for one in self._open[1:]]

    def handle_starttag(self, tag, attrs):
        names = [name for name, _ in attrs]
        if len(set(names)) < len(names):
            self.faults.append(f"{tag}: an attribute twice")
        element = Element(tag, {name: value or "" for name, value in attrs})
        self._open[-1].children.append(element)
        self.ids.update([element.attributes["id"]] if "id" in element.attributes else [])
        if tag not in VOID:
            self._open.append(element)

    def handle_startendtag(self, tag, attrs):
        self.handle_starttag(tag, attrs)
        self.handle_endtag(tag)

    def handle_endtag(self, tag):
        if self._open[-1].tag != tag:
            self.faults.append(f"line {self.getpos()[0]}: </{tag}> in <{self._open[-1].tag}>")
            return
        self._open.pop()

    def handle_data(self, data):
        for element in self._open:
            element.words.append(data)

    def all(self, tag: str) -> list[Element]:
        return self.root.all(tag)

    @property
    def text(self) -> str:
        return self.root.text

    def pictures(self) -> dict[str, str]:
        """The text of every picture by its title."""
        drawn = [one for one in self.all("svg") if one.attributes.get("role") == "img"]
        return {one.all("title")[0].text: one.all("desc")[0].text for one in drawn}

    def headings(self) -> list[str]:
        return [one.text for one in self.all("h2")]


@pytest.fixture(scope="session")
def read_page() -> Callable[[Path], Page]:
    return Page


@pytest.fixture(scope="session")
def built(tmp_path_factory: pytest.TempPathFactory, recipe_text: Callable[..., str]) -> Path:
    """A folder with `co.toml` and both of its tables, and `along.toml` with one along a profile; not to be changed."""
    folder = tmp_path_factory.mktemp("report")
    nodes = "nodes = [[296.0, 0.1], [400.0, 0.3], [300.0, 1.0]]"
    texts = {"co": recipe_text(extra=K_COEFFICIENT + BAND), "along": recipe_text(nodes=nodes)}
    for name, text in texts.items():
        (folder / f"{name}.toml").write_text(text, encoding="utf-8")
        build_tables(load_recipe(folder / f"{name}.toml"), folder / "tables", quiet=True)
    return folder


@pytest.fixture(scope="session")
def pages(built: Path, tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    """A report on each table, and one on a table whose recipe is not at hand."""
    folder = tmp_path_factory.mktemp("pages")
    tables = built / "tables"
    alone = folder / "alone.cross-section.h5"
    shutil.copyfile(tables / "co.cross-section.h5", alone)
    return {
        "cross-section": report(tables / "co.cross-section.h5", folder / "sigma.html"),
        "k-coefficient": report(tables / "co.k-coefficient.h5", folder / "k.html"),
        "profile": report(tables / "along.cross-section.h5", folder / "along.html"),
        "alone": report(alone, folder / "alone.html"),
    }
