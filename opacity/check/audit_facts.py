"""The numerical audit of a table in words: what was computed again, and how far it was off."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any


def size(value: Any, figures: int = 2) -> str:
    """A number from JSON, which knows no infinity: there it is null."""
    return f"{value:.{figures}e}" if isinstance(value, float | int) else "infinite"


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
        ("largest error", f"{size(audit['largest_error'])}, relative{promised}"),
        ("99 % within", size(audit["p99_error"])),
    ]
    if "exact" in worst:
        found.append(("worst point", f"{place}: {worst['value']:.6e}, exact {worst['exact']:.6e} cm2 per molecule"))
    return [*found, ("zeros", f"{audit['zeros']} points where no line reaches"), ("seed", str(audit["seed"]))]


def _between(between: Mapping[str, Any]) -> str:
    worst = between["worst_cell"]
    half, most, largest = (size(between[name], 1) for name in ("p50", "p99", "largest"))
    return (
        f"{between['points']} points at the middle of {between['cells']} cells: half within {half}, 99 % within {most},"
        f" largest {largest}; worst cell {worst['temperature']:.5g} K, {worst['pressure']:.3g} bar."
        " Not judged: it tells how fine the grid is"
    )


def _of_bands(certificate: Mapping[str, Any]) -> list[tuple[str, str]]:
    """What the certificate of a k-coefficient table says, as absolute errors of a band's mean transmission."""
    found = []
    bands = certificate.get("bands", [])
    if bands:
        largest = size(_largest(bands, "largest"))
        found.append(("all nodes", f"transmission within {largest}, the largest of {len(bands)} bands"))
        if all("p99" in one for one in bands):
            found.append(("99 % within", f"{size(_largest(bands, 'p99'))} in every band"))
    if certificate.get("target") is not None:
        found.append(("promised", f"{certificate['target']:g}"))
    sampled = certificate.get("sampled", [])
    if sampled:
        found += _sampled(sampled)
    if "seed" in certificate:
        found.append(("seed", str(certificate["seed"])))
    return found


def _largest(entries: Sequence[Mapping[str, Any]], name: str) -> float | None:
    """The largest size among entries, None where one of them is infinite."""
    values = [one[name] for one in entries]
    return None if None in values else max(abs(one) for one in values)


def _sampled(sampled: Sequence[Mapping[str, Any]]) -> list[tuple[str, str]]:
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
