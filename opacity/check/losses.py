"""Strength that a table does not hold: beyond the cut-off, and beyond the ends of its grid."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from opacity.check.closure import strength_between
from opacity.check.spectra import Nodes
from opacity.cross_sections.source import LineSource
from opacity.recipe.model import Profile
from opacity.tables.curves import spread

_FAR = 1e9
"""Wavenumbers (cm-1) beyond every cut-off."""


@dataclass(frozen=True)
class Loss:
    """Shares of the strength of all lines in reach that one node lacks; parts are None where only `whole` is known.

    `cutoff` lies beyond the cut-off, or was taken off with the plinth or by chi factors; `ends` beyond the grid's ends.
    """

    temperature: float
    pressure: float
    whole: float
    cutoff: float | None = None
    ends: float | None = None


def some_nodes(nodes: Nodes) -> list[tuple[float, float]]:
    """Up to nine nodes (K, bar): ends and middles of a grid, or some along a profile."""
    t, p = nodes.temperature, nodes.pressure
    if nodes.profile:
        return [(float(t[i]), float(p[i])) for i in spread(t.size, 9)]
    return [(float(t[i]), float(p[j])) for i in spread(t.size, 3) for j in spread(p.size, 3)]


def losses(
    nodes: Sequence[tuple[float, float]], source: LineSource, between: tuple[float, float], profile: Profile
) -> tuple[Loss, ...]:
    """What the nodes lack of their lines between two wavenumbers (cm-1), from the lines themselves."""
    strength, within, inside = [0.0] * len(nodes), [0.0] * len(nodes), [0.0] * len(nodes)
    for lines in source.stretches():
        for temperature in dict.fromkeys(temperature for temperature, _ in nodes):
            columns = lines.at_temperature(temperature)
            for number, (at, pressure) in enumerate(nodes):
                if at == temperature:
                    strength[number] += float(columns.strength.sum())
                    within[number] += strength_between(columns, pressure, (-_FAR, _FAR), profile)
                    inside[number] += strength_between(columns, pressure, between, profile)
    rows = zip(nodes, strength, within, inside, strict=True)
    return tuple(Loss(t, p, 1.0 - c / a, 1.0 - b / a, (b - c) / a) for (t, p), a, b, c in rows if a > 0.0)


def losses_of_accounts(table: Nodes, closure: Sequence[dict[str, Any]]) -> tuple[Loss, ...]:
    """The same from the accounts that closure keeps of each node, which tell the whole loss alone."""
    wanted = some_nodes(table)
    found = []
    for one in closure:
        node = (float(one["temperature"]), float(one["pressure"]))
        if node in wanted and one["strength"] > 0.0:
            found.append(Loss(*node, 1.0 - one["in_reach"] / one["strength"]))
    return tuple(found)
