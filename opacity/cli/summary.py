"""What `show` says of a table."""

from __future__ import annotations

from typing import Any

from opacity.check.table_facts import facts
from opacity.cli.text import notes, uncertainty_lines
from opacity.errors import TableError, problem
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.read import Table


def summary(table: Table | KCoefficientTable) -> dict[str, Any]:
    """A table's axes, sources and checks as plain values for JSON."""
    return {
        "table": str(table.path),
        "title": table.title,
        "formula": table.formula,
        "format_version": table.format_version,
        "profile": table.profile,
        "temperature": table.temperature.tolist(),
        "pressure": table.pressure.tolist(),
        **(_k_axes(table) if isinstance(table, KCoefficientTable) else _wavenumbers(table)),
        "stored_as": str(table.dtype),
        "provenance": table.provenance,
        "checks": {key: value for key, value in table.checks.items() if key != "closure"},
    }


def _wavenumbers(table: Table) -> dict[str, Any]:
    nu = table.wavenumber
    return {"wavenumber": {"first": float(nu[0]), "last": float(nu[-1]), "points": int(nu.size)}}


def _k_axes(table: KCoefficientTable) -> dict[str, Any]:
    return {
        "band_bounds": table.band_bounds.tolist(),
        "quadrature": table.quadrature,
        "g": table.g.tolist(),
        "g_weight": table.g_weight.tolist(),
        "fine_cells": 0 if table.cell_bounds is None else len(table.cell_bounds),
    }


def summary_lines(table: Table | KCoefficientTable) -> list[tuple[str, str]]:
    """The same for people, as pairs of a word and its value.  Raises TableError for texts of another make."""
    try:
        return _lines(table)
    except (AttributeError, IndexError, KeyError, TypeError, ValueError) as error:
        what = f"provenance or checks are not as this version writes them ({type(error).__name__}: {error})"
        raise TableError(problem(table.path, what, remedy="--json shows them as they are")) from error


def _lines(table: Table | KCoefficientTable) -> list[tuple[str, str]]:
    provenance, checks = table.provenance, table.checks
    lines = [(row["check"], f"{row['verdict']}: {row['detail']}") for row in checks.get("results", [])]
    if checks.get("uncertainty"):
        lines += [("list's own", f"uncertainty of {one}") for one in uncertainty_lines(checks["uncertainty"])]
        lines.append(("stated by", checks["uncertainty"]["source"]))
    lines += [("warning", one) for one in checks.get("warnings", [])]
    lines += notes({"left_out": {}, "notes": {}, **checks.get("ledger", {})}, checks.get("assumptions", []))
    lines += [("cite", one) for one in provenance.get("references", [])]
    return [*facts(table), *((word, value) for word, value in lines if value.strip())]
