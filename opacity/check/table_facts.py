"""What a table says of itself, as pairs of a word and its value."""

from __future__ import annotations

from typing import Any

from opacity.tables.k_read import KCoefficientTable
from opacity.tables.layout import F4_SMALLEST
from opacity.tables.read import Table


def facts(table: Table | KCoefficientTable) -> list[tuple[str, str]]:
    """Its kind, axes, sources and choices; those that it does not tell are left out.

    AttributeError, IndexError, KeyError, TypeError or ValueError for provenance of another make.
    """
    provenance = table.provenance
    kind = f"{table.temperature.size} nodes along a profile" if table.profile else "grid"
    program = provenance.get("program", {})
    lines = [
        ("what", f"{table.title}, cm2 per molecule, {kind}"),
        ("temperature", _axis(table.temperature.tolist(), "K")),
        ("pressure", _axis(table.pressure.tolist(), "bar")),
        ("stored as", _stored_as(table)),
        *(_k_lines(table) if isinstance(table, KCoefficientTable) else _point_lines(table)),
        ("line list", ", ".join(one["file"] for one in provenance.get("line_lists", []))),
        *_isotopologues(provenance.get("isotopologues", [])),
        *_partition(provenance.get("partition_function", {})),
        *[("species", f"{one['fraction']:g} {one['formula']}") for one in provenance.get("species", [])],
        *[("broadening", _mixture(one)) for one in _mixtures(provenance)],
        *_profile(provenance.get("profile", {})),
        ("built by", f"{program.get('name', '')} {program.get('version', '')}"),
    ]
    return [(word, value) for word, value in lines if value.strip()]


def _range(first: float, last: float) -> str:
    wavelength = "" if first <= 0.0 else f" ({1e4 / last:.4g} to {1e4 / first:.4g} um)"
    return f"{first:.8g} to {last:.8g} cm-1{wavelength}"


def _point_lines(table: Table) -> list[tuple[str, str]]:
    nu = table.wavenumber
    return [("wavenumber", f"{_range(float(nu[0]), float(nu[-1]))}, {nu.size} points")]


def _k_lines(table: KCoefficientTable) -> list[tuple[str, str]]:
    own = ", weights of each band's own" if table.g_weight.ndim == 2 else ""
    first, last = float(table.band_bounds[0, 0]), float(table.band_bounds[-1, 1])
    lines = [
        ("bands", f"{table.band.size}, {_range(first, last)}"),
        ("quadrature", f"{table.quadrature}, {table.g.size} g points{own}"),
    ]
    if table.cell_bounds is not None:
        lines.append(("fine cells", f"{len(table.cell_bounds)} a band and node"))
    errors = [abs(one["largest"]) for one in table.checks.get("certificate", {}).get("bands", [])]
    if errors:
        band = table.band_bounds[errors.index(max(errors))]
        where = f"in the band {band[0]:.8g} to {band[1]:.8g} cm-1"
        lines.append(("certificate", f"transmission of a band within {max(errors):.2g}, the largest error {where}"))
    return lines


def _mixtures(provenance: dict[str, Any]) -> list[dict[str, float]]:
    """The broadening mixture, or those of the species, each once."""
    found = [one.get("broadening", {}).get("mixture", {}) for one in provenance.get("species", [provenance])]
    return [one for number, one in enumerate(found) if one not in found[:number]]


def _isotopologues(found: list[dict[str, Any]]) -> list[tuple[str, str]]:
    named = (f"{one['formula']} {one['abundance']:.6g}" if "abundance" in one else one["formula"] for one in found)
    return [("isotopologues", ", ".join(named))] if found else []


def _partition(found: dict[str, Any]) -> list[tuple[str, str]]:
    """The source, and the range (K) in which it holds for all isotopologues."""
    ranges = list(found.get("valid", {}).values())
    valid = f", valid {max(low for low, _ in ranges):g} to {min(high for _, high in ranges):g} K" if ranges else ""
    return [("partition", f"{found.get('file') or found.get('source', '')}{valid}")]


def _profile(found: dict[str, Any]) -> list[tuple[str, str]]:
    if not found:
        return []
    steps = []
    for step in found["cutoff"]:
        limit = f" up to {step['to_pressure']:g} bar" if step["to_pressure"] is not None else ""
        steps.append(f"{step['cutoff']:g} cm-1{limit}")
    return [
        ("cut-off", ", then ".join(steps)),
        ("plinth", "removed" if found["plinth"] else "kept"),
        *([("chi factors", f"{found['chi']['name']}: {found['chi']['source']}")] if found.get("chi") else []),
        ("tolerance", f"{found['tolerance']:g}"),
    ]


def _stored_as(table: Table | KCoefficientTable) -> str:
    why = f" (values below {F4_SMALLEST:g}, where float32 loses digits)" if table.dtype.itemsize > 4 else ""
    return f"{table.dtype}{why}"


def _axis(values: list[float], unit: str) -> str:
    if len(values) <= 8:
        return ", ".join(f"{value:.4g}" for value in values) + f" {unit}"
    return f"{len(values)} values from {min(values):.4g} to {max(values):.4g} {unit}"


def _mixture(mixture: dict[str, float]) -> str:
    return ", ".join(f"{name} {fraction:g}" for name, fraction in mixture.items())
