"""A table against the published bands that lie in its range and that its recipe does not name."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from opacity.check.band_strength import SANITY_FACTOR, STANDARD_DEVIATIONS, check_band, choose_pressure
from opacity.check.closure import Closure, strength_between
from opacity.check.result import CANNOT_JUDGE, CheckResult
from opacity.check.spectra import Spectra
from opacity.cross_sections.source import LineSource
from opacity.molecule.published_bands import FROM_MEMORY, PublishedBand, published_bands
from opacity.recipe.model import BandStrength, Profile, Recipe

_MEMORY = "from memory"
WINGS_SHARE = 0.25
"""A band is judged where wings crossing its ends make no more than this share of what is accepted."""


@dataclass(frozen=True)
class BandDifference:
    """How far a table is from a published band, relative; None where it cannot be judged.

    `deviation` is the published standard deviation, relative, None where only a factor can be judged.
    """

    name: str
    difference: float | None
    deviation: float | None
    in_recipe: bool

    @property
    def accepted(self) -> tuple[float, float]:
        """From how far below to how far above agrees."""
        if self.deviation is None:
            return 1.0 / SANITY_FACTOR - 1.0, SANITY_FACTOR - 1.0
        return -STANDARD_DEVIATIONS * self.deviation, STANDARD_DEVIATIONS * self.deviation


def other_bands(
    table: Spectra, recipe: Recipe, source: LineSource, accounts: Sequence[Closure]
) -> list[tuple[BandStrength, CheckResult]]:
    """Each published band of the molecule inside the table's wavenumbers and temperatures, judged as the recipe's are.

    `accounts` are those of the nodes, from the same lines.
    """
    found = []
    for published in published_bands(recipe.molecule.formula):
        band = _as_asked(published)
        if band is None or not _inside(band, table) or any(_same(band, one) for one in recipe.band_strengths):
            continue
        pressure = choose_pressure(band, accounts, source, recipe.profile)
        row = check_band(band, table, pressure, source, recipe.profile, None, recipe.abundance)
        found.append((band, row if pressure is None else _if_whole(row, band, pressure, source, recipe.profile)))
    return found


def _if_whole(
    row: CheckResult, band: BandStrength, pressure: float, source: LineSource, profile: Profile
) -> CheckResult:
    """The row, unless wings that cross the ends of the band's range change its integral by too much to judge it.

    A recipe's author chooses range and grid for each other; here a range that is a line wide may meet any table.
    """
    whole, within = 0.0, 0.0
    for lines in source.stretches():
        columns = lines.at_temperature(band.temperature)
        first = np.searchsorted(columns.wavenumber, band.range[0])
        last = np.searchsorted(columns.wavenumber, band.range[1], side="right")
        whole += float(np.sum(columns.strength[first:last]))
        within += strength_between(columns, pressure, band.range, profile)
    change = within / whole - 1.0 if whole > 0.0 else 0.0
    if row.limit is None or abs(change) <= WINGS_SHARE * row.limit:
        return row
    detail = f"at {pressure:.3g} bar, the best node for it, wings that cross its ends change the band by {change:+.1%}"
    return CheckResult(row.check, CANNOT_JUDGE, f"{detail}; {band.source}")


def _as_asked(published: PublishedBand) -> BandStrength | None:
    """A published band as a recipe would ask for it; None where no range holds it alone."""
    if published.range is None:
        return None
    source = published.source
    if published.status == FROM_MEMORY and not source.lower().startswith(_MEMORY):
        source = f"{_MEMORY}: {source}"
    return BandStrength(
        name=published.name,
        range=published.range,
        strength=published.strength,
        unit=published.unit,
        temperature=published.temperature,
        uncertainty=published.uncertainty,
        source=source,
        isotopologue=published.isotopologue or "natural",
    )


def _inside(band: BandStrength, table: Spectra) -> bool:
    nu, temperature = table.wavenumber, table.temperature
    return bool(
        nu[0] <= band.range[0]
        and band.range[1] <= nu[-1]
        and temperature.min() <= band.temperature <= temperature.max()
    )


def _same(one: BandStrength, other: BandStrength) -> bool:
    return (one.range, one.strength, one.unit) == (other.range, other.strength, other.unit)


def difference_of(band: Mapping[str, Any] | BandStrength, row: CheckResult, in_recipe: bool) -> BandDifference:
    """The band's difference, from its row of results; `band` is one of a recipe, or its entry there."""
    entry = band if isinstance(band, Mapping) else {"uncertainty": band.uncertainty, "source": band.source}
    known = entry.get("uncertainty")
    rough = not isinstance(known, int | float) or str(entry.get("source", "")).lower().startswith(_MEMORY)
    name = row.check.removeprefix("band ")
    return BandDifference(name, row.value, None if rough else float(known), in_recipe)  # type: ignore[arg-type]
