"""A table's partition functions beside independent values: both TIPS editions, and the recipe's own file or states."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from opacity.constants import REFERENCE_TEMPERATURE
from opacity.errors import MoleculeError
from opacity.grids import FloatArray
from opacity.molecule.isotopologue import Isotopologue
from opacity.molecule.partition_function import TIPS_EDITIONS, PartitionFunction, tips

POINTS = 121
MOST = 3


@dataclass(frozen=True)
class PartitionValues:
    """Q(T)/Q(296 K) of one isotopologue by one source: relative difference from the source that the table uses.

    `temperature` (n,), K; `difference` (n,), NaN outside the range in which both hold.
    """

    isotopologue: str
    source: str
    used: str
    temperature: FloatArray
    difference: FloatArray

    @property
    def largest(self) -> tuple[float, float]:
        """The largest difference and its temperature (K); NaN where there is none."""
        if not np.any(np.isfinite(self.difference)):
            return math.nan, math.nan
        worst = int(np.nanargmax(np.abs(self.difference)))
        return float(self.difference[worst]), float(self.temperature[worst])


def partition_values(
    isotopologues: Sequence[Isotopologue],
    abundances: Sequence[float],
    used: Sequence[PartitionFunction],
    temperature: FloatArray,
) -> tuple[PartitionValues, ...]:
    """The up to three most abundant isotopologues, each by every edition that the table does not use itself.

    The ratio to 296 K is what strengths at that temperature are scaled with.  Temperatures are those of the table
    (K) and, where it has several, evenly between them.
    """
    first, last = float(temperature.min()), float(temperature.max())
    points = np.linspace(first, last, POINTS) if last > first else np.array([first])
    order = sorted(range(len(isotopologues)), key=lambda number: -abundances[number])[:MOST]
    found = []
    for number in order:
        own = used[number]
        if not own.holds(REFERENCE_TEMPERATURE):
            continue
        for edition in TIPS_EDITIONS:
            try:
                other = tips(edition, isotopologues[number])
            except MoleculeError:
                continue
            if other.source == own.source:
                continue
            difference = _differences(own, other, points)
            if np.any(np.isfinite(difference)):
                found.append(PartitionValues(isotopologues[number].formula, edition, own.source, points, difference))
    return tuple(found)


def _differences(own: PartitionFunction, other: PartitionFunction, points: FloatArray) -> FloatArray:
    """How far the ratios Q(T)/Q(296 K) of `other` are from those of `own`, relative, (n,)."""
    if not other.holds(REFERENCE_TEMPERATURE):
        return np.full(points.size, math.nan)
    scale = own(REFERENCE_TEMPERATURE) / other(REFERENCE_TEMPERATURE)
    both = [own.holds(t) and other.holds(t) for t in points]
    return np.array(
        [
            scale * other(float(t)) / own(float(t)) - 1.0 if good else math.nan
            for t, good in zip(points, both, strict=True)
        ]
    )
