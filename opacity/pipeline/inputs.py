"""From a recipe to lines ready for computing, with every input's hash."""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from opacity.cross_sections.prepare import PreparedLines, prepare
from opacity.errors import InputError, LineListError, RecipeError, problem
from opacity.line_list.model import LineList
from opacity.line_list.read import merge, read_lines
from opacity.line_list.records import ReadOptions
from opacity.molecule.broadening import DefaultWidth
from opacity.provenance import VERSION, file_sha256, package_versions
from opacity.recipe.model import LineListSource, Recipe

_REFERENCES = {
    "TIPS-2021": "Gamache et al. 2021, JQSRT 271, 107713, doi:10.1016/j.jqsrt.2021.107713",
    "TIPS-2025": "Gamache et al. 2025, JQSRT 345, 109568, doi:10.1016/j.jqsrt.2025.109568",
}


@dataclass(frozen=True)
class Inputs:
    """Lines prepared for a recipe, and what they came from as plain values for JSON."""

    lines: PreparedLines
    provenance: dict[str, Any]

    @property
    def sha256(self) -> str:
        """Hash of everything that the table's numbers depend on."""
        return str(self.provenance["inputs_sha256"])

    @property
    def seed(self) -> int:
        """The audit's seed, made of the inputs."""
        return int(self.sha256[:12], 16)


def load_inputs(recipe: Recipe) -> Inputs:
    """Read and prepare all lines of a recipe that can reach its grid.

    Raises LineListError, MoleculeError or RecipeError for what cannot be used.
    """
    lists = [_read(recipe, source) for source in recipe.line_lists]
    _refuse_overlap(recipe.line_lists, lists)
    lines = merge(lists)
    _check_molecule(recipe, lines)
    nu = recipe.grid.wavenumber
    margin = max(step.cutoff for step in recipe.profile.cutoff.steps)
    within = (lines.wavenumber >= nu[0] - margin) & (lines.wavenumber <= nu[-1] + margin)
    lines = lines.select(within, "beyond the reach of the grid")
    prepared = _prepared(recipe, lines)
    return Inputs(prepared, _provenance(recipe, lists, prepared))


def _prepared(recipe: Recipe, lines: LineList) -> PreparedLines:
    choice = recipe.partition_function
    defaults = {
        name: DefaultWidth(one.gamma, one.exponent, one.source) for name, one in recipe.broadening.default.items()
    }
    try:
        return prepare(
            lines,
            partition_function=choice.path if choice.path is not None else choice.source,
            abundance=recipe.abundance,
            broadeners=recipe.broadening.mixture,
            defaults=defaults,
        )
    except InputError as error:  # a choice of the recipe that does not fit the lines
        raise RecipeError([f"{recipe.path}: {error}"]) from error


def _read(recipe: Recipe, source: LineListSource) -> LineList:
    molecule = recipe.molecule
    options = ReadOptions(formula=molecule.formula, mass=molecule.mass, isotopologue=source.isotopologue)
    return read_lines(source.paths, source.format, range=source.range, bad_records=source.bad_records, options=options)


def _check_molecule(recipe: Recipe, lines: LineList) -> None:
    if recipe.molecule.mass is not None and any(one.known for one in lines.isotopologues):
        raise RecipeError(
            [
                problem(
                    f"{recipe.path}: molecule.mass",
                    f"hapi knows {recipe.molecule.formula} and its isotopologues' masses",
                    remedy="remove the key",
                )
            ]
        )


def _refuse_overlap(sources: Sequence[LineListSource], lists: Sequence[LineList]) -> None:
    """The same isotopologue in overlapping ranges of two lists would count its lines twice."""
    seen: dict[str, list[tuple[float, float, str]]] = {}
    for source, lines in zip(sources, lists, strict=True):
        for number, one in enumerate(lines.isotopologues):
            nu = lines.wavenumber[lines.isotopologue == number]
            if not nu.size:
                continue
            low, high = float(nu.min()), float(nu.max())
            for other_low, other_high, other in seen.get(one.formula, []):
                if low <= other_high and other_low <= high:
                    raise LineListError(
                        problem(
                            ", ".join(source.files),
                            f"holds lines of {one.formula} between {max(low, other_low):g} and"
                            f" {min(high, other_high):g} cm-1, and so does {other}",
                            remedy="give each list a range of its own",
                        )
                    )
            seen.setdefault(one.formula, []).append((low, high, ", ".join(source.files)))


def _provenance(recipe: Recipe, lists: Sequence[LineList], lines: PreparedLines) -> dict[str, Any]:
    files = [_file_entry(path, source) for source in recipe.line_lists for path in _all_paths(source)]
    choice = recipe.partition_function
    partition: dict[str, Any] = {
        "source": choice.source,
        "valid": {one.source: [one.lowest, one.highest] for one in lines.partition},
    }
    if choice.path is not None:
        partition |= {"file": choice.path.name, "sha256": file_sha256(choice.path)}
    references = [source.reference for source in recipe.line_lists]
    references += [_REFERENCES[choice.source]] if choice.source in _REFERENCES else []
    content: dict[str, Any] = {
        "program": {"name": "opacity", "version": VERSION},
        "packages": package_versions(),
        "line_lists": files,
        "records_read": sum(one.ledger.read for one in lists),
        "partition_function": partition,
        "isotopologues": [
            {"formula": one.formula, "mass": one.mass, "terrestrial_abundance": one.abundance if one.known else None}
            for one in lines.isotopologues
        ],
        "abundance": recipe.abundance,
        "broadening": {
            "mixture": recipe.broadening.mixture,
            "default": {
                name: {"gamma": one.gamma, "exponent": one.exponent, "source": one.source}
                for name, one in recipe.broadening.default.items()
            },
        },
        "references": list(dict.fromkeys(references)),
    }
    inputs = {**content, "recipe": recipe.text}
    digest = hashlib.sha256(json.dumps(inputs, sort_keys=True).encode("utf-8")).hexdigest()
    return {**content, "inputs_sha256": digest}


def _all_paths(source: LineListSource) -> list[Path]:
    paths = list(source.paths)
    if source.format == "hapi":
        paths += [path.with_suffix(".header") for path in source.paths]
    return paths


def _file_entry(path: Path, source: LineListSource) -> dict[str, Any]:
    # A file name need not be text.
    name = os.fsencode(path.name).decode("utf-8", "backslashreplace")
    return {"file": name, "sha256": file_sha256(path), "reference": source.reference}


def invalid_temperatures(lines: PreparedLines, temperatures: Sequence[float]) -> list[str]:
    """One line for each partition function that is not valid at some of the temperatures."""
    problems = []
    for q in lines.partition:
        outside = [t for t in temperatures if not q.lowest <= t <= q.highest]
        if outside:
            problems.append(
                problem(
                    f"partition function {q.source}",
                    "not valid at every temperature of the grid",
                    expected=f"{q.lowest:g} to {q.highest:g} K",
                    found=", ".join(f"{t:g} K" for t in np.unique(outside)[:6]),
                    remedy="choose another source or other temperatures",
                )
            )
    return problems
