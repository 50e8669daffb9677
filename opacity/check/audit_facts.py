"""The numerical audit of a table in words: what was computed again, and how far it was off."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any


def audit_facts(figures: Mapping[str, Any]) -> list[tuple[str, str]]:
    """Pairs of a word and its value, for either kind of table; none where the table keeps no audit."""
    audit, certificate, between = (figures.get(name) for name in ("audit", "certificate", "interpolation"))
    found: list[tuple[str, str]] = []
    if audit:
        found += _of_points(audit, figures.get("tolerance"))
    if between:
        found.append(("between nodes", _between(between)))
    if certificate:
        found += _of_bands(certificate)
    return found


def _of_points(audit: Mapping[str, Any], tolerance: Any) -> list[tuple[str, str]]:
    worst = audit["worst"]
    place = f"{worst['wavenumber']:.8g} cm-1, {worst['temperature']:g} K, {worst['pressure']:.4g} bar"
    promised = f"; the tolerance is {tolerance:g}" if isinstance(tolerance, float) else ""
    found = [
        ("computed again", f"{audit['points']} points of {audit['nodes']} nodes, as the exact sum over all lines"),
        ("largest error", f"{audit['largest_error']:.2e}, relative{promised}"),
        ("99 % within", f"{audit['p99_error']:.2e}"),
    ]
    if "exact" in worst:
        found.append(("worst point", f"{place}: {worst['value']:.6e}, exact {worst['exact']:.6e} cm2 per molecule"))
    return [*found, ("zeros", f"{audit['zeros']} points where no line reaches"), ("seed", str(audit["seed"]))]


def _between(between: Mapping[str, Any]) -> str:
    worst = between["worst_cell"]
    return (
        f"{between['points']} points at the middle of {between['cells']} cells: half within {between['p50']:.1e}, 99 %"
        f" within {between['p99']:.1e}, largest {between['largest']:.1e}; worst cell {worst['temperature']:.5g} K,"
        f" {worst['pressure']:.3g} bar. Not judged: it tells how fine the grid is"
    )


def _of_bands(certificate: Mapping[str, Any]) -> list[tuple[str, str]]:
    """What the certificate of a k-coefficient table says, as absolute errors of a band's mean transmission."""
    found = []
    bands = certificate.get("bands", [])
    if bands:
        largest = [abs(one["largest"]) for one in bands]
        found.append(("all nodes", f"transmission within {max(largest):.2e}, the largest of {len(bands)} bands"))
        if all("p99" in one for one in bands):
            found.append(("99 % within", f"{max(abs(one['p99']) for one in bands):.2e} in every band"))
    if certificate.get("target") is not None:
        found.append(("promised", f"{certificate['target']:g}"))
    sampled = certificate.get("sampled", [])
    if sampled:
        found += _sampled(sampled)
    if "seed" in certificate:
        found.append(("seed", str(certificate["seed"])))
    return found


def _sampled(sampled: list[Mapping[str, Any]]) -> list[tuple[str, str]]:
    """Bands that were made again line by line, largest of all."""
    words = {
        "fine_cells": ("fine cells", "transmission within {:.1e} of line by line"),
        "mean": ("band means", "within {:.1e}, relative"),
        "exact": ("spectra", "within {:.1e} of the exact sum, relative"),
        "two_layers": ("two layers", "transmission within {:.1e}: what correlated k costs, not judged"),
        "middle": ("between nodes", "transmission within {:.1e}: how fine the grid is, not judged"),
    }
    found = [("computed again", f"{len(sampled)} bands line by line")]
    for name, (word, phrase) in words.items():
        values = [one[name] for one in sampled if one.get(name) is not None]
        if values:
            found.append((word, phrase.format(max(values))))
    return found
