"""All that a report says of one table, as plain values: drawn and laid out elsewhere."""

from __future__ import annotations

import contextlib
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from typing import Any

import numpy as np

from opacity.check.audit_facts import audit_facts
from opacity.check.citations import Citation, citations
from opacity.check.closure import OWN_ERROR, Closure
from opacity.check.list_uncertainty import ListUncertainty, list_uncertainty
from opacity.check.losses import Loss, losses, losses_of_accounts, some_nodes
from opacity.check.other_bands import BandDifference, difference_of, other_bands
from opacity.check.partition_values import PartitionValues, partition_values
from opacity.check.result import AGREES, CANNOT_JUDGE, DIFFERS, CheckResult
from opacity.check.run import CheckReport
from opacity.check.table_facts import facts
from opacity.cross_sections.source import LineSource
from opacity.errors import MoleculeError, TableError, problem
from opacity.grids import FloatArray
from opacity.molecule.isotopologue import Isotopologue, isotopologue_of_name
from opacity.molecule.partition_function import TIPS_EDITIONS, PartitionFunction, tips
from opacity.recipe.model import Recipe
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.read import Table

AnyTable = Table | KCoefficientTable


@dataclass(frozen=True)
class Evidence:
    """What a table was built from, where it is at hand: its recipe, lines and partition functions."""

    recipe: Recipe
    lines: LineSource
    isotopologues: tuple[Isotopologue, ...]
    partition: tuple[PartitionFunction, ...]


@dataclass(frozen=True)
class NodeDifferences:
    """What closure found, in the order of the nodes (n,): K, bar, relative difference (NaN: not judged), its limit, and
    the share of the strength in lines that the step does not resolve.
    """

    temperature: FloatArray
    pressure: FloatArray
    difference: FloatArray
    limit: FloatArray
    unresolved: FloatArray


@dataclass(frozen=True)
class SourceFile:
    """A file that the table's numbers depend on."""

    name: str
    sha256: str
    reference: str = ""


@dataclass(frozen=True)
class TableReport:
    """What a report says.  `verdict` is one sentence, `outcome` the word that marks it; `other_rows` are of published
    bands that the recipe does not name; `middles` are temperature, pressure and error (99 % of points) between nodes.
    """

    table: str
    title: str
    formula: str
    basis: str
    outcome: str
    verdict: str
    rows: tuple[CheckResult, ...]
    other_rows: tuple[CheckResult, ...]
    facts: tuple[tuple[str, str], ...]
    audit: tuple[tuple[str, str], ...]
    uncertainty: ListUncertainty | None
    closure: NodeDifferences | None
    middles: tuple[tuple[float, float, float], ...]
    bands: tuple[BandDifference, ...]
    partition: tuple[PartitionValues, ...]
    losses: tuple[Loss, ...]
    left_out: tuple[tuple[str, int], ...]
    noted: tuple[tuple[str, int], ...]
    assumed: tuple[tuple[str, int], ...]
    from_memory: tuple[tuple[str, str], ...]
    warnings: tuple[str, ...]
    files: tuple[SourceFile, ...]
    packages: tuple[tuple[str, str], ...]
    recipe: str
    references: tuple[Citation, ...]


def table_report(table: AnyTable, report: CheckReport, basis: str, evidence: Evidence | None) -> TableReport:
    """What to say of a table whose checks are done; what rests on its lines only where they are at hand.

    Raises TableError for checks or provenance of another make, or damage.
    """
    try:
        return _gathered(table, report, basis, evidence)
    except (AttributeError, IndexError, KeyError, TypeError, ValueError) as error:
        what = f"provenance or checks are not as this version writes them ({type(error).__name__}: {error})"
        raise TableError(problem(table.path, what, remedy="`opacity show --json` shows them as they are")) from error


def _gathered(table: AnyTable, report: CheckReport, basis: str, evidence: Evidence | None) -> TableReport:
    figures, provenance = report.figures, table.provenance
    bands, other_rows = _bands(table, report, evidence)
    outcome, verdict = _verdict(report.results, other_rows)
    ledger = figures.get("ledger", {})
    return TableReport(
        table=str(table.path),
        title=table.title,
        formula=table.formula,
        basis=basis,
        outcome=outcome,
        verdict=verdict,
        rows=report.results,
        other_rows=other_rows,
        facts=tuple(facts(table)),
        audit=tuple(audit_facts(figures)),
        uncertainty=list_uncertainty(figures.get("uncertainty", table.checks.get("uncertainty"))),
        closure=_differences(figures),
        middles=_middles(figures),
        bands=bands,
        partition=_partition(table, evidence),
        losses=_losses(table, figures, evidence),
        left_out=_counts(ledger.get("left_out", {})),
        noted=_counts(ledger.get("notes", {})),
        assumed=tuple((str(one["what"]), int(one["lines"])) for one in figures.get("assumptions", [])),
        from_memory=tuple((str(one["key"]), str(one["says"])) for one in figures.get("unverified", [])),
        warnings=tuple(str(one) for one in table.checks.get("warnings", [])),
        files=tuple(_files(provenance)),
        packages=_packages(provenance),
        recipe=table.recipe,
        references=citations([str(one) for one in provenance.get("references", [])]),
    )


def _verdict(rows: Sequence[CheckResult], others: Sequence[CheckResult]) -> tuple[str, str]:
    """The word that marks a table's checks, and the sentence; other published bands are told and not counted."""
    agree, differ, open_ = (_number_of(rows, word) for word in (AGREES, DIFFERS, CANNOT_JUDGE))
    beside = ""
    if _number_of(others, DIFFERS):
        beside = f"; of {len(others)} other published bands in its range {_number_of(others, DIFFERS)} differ"
    if differ:
        rest = f"{agree} agree" + (f", {open_} cannot judge" if open_ else "")
        words = f"{differ} of {len(rows)} checks {'differs' if differ == 1 else 'differ'} ({rest})"
        return DIFFERS, f"{words}: do not use this table before you know why{beside}."
    if open_:
        return CANNOT_JUDGE, f"{agree} of {len(rows)} checks agree, none differs, {open_} cannot judge{beside}."
    return AGREES, f"All {len(rows)} checks agree{beside}." if len(rows) > 1 else "The one check, of integrity, agrees."


def _number_of(rows: Sequence[CheckResult], verdict: str) -> int:
    return sum(row.verdict == verdict for row in rows)


def _counts(found: Mapping[str, Any]) -> tuple[tuple[str, int], ...]:
    return tuple((str(what), int(count)) for what, count in found.items())


def _accounts(figures: Mapping[str, Any]) -> list[Closure]:
    known = [field.name for field in fields(Closure)]
    return [Closure(**{name: one[name] for name in known}) for one in figures.get("closure", [])]


def _differences(figures: Mapping[str, Any]) -> NodeDifferences | None:
    accounts = _accounts(figures)
    if not accounts:
        return None
    tolerance = float(figures["tolerance"]) + OWN_ERROR
    return NodeDifferences(
        np.array([one.temperature for one in accounts]),
        np.array([one.pressure for one in accounts]),
        np.array([one.difference if one.can_be_judged else np.nan for one in accounts]),
        np.array([tolerance + one.allowance for one in accounts]),
        np.array([one.at_risk for one in accounts]),
    )


def _middles(figures: Mapping[str, Any]) -> tuple[tuple[float, float, float], ...]:
    """Cell middles with their errors; tables made before these were kept tell the worst one alone."""
    between = figures.get("interpolation") or {}
    cells = between.get("by_cell", [between["worst_cell"]] if "worst_cell" in between else [])
    known = [one for one in cells if one["p99"] is not None]
    return tuple((float(one["temperature"]), float(one["pressure"]), float(one["p99"])) for one in known)


def _bands(
    table: AnyTable, report: CheckReport, evidence: Evidence | None
) -> tuple[tuple[BandDifference, ...], tuple[CheckResult, ...]]:
    """Differences from published bands, those of the recipe first, and the rows of the others."""
    if isinstance(table, KCoefficientTable):
        return (), ()
    asked = {f"band {one['name']}": one for one in _recipe_of(table).get("band_strength", [])}
    found = [difference_of(asked[row.check], row, True) for row in report.results if row.check in asked]
    if evidence is None or evidence.recipe.species:
        return tuple(found), ()
    others = other_bands(table, evidence.recipe, evidence.lines, _accounts(report.figures))
    found += [difference_of(band, row, False) for band, row in others]
    return tuple(found), tuple(row for _, row in others)


def _recipe_of(table: AnyTable) -> dict[str, Any]:
    try:
        return tomllib.loads(table.recipe)
    except tomllib.TOMLDecodeError:
        return {}


def _partition(table: AnyTable, evidence: Evidence | None) -> tuple[PartitionValues, ...]:
    """Of the lines' partition functions; without lines of the edition that the table names, or else of TIPS-2021."""
    abundance = {one["formula"]: float(one.get("abundance", 1.0)) for one in table.provenance.get("isotopologues", [])}
    if evidence is not None:
        used, isotopologues = evidence.partition, evidence.isotopologues
        shares = [abundance.get(one.formula, 0.0) for one in isotopologues]
        return partition_values(isotopologues, shares, used, table.temperature)
    source = table.provenance.get("partition_function", {}).get("source")
    edition = source if source in TIPS_EDITIONS else next(iter(TIPS_EDITIONS))
    known: list[Isotopologue] = []
    functions: list[PartitionFunction] = []
    for entry in table.provenance.get("isotopologues", []):
        one = isotopologue_of_name(str(entry["formula"]), float(entry.get("mass", 0.0)))
        with contextlib.suppress(MoleculeError):
            functions.append(tips(edition, one))
            known.append(one)
    return partition_values(known, [abundance[one.formula] for one in known], functions, table.temperature)


def _losses(table: AnyTable, figures: Mapping[str, Any], evidence: Evidence | None) -> tuple[Loss, ...]:
    if evidence is None:
        return losses_of_accounts(table, figures.get("closure", []))
    if isinstance(table, KCoefficientTable):
        between = float(table.band_bounds[0, 0]), float(table.band_bounds[-1, 1])
    else:
        between = float(table.wavenumber[0]), float(table.wavenumber[-1])
    return losses(some_nodes(table), evidence.lines, between, evidence.recipe.profile)


def _files(provenance: Mapping[str, Any]) -> list[SourceFile]:
    """Line lists, partition function and files of widths, those of a mixture's species too, each once."""
    found = []
    for part in [provenance, *provenance.get("species", [])]:
        for one in part.get("line_lists", []):
            found.append(SourceFile(str(one["file"]), str(one.get("sha256", "")), str(one.get("reference", ""))))
        partition = part.get("partition_function", {})
        if partition.get("file"):
            found.append(SourceFile(str(partition["file"]), str(partition.get("sha256", "")), "partition function"))
        for gas, one in part.get("broadening_files", {}).items():
            entry = one if isinstance(one, Mapping) else {"file": one}
            found.append(SourceFile(str(entry["file"]), str(entry.get("sha256", "")), f"half-widths by {gas}"))
    return list(dict.fromkeys(found))


def _packages(provenance: Mapping[str, Any]) -> tuple[tuple[str, str], ...]:
    program = provenance.get("program", {})
    own = [(str(program.get("name", "")), str(program.get("version", "")))] if program else []
    return (*own, *((str(name), str(version)) for name, version in provenance.get("packages", {}).items()))
