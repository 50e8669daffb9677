"""How results look on a terminal."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from opacity.check.result import CheckResult, finite

WIDTH = 100


def as_json(value: Mapping[str, Any]) -> str:
    """JSON for programs; infinities and NaN, which JSON does not know, as null."""
    return json.dumps(finite(value), indent=2)


def results_table(results: Iterable[CheckResult]) -> str:
    """Rows of results: check, verdict, difference and limit, then the detail below, indented."""
    rows = list(results)
    name_width = max([len("check"), *(len(row.check) for row in rows)])
    lines = [f"{'check':{name_width}}  {'verdict':12}  {'difference':>10}  {'limit':>8}"]
    for row in rows:
        value = "" if row.value is None else f"{row.value:+.2e}"
        limit = "" if row.limit is None else f"{row.limit:.1e}"
        lines.append(f"{row.check:{name_width}}  {row.verdict:12}  {value:>10}  {limit:>8}".rstrip())
        lines += [f"    {part}" for part in _folded(row.detail, WIDTH - 4)]
    return "\n".join(lines)


def _folded(text: str, width: int) -> list[str]:
    """Lines broken between words only: a file name must stay one that can be copied."""
    return textwrap.wrap(text, width, break_long_words=False, break_on_hyphens=False)


def wrapped(text: str) -> str:
    """A sentence in lines of at most `WIDTH` characters, all but the first indented."""
    return textwrap.fill(text, WIDTH, subsequent_indent="    ", break_long_words=False, break_on_hyphens=False)


def facts(pairs: Sequence[tuple[str, str]]) -> str:
    """Two columns: what, and its value; long values are folded."""
    width = max(len(name) for name, _ in pairs)
    indent = " " * (width + 2)
    lines = []
    for name, value in pairs:
        folded = _folded(value, WIDTH - width) or [""]
        lines.append(f"{name:{width}}  {folded[0]}")
        lines += [indent + part for part in folded[1:]]
    return "\n".join(lines)


def counted(number: int, word: str) -> str:
    """A number of things: 1 line, 2 lines."""
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


def percent(share: float) -> str:
    """A share in percent, to two digits."""
    value = 100.0 * share
    return f"{value:.0f} %" if value >= 9.95 else f"{value:.2g} %"


def notes(ledger: Mapping[str, Any], assumptions: Iterable[Mapping[str, Any]]) -> list[tuple[str, str]]:
    """What became of a list's records: (left out | assumed | note, what and for how many lines)."""
    found = [("left out", f"{counted(count, 'line')}, {reason}") for reason, count in ledger["left_out"].items()]
    found += [("assumed", f"for {counted(one['lines'], 'line')}: {one['what']}") for one in assumptions]
    found += [("note", f"{counted(count, 'record')}, {what}") for what, count in ledger["notes"].items()]
    return found


def interpolation_line(between: Mapping[str, Any]) -> str:
    """What interpolating between the table's nodes costs, in words."""
    return (
        f"interpolating at the middle of {counted(between['cells'], 'cell')}: half of the points within"
        f" {percent(between['p50'])}, 99 % within {percent(between['p99'])}: not judged, it tells how fine the grid is"
    )


def certificate_lines(certificate: Mapping[str, Any]) -> list[str]:
    """What a certificate says beside its checks: of layers of different nodes, and between nodes."""
    sampled = [one for one in certificate.get("sampled", ()) if one["two_layers"] is not None]
    if not sampled:
        return []
    bands = counted(len(sampled), "band")
    lines = [
        f"two layers at {counted(len(certificate['pairs']), 'pair')} of nodes, {bands}: transmission within"
        f" {max(one['two_layers'] for one in sampled):.1e} of line by line: not judged, it is what correlated k costs"
    ]
    middles = [one for one in sampled if one["middle"] is not None]
    if middles:
        lines.append(
            f"interpolating at the middle of {counted(len(certificate['middles']), 'cell')}, {bands}: transmission"
            f" within {max(one['middle'] for one in middles):.1e}, means within"
            f" {percent(max(one['middle_mean'] for one in middles))}: not judged, it tells how fine the grid is"
        )
    return lines


def uncertainty_lines(stated: Mapping[str, Any]) -> list[str]:
    """What the line lists say of their own uncertainty, in words: ranges over all bands and nodes."""
    together, apart = _span(stated["strength_correlated"]), _span(stated["strength_uncorrelated"])
    if together is None:
        strengths = "strengths: not stated"
    else:
        without = _most(stated["not_stated"])
        strengths = f"strengths {together} if all lines err together, {apart} if each for itself{without}"
    found = []
    for name, words in (("width", "half-widths {}"), ("position", "positions {} of a half-width")):
        span = _span(stated[name])
        if span is not None:
            found.append(words.format(span) + _most(stated[f"{name}_not_stated"]))
    return [strengths, *(["; ".join(found)] if found else [])]


def _values(rows: Iterable[Iterable[float | None]]) -> list[float]:
    return [value for row in rows for value in row if value is not None]


def _span(rows: Iterable[Iterable[float | None]]) -> str | None:
    """From the smallest to the largest value in per cent, None where there is none."""
    values = _values(rows)
    if not values:
        return None
    low, high = percent(min(values)), percent(max(values))
    return high if low == high else f"{low.removesuffix(' %')} to {high}"


def _most(rows: Iterable[Iterable[float | None]]) -> str:
    """For how much of a band's strength nothing is stated, at worst."""
    most = max(_values(rows), default=0.0)
    return f" (not stated for up to {percent(most)} of a band)" if most > 0.0 else ""


def size(n_bytes: float | None) -> str:
    """A number of bytes for people."""
    if n_bytes is None:
        return "unknown"
    for unit in ("B", "kB", "MB"):
        if n_bytes < 1000.0:
            return f"{n_bytes:.3g} {unit}"
        n_bytes /= 1000.0
    return f"{n_bytes:.3g} GB"


def duration(seconds: float) -> str:
    """A time for people."""
    if seconds < 100.0:
        return f"{seconds:.2g} s"
    if seconds < 6000.0:
        return f"{seconds / 60.0:.0f} min"
    return f"{seconds / 3600.0:.1f} h"
