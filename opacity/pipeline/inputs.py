"""From a recipe to lines ready for computing.  A choice that does not fit the lines is an error at its place."""

from __future__ import annotations

import contextlib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from opacity.cross_sections.prepare import PreparedLines, fraction_of, prepare
from opacity.errors import LineListError, OpacityError, RecipeError, problem
from opacity.line_list.model import LineList
from opacity.line_list.read import check_account, merge, read_lines
from opacity.line_list.records import ReadOptions
from opacity.molecule.isotopologue import isotopologues_of
from opacity.pipeline.fingerprint import Fingerprint, fingerprint
from opacity.recipe.faults import faults_of, shown
from opacity.recipe.model import LineListSource, Recipe
from opacity.recipe.positions import KeyPath

_REFERENCES = {
    "TIPS-2021": "Gamache et al. 2021, JQSRT 271, 107713, doi:10.1016/j.jqsrt.2021.107713",
    "TIPS-2025": "Gamache et al. 2025, JQSRT 345, 109568, doi:10.1016/j.jqsrt.2025.109568",
}

_KEYS: dict[str, KeyPath] = {
    "formula": ("molecule", "formula"),
    "broadeners": ("broadening", "mixture"),
    "abundance": ("isotopologues", "abundance"),
    "partition_function": ("partition_function", "source"),
}
"""The recipe's key that makes the choice of an argument."""
_MOST_SHOWN = 6


@dataclass(frozen=True)
class Inputs:
    """Lines prepared for a recipe, and what they came from as plain values for JSON."""

    lines: PreparedLines
    provenance: dict[str, Any]
    fingerprint: Fingerprint

    @property
    def sha256(self) -> str:
        """Hash of everything that the table's numbers depend on."""
        return self.fingerprint.sha256

    @property
    def seed(self) -> int:
        """The audit's seed, made of the inputs."""
        return self.fingerprint.seed


def load_inputs(recipe: Recipe, known: Fingerprint | None = None) -> Inputs:
    """Read and prepare all lines of a recipe that can reach its grid; `known` spares hashing the files again.

    Raises RecipeError for a choice of the recipe that does not fit the lines, LineListError or MoleculeError for a
    file that cannot be used.
    """
    origin = known or fingerprint(recipe)
    _check_molecule(recipe)
    lists = [_read(recipe, number, source) for number, source in enumerate(recipe.line_lists)]
    _refuse_overlap(recipe.line_lists, lists)
    lines = merge(lists)
    nu = recipe.grid.wavenumber
    margin = max(step.cutoff for step in recipe.profile.cutoff.steps)
    within = (lines.wavenumber >= nu[0] - margin) & (lines.wavenumber <= nu[-1] + margin)
    lines = check_account(lines.select(within, "beyond the reach of the grid"))
    choice = recipe.partition_function
    with _located(recipe, _KEYS):
        prepared = prepare(
            lines,
            partition_function=choice.path if choice.path is not None else choice.source,
            abundance=recipe.abundance,
            broadeners=recipe.broadening.mixture,
            defaults=recipe.broadening.default,
        )
    return Inputs(prepared, _provenance(recipe, lists, prepared, origin), origin)


@contextlib.contextmanager
def _located(recipe: Recipe, keys: dict[str, KeyPath]) -> Iterator[None]:
    """Turn an error about an argument into one of the recipe, at the line of the key that made the choice."""
    try:
        yield
    except OpacityError as error:
        if error.argument not in keys:
            raise
        faults = faults_of(recipe)
        faults.add_error(keys[error.argument], error)
        raise RecipeError(faults.problems()) from error


def _check_molecule(recipe: Recipe) -> None:
    """A mass is needed for a molecule that hapi does not know, and would contradict what hapi knows of another."""
    molecule, faults = recipe.molecule, faults_of(recipe)
    known = bool(isotopologues_of(molecule.formula))
    if known and molecule.mass is not None:
        what = f"hapi knows {molecule.formula} and its isotopologues' masses"
        faults.add(("molecule", "mass"), what, remedy="remove the key")
    if not known and molecule.mass is None:
        faults.add(
            ("molecule", "formula"),
            "hapi does not know this molecule",
            expected="a formula of HITRAN such as CO, or the molecule's mass (g/mol) beside it",
            found=shown(molecule.formula),
            remedy="mend the formula, or add mass to [molecule]",
        )
    if faults.problems():
        raise RecipeError(faults.problems())


def _read(recipe: Recipe, number: int, source: LineListSource) -> LineList:
    molecule = recipe.molecule
    options = ReadOptions(molecule.formula, molecule.mass, source.isotopologue)
    with _located(recipe, {**_KEYS, "isotopologue": ("line_list", number, "isotopologue")}):
        return read_lines(
            source.paths, source.format, range=source.range, bad_records=source.bad_records, options=options
        )


def _refuse_overlap(sources: Sequence[LineListSource], lists: Sequence[LineList]) -> None:
    """The same isotopologue in overlapping ranges of two lists would count its lines twice."""
    seen: dict[str, list[tuple[float, float, str]]] = {}
    for source, lines in zip(sources, lists, strict=True):
        for number, one in enumerate(lines.isotopologues):
            nu = lines.wavenumber[lines.isotopologue == number]
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


def _provenance(recipe: Recipe, lists: Sequence[LineList], lines: PreparedLines, origin: Fingerprint) -> dict[str, Any]:
    choice, profile, made_from = recipe.partition_function, recipe.profile, dict(origin.content)
    partition: dict[str, Any] = {
        "source": choice.source,
        "valid": {one.source: [one.lowest, one.highest] for one in lines.partition},
        **(made_from.pop("partition_file") or {}),
    }
    references = [source.reference for source in recipe.line_lists]
    references += [_REFERENCES[choice.source]] if choice.source in _REFERENCES else []
    return {
        **made_from,
        "records_read": sum(one.ledger.read for one in lists),
        "partition_function": partition,
        "isotopologues": [
            {
                "formula": one.formula,
                "mass": one.mass,
                "terrestrial_abundance": one.abundance if one.known else None,
                "abundance": fraction_of(one, recipe.abundance),
            }
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
        "profile": {
            "cutoff": [{"cutoff": one.cutoff, "to_pressure": one.to_pressure} for one in profile.cutoff.steps],
            "tolerance": profile.tolerance,
            "plinth": profile.plinth,
        },
        "references": list(dict.fromkeys(references)),
        "inputs_sha256": origin.sha256,
    }


def refuse_invalid_temperatures(recipe: Recipe, lines: PreparedLines) -> None:
    """Raise RecipeError, with a line for each partition function that is not valid at all temperatures of the grid."""
    faults = faults_of(recipe)
    temperatures = [t for t, _ in recipe.grid.node_list()]
    for q in lines.partition:
        outside = np.unique([t for t in temperatures if not q.lowest <= t <= q.highest])
        if outside.size:
            more = f" and {outside.size - _MOST_SHOWN} more" if outside.size > _MOST_SHOWN else ""
            faults.add(
                ("partition_function", "source"),
                f"{q.source} is not valid at every temperature of the grid",
                expected=f"{q.lowest:g} to {q.highest:g} K",
                found=", ".join(f"{t:g} K" for t in outside[:_MOST_SHOWN]) + more,
                remedy="choose another source or other temperatures",
            )
    if faults.problems():
        raise RecipeError(faults.problems())
