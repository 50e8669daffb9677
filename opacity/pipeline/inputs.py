"""From a recipe to lines ready for computing.  A choice that does not fit the lines is an error at its place."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from opacity.arguments import DefaultWidth
from opacity.chi_factors import CHI_FACTORS
from opacity.cross_sections.mixture import MixedLines
from opacity.cross_sections.prepare import PreparedLines, fraction_of, prepare
from opacity.cross_sections.source import (
    LINES_AT_ONCE,
    HeldLines,
    LineSource,
    StoredLines,
    Windows,
)
from opacity.errors import LineListError, RecipeError, problem
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList
from opacity.line_list.read import check_account, merge
from opacity.molecule.broadening import Assumption
from opacity.molecule.isotopologue import Isotopologue, isotopologues_of
from opacity.molecule.partition_function import PartitionFunction
from opacity.pipeline.fingerprint import Fingerprint, fingerprint
from opacity.pipeline.open_lists import (
    KEYS,
    OpenList,
    definition_warnings,
    located,
    open_list,
    refuse_overlap,
    states_against_file,
    summed_states,
)
from opacity.pipeline.sources import DEFAULT_MEMORY
from opacity.recipe.faults import faults_of, shown
from opacity.recipe.marks import undecided_warnings
from opacity.recipe.model import Recipe
from opacity.recipe.unverified import accepted, accepted_in_words, refuse_unverified

_REFERENCES = {
    "TIPS-2021": "Gamache et al. 2021, JQSRT 271, 107713, doi:10.1016/j.jqsrt.2021.107713",
    "TIPS-2025": "Gamache et al. 2025, JQSRT 345, 109568, doi:10.1016/j.jqsrt.2025.109568",
}

_MOST_SHOWN = 6


@dataclass(frozen=True)
class Inputs:
    """Lines prepared for a recipe, and what they came from as plain values for JSON."""

    lines: LineSource
    isotopologues: tuple[Isotopologue, ...]
    partition: tuple[PartitionFunction, ...]
    provenance: dict[str, Any]
    fingerprint: Fingerprint
    warnings: tuple[str, ...] = ()

    @property
    def sha256(self) -> str:
        """Hash of everything that the table's numbers depend on."""
        return self.fingerprint.sha256

    @property
    def seed(self) -> int:
        """The audit's seed, made of the inputs."""
        return self.fingerprint.seed


def load_inputs(
    recipe: Recipe,
    tables: Path = Path("tables"),
    known: Fingerprint | None = None,
    memory: int = DEFAULT_MEMORY,
    quiet: bool = False,
) -> Inputs:
    """All lines of a recipe that can reach its grid, prepared now or when they are needed.

    Small lists are read into memory; line stores of the others lie beside the tables and are made if they are missing.
    `known` spares hashing the files again; `memory` bounds an ingest (bytes).
    Raises RecipeError for a choice of the recipe that does not fit the lines, LineListError or MoleculeError for a
    file that cannot be used.
    """
    refuse_unverified(recipe)
    origin = known or fingerprint(recipe)
    if recipe.species:
        return _load_mixture(recipe, tables, origin, memory, quiet)
    check_molecule(recipe)
    lists = [
        open_list(recipe, number, tables, memory, quiet, origin.hashes) for number in range(len(recipe.line_lists))
    ]
    refuse_overlap(recipe.line_lists, [one.spans for one in lists])
    nu = recipe.grid.wavenumber
    margin = max(step.cutoff for step in recipe.profile.cutoff.steps)
    lower, upper = max(float(nu[0]) - margin, 0.0), float(nu[-1]) + margin
    choices = choices_of(recipe, lists)
    stores = [one.windows for one in lists]
    ledger = Ledger()
    for one in lists:
        ledger.add(one.ledger)
    in_reach = sum(store.count(lower, upper) for store in stores)
    ledger.leave_out("beyond the reach of the grid", ledger.kept - in_reach)
    if in_reach <= LINES_AT_ONCE:
        # The selection drops isotopologues that have no line in reach.
        lines = merge([store.window(lower, upper) for store in stores]).select(slice(None))
        lines = replace(lines, ledger=ledger)
        with located(recipe, KEYS):
            prepared = prepare(check_account(lines), **choices)
        source: LineSource = HeldLines(prepared)
        used = prepared
    else:
        source, used = _stored(recipe, stores, lower, upper, choices, ledger)
    provenance = _provenance(recipe, used.isotopologues, used.partition, ledger.read, lists, origin)
    provenance["broadening"]["default"] = {
        name: {"gamma": one.gamma, "exponent": one.exponent, "source": one.source}
        for name, one in choices["defaults"].items()
    }
    comparison, warnings = states_against_file(recipe, lists)
    warnings += definition_warnings(recipe, lists) + tuple(words for one in lists for words in one.warnings)
    provenance["partition_function"] |= comparison
    warnings += undecided_warnings(recipe.text)
    provenance["unverified"] = accepted(recipe)
    if provenance["unverified"]:
        warnings += (f"values from memory are accepted: {accepted_in_words(provenance['unverified'])}",)
    return Inputs(source, used.isotopologues, used.partition, provenance, origin, warnings)


def _load_mixture(recipe: Recipe, tables: Path, made_of: Fingerprint, memory: int, quiet: bool) -> Inputs:
    """The lines of all species as one list, and what they came from."""
    found = [load_inputs(one.recipe, tables, None, memory, quiet) for one in recipe.species]
    for one, inputs in zip(recipe.species, found, strict=True):
        refuse_invalid_temperatures(one.recipe, inputs.partition)
    sources = tuple((inputs.lines, one.fraction) for one, inputs in zip(recipe.species, found, strict=True))
    origins = [inputs.provenance for inputs in found]
    provenance: dict[str, Any] = {
        **made_of.content,
        "records_read": sum(one["records_read"] for one in origins),
        "partition_function": {
            "source": recipe.partition_function.source,
            "valid": {name: ends for one in origins for name, ends in one["partition_function"]["valid"].items()},
        },
        "isotopologues": [entry for one in origins for entry in one["isotopologues"]],
        "profile": origins[0]["profile"],
        "species": [
            {"fraction": one.fraction, "formula": one.recipe.molecule.formula, **inputs.provenance}
            for one, inputs in zip(recipe.species, found, strict=True)
        ],
        "unverified": [
            {**value, "key": f"{one.recipe.molecule.formula} {value['key']}"}
            for one, origin in zip(recipe.species, origins, strict=True)
            for value in origin["unverified"]
        ],
        "references": list(dict.fromkeys(words for one in origins for words in one["references"])),
        "inputs_sha256": made_of.sha256,
    }
    return Inputs(
        MixedLines(sources),
        tuple(one for inputs in found for one in inputs.isotopologues),
        tuple(one for inputs in found for one in inputs.partition),
        provenance,
        made_of,
        tuple(words for inputs in found for words in inputs.warnings)
        + tuple(
            f"no line of {one.recipe.molecule.formula} reaches the grid: the mixture is without it"
            for one, inputs in zip(recipe.species, found, strict=True)
            if not len(inputs.lines)
        ),
    )


def _stored(
    recipe: Recipe, stores: list[Windows], lower: float, upper: float, choices: dict[str, Any], ledger: Ledger
) -> tuple[LineSource, PreparedLines]:
    """Lines too many to hold: gone through once, to find what has to be assumed and what does not fit."""

    def prepared(lines: LineList) -> PreparedLines:
        with located(recipe, KEYS):
            return prepare(lines, **choices)

    counts: Counter[str] = Counter()
    source = StoredLines(stores, lower, upper, prepared, ledger, ())
    used: dict[str, tuple[Isotopologue, PartitionFunction]] = {}
    last: PreparedLines | None = None
    prepared_lines = 0
    for last in source.stretches():
        prepared_lines += len(last)
        for one in last.assumptions:
            counts[one.what] += one.lines
        used |= {iso.formula: (iso, q) for iso, q in zip(last.isotopologues, last.partition, strict=True)}
    ledger.leave_out("isotopologue not in the mixture chosen", len(source) - prepared_lines)
    if last is None:
        raise LineListError(problem(recipe.path, "no line in reach of the grid is of an isotopologue chosen"))
    if recipe.abundance == "pure" and len(used) > 1:
        faults = faults_of(recipe)
        what = '"pure" needs lines of one isotopologue'
        faults.add(("isotopologues", "abundance"), what, expected="one", found=", ".join(used))
        raise RecipeError(faults.problems())
    source = replace(source, assumptions=tuple(Assumption(what, lines) for what, lines in sorted(counts.items())))
    found = replace(
        last, isotopologues=tuple(iso for iso, _ in used.values()), partition=tuple(q for _, q in used.values())
    )
    return source, found


def check_molecule(recipe: Recipe) -> None:
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


def choices_of(recipe: Recipe, lists: Sequence[OpenList]) -> dict[str, Any]:
    """The recipe's choices as arguments of `prepare`; a definition's default widths serve where nothing else does."""
    choice = recipe.partition_function
    partition: Any = choice.path if choice.path is not None else choice.source
    if choice.source == "states":
        partition = {formula: summed_states(one) for one in lists if "states" in one.facts for formula in one.spans}
    defaults = dict(recipe.broadening.default)
    # A definition speaks of its own list only: beside another list its defaults would serve lines that are not its.
    for one in lists if len(lists) == 1 else ():
        definition = one.facts.get("definition")
        if definition and definition["gamma"] is not None and definition["exponent"] is not None:
            for name in recipe.broadening.mixture:
                words = f"default of the definition of {definition['dataset']}"
                defaults.setdefault(name, DefaultWidth(definition["gamma"], definition["exponent"], words))
    return {
        "partition_function": partition,
        "abundance": recipe.abundance,
        "broadeners": recipe.broadening.mixture,
        "defaults": defaults,
    }


def _provenance(
    recipe: Recipe,
    isotopologues: Sequence[Isotopologue],
    partition_functions: Sequence[PartitionFunction],
    records_read: int,
    lists: Sequence[OpenList],
    origin: Fingerprint,
) -> dict[str, Any]:
    choice, profile, made_from = recipe.partition_function, recipe.profile, dict(origin.content)
    partition: dict[str, Any] = {
        "source": choice.source,
        "valid": {one.source: [one.lowest, one.highest] for one in partition_functions},
        **(made_from.pop("partition_file") or {}),
    }
    references = [source.reference for source in recipe.line_lists]
    references += [_REFERENCES[choice.source]] if choice.source in _REFERENCES else []
    return {
        **made_from,
        "records_read": records_read,
        "data_sets": [one.facts["definition"] for one in lists if one.facts.get("definition")],
        "partition_function": partition,
        "isotopologues": [
            {
                "formula": one.formula,
                "mass": one.mass,
                "terrestrial_abundance": one.abundance if one.known else None,
                "abundance": fraction_of(one, recipe.abundance),
            }
            for one in isotopologues
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
            "chi": None if profile.chi is None else {"name": profile.chi, "source": CHI_FACTORS[profile.chi].source},
        },
        "references": list(dict.fromkeys(references)),
        "inputs_sha256": origin.sha256,
    }


def refuse_invalid_temperatures(recipe: Recipe, partition: Sequence[PartitionFunction]) -> None:
    """Raise RecipeError, with a line for each partition function that is not valid at all temperatures of the grid."""
    faults = faults_of(recipe)
    temperatures = [t for t, _ in recipe.grid.node_list()]
    for q in partition:
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
