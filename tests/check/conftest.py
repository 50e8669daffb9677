"""A small table in memory, as a build makes it before it is written, and ways to alter it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from opacity.check.spectra import nodes_of
from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import as_source
from opacity.pipeline.inputs import load_inputs
from opacity.pipeline.units import spectra_in_memory
from opacity.recipe.load import load_recipe
from opacity.recipe.model import Recipe


@dataclass(frozen=True)
class Values:
    """Spectra in memory: (n_T, n_P, n_nu), or (n_node, n_nu) along a profile."""

    temperature: np.ndarray
    pressure: np.ndarray
    wavenumber: np.ndarray
    sigma: np.ndarray
    profile: bool = False

    def spectrum(self, *node: int) -> np.ndarray:
        return self.sigma[node]


@dataclass(frozen=True)
class Case:
    """A recipe, its lines, and the values that a build stores (rounded to f4)."""

    recipe: Recipe
    lines: PreparedLines
    values: Values

    def with_sigma(self, sigma: np.ndarray) -> Values:
        return replace(self.values, sigma=sigma)

    def computed_with(self, lines: PreparedLines, **changes: Any) -> Values:
        """The values that a build with other lines, or with fields of the profile changed, would have stored."""
        recipe = replace(self.recipe, profile=replace(self.recipe.profile, **changes))
        return self.with_sigma(_stored(spectra_in_memory(recipe, as_source(lines))))

    def nodes(self) -> list[tuple[tuple[int, ...], float, float]]:
        return nodes_of(self.values)


def _stored(sigma: np.ndarray) -> np.ndarray:
    return sigma.astype(np.float32).astype(np.float64)


@pytest.fixture(scope="session")
def make_case(tmp_path_factory: pytest.TempPathFactory, recipe_text: Callable[..., str]) -> Callable[..., Case]:
    """The case of a small recipe with parts of its text changed."""

    def make(**changes: str) -> Case:
        path: Path = tmp_path_factory.mktemp("check") / "co.toml"
        path.write_text(recipe_text(**changes), encoding="utf-8")
        recipe = load_recipe(path)
        lines = load_inputs(recipe).lines.lines
        sigma = _stored(spectra_in_memory(recipe, as_source(lines)))
        grid = recipe.grid
        nodes = grid.nodes
        axes = (grid.temperature, grid.pressure) if nodes is None else tuple(zip(*nodes, strict=True))
        values = Values(np.array(axes[0]), np.array(axes[1]), grid.wavenumber, sigma, nodes is not None)
        return Case(recipe, lines, values)

    return make


@pytest.fixture(scope="session")
def small(make_case: Callable[..., Case]) -> Case:
    """The small recipe as it stands."""
    return make_case()
