"""How a comparison looks on a terminal."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from opacity.cli import text

if TYPE_CHECKING:
    from opacity.check.comparison import Comparison, NodeComparison
    from opacity.check.explain import Explanation

MOST_ROWS = 20
"""Nodes or bands told one by one; of more the worst are."""


def comparison_text(found: Comparison, within: float | None) -> str:
    """A comparison in words and tables; A over B throughout."""
    parts = [text.facts(_facts(found, within)), _nodes(found), _bands(found)]
    if found.worst:
        parts.append(_places(found))
    if found.explanation is not None and found.explanation.parts:
        parts.append(_lines(found.explanation))
    return "\n\n".join(parts)


def _facts(found: Comparison, within: float | None) -> list[tuple[str, str]]:
    what = f"{found.quantity}, A over B: {found.nodes_compared}"
    facts = [("A", found.a), ("B", found.b), ("compared", what)]
    if found.points_compared:
        facts.append(("points", found.points_compared))
    facts += [("note", one) for one in found.notes]
    ratios = [ratio for node in found.nodes for ratio in node.ratio if ratio is not None]
    kind = "ratio of integrals" if found.quantity == "cross-sections" else "ratio of means"
    spread = f"{kind} {_ratio(min(ratios))} to {_ratio(max(ratios))}" if ratios else "both 0 everywhere"
    facts.append(("bands", f"{text.counted(len(found.bands), 'band')}, {spread}"))
    if found.largest is not None:
        facts.append(
            ("by point", f"largest difference {_signed(found.largest)}, median of its size {found.median:.1e}")
        )
    for name, other, count in (
        ("A", "B", sum(node.only_a for node in found.nodes)),
        ("B", "A", sum(node.only_b for node in found.nodes)),
    ):
        if count:
            facts.append(
                ("zeros", f"{text.counted(count, 'value')} of {name} where {other} is 0: not in the differences")
            )
    place = found.worst_transmission
    if place is not None:
        facts.append(
            (
                "transmission",
                f"apart by at most {abs(place.a - place.b):.1e} ({place.a:.4f} and {place.b:.4f}), in the band"
                f" {place.lower:.8g} to {place.upper:.8g} cm-1 at {place.temperature:.6g} K, {place.pressure:.4g} bar"
                f" and {place.column:.2e} molecules cm-2",
            )
        )
    if within is not None:
        facts.append(("within", _within(found, within, len(ratios))))
    return facts


def _within(found: Comparison, within: float, count: int) -> str:
    beyond = found.beyond(within)
    if not beyond:
        return f"yes: every ratio of bands ({count}) is within {within:g} of 1"
    furthest = found.worst_node.furthest
    worst = "in one band only B is 0" if math.isinf(furthest) else f"the worst is {furthest:.2g} from 1"
    return f"NO: {beyond} of {count} ratios of bands are further than {within:g} from 1; {worst}"


def _ratio(ratio: float | None) -> str:
    if ratio is None:
        return "both 0"
    if math.isinf(ratio):
        return "B is 0"
    return f"{ratio:.6f}" if 1e-3 <= ratio < 1e4 else f"{ratio:.3e}"


def _signed(difference: float | None) -> str:
    return "-" if difference is None else f"{difference:+.2e}"


def _nodes(found: Comparison) -> str:
    nodes = list(found.nodes)
    worst_first = sorted(nodes, key=lambda one: (one.furthest, abs(one.largest or 0.0)), reverse=True)
    shown = nodes if len(nodes) <= MOST_ROWS else worst_first[:MOST_ROWS]
    rows = [f"{'K':>10} {'bar':>10}  {'lowest ratio':>12} {'highest':>12}  {_HEADS[found.quantity]}"]
    rows += [
        f"{one.temperature:10.6g} {one.pressure:10.4g}  {_lowest(one)} {_highest(one)}  {_of_node(found, one)}"
        for one in shown
    ]
    if len(shown) < len(nodes):
        rows.append(f"the {len(shown)} worst of {len(nodes)} nodes; --json tells all")
    return "\n".join(rows)


_HEADS = {
    "cross-sections": f"{'largest diff.':>13} {'median':>9}",
    "band means": f"{'transmission':>13}",
}


def _of_node(found: Comparison, node: NodeComparison) -> str:
    if found.quantity != "cross-sections":
        return f"{'-' if node.transmission is None else f'{node.transmission:.1e}':>13}"
    median = "-" if node.median is None else f"{node.median:.1e}"
    return f"{_signed(node.largest):>13} {median:>9}"


def _lowest(node: NodeComparison) -> str:
    return f"{_ratio(min((one for one in node.ratio if one is not None), default=None)):>12}"


def _highest(node: NodeComparison) -> str:
    return f"{_ratio(max((one for one in node.ratio if one is not None), default=None)):>12}"


def _bands(found: Comparison) -> str:
    ranges = []
    for number, (lower, upper) in enumerate(found.bands):
        ratios = [node.ratio[number] for node in found.nodes]
        there = [one for one in ratios if one is not None]
        furthest = max((abs(one - 1.0) for one in there), default=0.0)
        ranges.append((furthest, lower, upper, min(there, default=None), max(there, default=None)))
    shown = ranges if len(ranges) <= MOST_ROWS else sorted(ranges, reverse=True)[:MOST_ROWS]
    rows = [f"{'from cm-1':>12} {'to':>12}  {'lowest ratio':>12} {'highest':>12}"]
    for _, lower, upper, lowest, highest in shown:
        rows.append(f"{lower:12.8g} {upper:12.8g}  {_ratio(lowest):>12} {_ratio(highest):>12}")
    if len(shown) < len(ranges):
        rows.append(f"the {len(shown)} worst of {len(ranges)} bands; --json tells all")
    return "\n".join(rows)


def _places(found: Comparison) -> str:
    rows = [f"{'worst at cm-1':>14} {'K':>10} {'bar':>10}  {'A':>12} {'B':>12}  {'difference':>10}"]
    rows += [
        f"{one.wavenumber:14.10g} {one.temperature:10.6g} {one.pressure:10.4g}  {one.a:12.5e} {one.b:12.5e}"
        f"  {_signed(one.difference):>10}"
        for one in found.worst
    ]
    return "\n".join(rows)


def _lines(one: Explanation) -> str:
    rows = [f"lines of A at {one.wavenumber:.10g} cm-1, {one.temperature:.6g} K, {one.pressure:.4g} bar:"]
    rows += [
        f"  {part.wavenumber:.6f} cm-1, {text.percent(part.share)} of the exact sum {one.exact:.4e},"
        f" {part.isotopologue}, {part.file}:{part.record}"
        for part in one.parts
    ]
    return "\n".join(rows)
