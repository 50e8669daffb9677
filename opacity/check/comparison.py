"""What a comparison of two tables says, as frozen values.  Ratios are A over B, differences A / B - 1."""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass
from typing import Any

from opacity.check.explain import Explanation
from opacity.check.result import finite


@dataclass(frozen=True)
class Place:
    """A point (cm-1, K, bar) and both values there, cm2/molecule; `difference` is a / b - 1."""

    wavenumber: float
    temperature: float
    pressure: float
    a: float
    b: float
    difference: float


@dataclass(frozen=True)
class TransmissionPlace:
    """A band (cm-1), node (K, bar) and column (molecules cm-2), and both tables' transmission there."""

    lower: float
    upper: float
    temperature: float
    pressure: float
    column: float
    a: float
    b: float


@dataclass(frozen=True)
class NodeComparison:
    """Two tables at one temperature (K) and pressure (bar).

    By band: `a` and `b`, integrals over wavenumber (cm/molecule) or, where a table of k-coefficients is compared, means
    (cm2/molecule), and their `ratio`, None where both are 0 and infinite where only B is.  By point, None for
    k-coefficients: the difference of largest size and the median of the sizes where neither is 0, and how many points
    only one of them has at 0 (`only_a` counts those where only A is above 0).  `transmission` is the largest difference
    of a band's transmission between two tables of k-coefficients.
    """

    temperature: float
    pressure: float
    a: tuple[float, ...]
    b: tuple[float, ...]
    ratio: tuple[float | None, ...]
    largest: float | None = None
    median: float | None = None
    only_a: int = 0
    only_b: int = 0
    transmission: float | None = None

    @property
    def furthest(self) -> float:
        """How far the ratio of a band is from 1 at most."""
        return max((abs(one - 1.0) for one in self.ratio if one is not None), default=0.0)


@dataclass(frozen=True)
class Comparison:
    """How far two tables are apart.

    `quantity` is what is compared, `nodes_compared` and `points_compared` say at which nodes and points (the latter is
    empty for k-coefficients); `notes` are what has to be known besides.  `bands` (cm-1) in order; `nodes` in A's order;
    `worst` the places of the largest differences by point, largest first, and `worst_transmission` that between two
    tables of k-coefficients.  `explanation` tells the lines at the first of the worst places, where A's
    recipe is at hand.
    """

    a: str
    b: str
    quantity: str
    nodes_compared: str
    points_compared: str
    notes: tuple[str, ...]
    bands: tuple[tuple[float, float], ...]
    nodes: tuple[NodeComparison, ...]
    worst: tuple[Place, ...] = ()
    worst_transmission: TransmissionPlace | None = None
    explanation: Explanation | None = None

    @property
    def largest(self) -> float | None:
        """The difference of largest size by point at all nodes, None where there is none."""
        found = [one.largest for one in self.nodes if one.largest is not None]
        return max(found, key=abs) if found else None

    @property
    def median(self) -> float | None:
        """The middle one of the nodes' medians, None where there is none."""
        found = sorted(one.median for one in self.nodes if one.median is not None)
        return found[len(found) // 2] if found else None

    @property
    def worst_node(self) -> NodeComparison:
        """The node with the ratio of a band furthest from 1; among equals, with the largest difference by point."""
        return max(self.nodes, key=lambda one: (one.furthest, abs(one.largest or 0.0), one.transmission or 0.0))

    def beyond(self, within: float) -> int:
        """How many ratios of bands, at all nodes, are further from 1 than `within`."""
        ratios = [ratio for node in self.nodes for ratio in node.ratio if ratio is not None]
        # Rounding of a ratio must not decide.
        return sum(not abs(ratio - 1.0) <= within * (1.0 + 1e-12) for ratio in ratios)

    def as_dict(self) -> dict[str, Any]:
        """The comparison as plain values for JSON."""
        found = asdict(self) | {"largest": self.largest, "median": self.median}
        return dict(finite(found))


def ratio_of(a: float, b: float) -> float | None:
    """a / b; infinite where only b is 0, None where both are."""
    if b > 0.0:
        return a / b
    return None if a == 0.0 else math.inf
