"""Published band strengths against the lines of a list themselves, summed over the band: no table is needed.

It only reports: a list may hold more or less than a band for good reasons, and whoever uses it should know.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from opacity.check.band_strength import SANITY_FACTOR, STANDARD_DEVIATIONS
from opacity.check.result import AGREES, CANNOT_JUDGE
from opacity.cross_sections.prepare import fraction_of
from opacity.errors import MoleculeError
from opacity.kernels.line_strength import strength_ratio
from opacity.line_list.model import LineList, StrengthBasis
from opacity.molecule.isotopologue import Isotopologue, isotopologues_of
from opacity.molecule.partition_function import PartitionFunction, tips
from opacity.molecule.published_bands import FROM_MEMORY, PUBLISHED, PublishedBand, published_bands
from opacity.recipe.model import BandStrength, Recipe

MORE = "more than the band allows"
LESS = "less than the band"

_EDITION = "TIPS-2021"
_STRETCHES, _GAP = 64, 8
"""A band's range is looked at in so many stretches; so many without a line, between others with lines, are a gap."""


@dataclass(frozen=True)
class Wanted:
    """A band and the mixture of isotopologues that it is of, unless it is of one: as a recipe's `abundance`."""

    band: PublishedBand
    abundance: str | dict[str, float] = "terrestrial"

    def fraction(self, one: Isotopologue) -> float:
        """How much an isotopologue counts in the band's strength."""
        name = self.band.isotopologue
        return fraction_of(one, self.abundance) if name is None else float(one.is_called(name))

    @property
    def whole(self) -> float:
        """The sum of the fractions of all isotopologues."""
        if self.band.isotopologue is not None or self.abundance == "pure":
            return 1.0
        if isinstance(self.abundance, str):
            return sum(one.abundance for one in isotopologues_of(self.band.molecule)) or 1.0
        return sum(self.abundance.values())


@dataclass(frozen=True)
class ListBand:
    """What a list holds of a band: strengths in cm/molecule at `temperature` (K); `difference` relative.

    `rough` says that only errors of a factor can be seen by the band.

    `deviations` is the difference in published uncertainties, None where none was published.
    """

    name: str
    verdict: str
    detail: str
    source: str
    status: str
    temperature: float
    published: float
    found: float | None = None
    difference: float | None = None
    deviations: float | None = None
    rough: bool = False

    @property
    def words(self) -> str:
        """The verdict for people: a value that finds errors of a factor alone does not agree to per cents."""
        if self.verdict != AGREES or not self.rough:
            return self.verdict
        what = "a value from memory" if self.status == FROM_MEMORY else "a value without uncertainty"
        return f"within a factor {SANITY_FACTOR:g} of {what}"

    def as_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return asdict(self)


def bands_of(molecule: str, recipe: Recipe | None = None) -> list[Wanted]:
    """The published bands of a molecule, and those of a recipe, per molecule of its mixture of isotopologues."""
    found = [Wanted(band) for band in published_bands(molecule)]
    if recipe is not None:
        for band in recipe.band_strengths:
            mixture = "terrestrial" if band.isotopologue == "natural" else recipe.abundance
            found.append(Wanted(_of_recipe(band, molecule), mixture))
    return found


def _of_recipe(band: BandStrength, molecule: str) -> PublishedBand:
    of = None if band.isotopologue == "natural" else band.isotopologue
    status = FROM_MEMORY if band.sanity_only and band.uncertainty is not None else PUBLISHED
    return PublishedBand(
        molecule, of, f"{band.name} (recipe)", band.range, band.strength, band.unit, band.temperature,
        band.uncertainty, status, band.source,
    )  # fmt: skip


class BandSums:
    """The strengths of a list at each band's temperature, summed over its range, from parts of the list.

    `partition` are partition functions by isotopologue that go before those of TIPS-2021.
    """

    def __init__(self, wanted: Sequence[Wanted], partition: Mapping[str, PartitionFunction] | None = None) -> None:
        self._wanted = tuple(wanted)
        self._partition = dict(partition or {})
        self._sums = np.zeros(len(self._wanted))
        self._has_lines = np.zeros((len(self._wanted), _STRETCHES), dtype=bool)
        self._faults: dict[int, str] = {}
        self._reach: dict[Isotopologue, tuple[float, float]] = {}

    def add(self, lines: LineList) -> None:
        """Take in some lines, sorted by wavenumber."""
        for number, one in enumerate(lines.isotopologues):
            nu = lines.wavenumber[lines.isotopologue == number]
            if nu.size:
                self.reaches(one, float(nu[0]), float(nu[-1]))
        for place, wanted in enumerate(self._wanted):
            if wanted.band.range is None:
                continue
            low, high = np.searchsorted(lines.wavenumber, wanted.band.range)
            if high > low:
                self._note_places(place, wanted.band.range, wanted, lines, slice(low, high))
                try:
                    self._sums[place] += self._sum(lines, slice(low, high), wanted)
                except MoleculeError as error:
                    self._faults[place] = str(error)

    def reaches(self, isotopologue: Isotopologue, low: float, high: float) -> None:
        """Note that the list has lines of an isotopologue from one wavenumber to another (cm-1)."""
        known = self._reach.get(isotopologue, (low, high))
        self._reach[isotopologue] = (min(known[0], low), max(known[1], high))

    def _note_places(
        self, place: int, between: tuple[float, float], wanted: Wanted, lines: LineList, part: slice
    ) -> None:
        """Note which stretches of a band's range have lines that count."""
        counts = np.array([wanted.fraction(one) > 0.0 for one in lines.isotopologues])
        nu = lines.wavenumber[part][counts[lines.isotopologue[part]]]
        low, high = between
        self._has_lines[place, np.minimum((nu - low) / (high - low) * _STRETCHES, _STRETCHES - 1).astype(int)] = True

    def _gap(self, place: int, between: tuple[float, float]) -> tuple[float, float] | None:
        """The widest gap (cm-1) between lines within a band's range, None where there is none worth a word."""
        filled = np.flatnonzero(self._has_lines[place])
        steps = np.diff(filled)
        if not steps.size or steps.max() <= _GAP:
            return None
        before = int(filled[steps.argmax()])
        low, high = between
        width = (high - low) / _STRETCHES
        return low + (before + 1) * width, low + (before + int(steps.max())) * width

    def _sum(self, lines: LineList, part: slice, wanted: Wanted) -> float:
        temperature = wanted.band.temperature
        factor = np.zeros(len(lines.isotopologues))
        for number in np.unique(lines.isotopologue[part]):
            one, basis = lines.isotopologues[number], lines.basis[number]
            weight = wanted.fraction(one) / basis.abundance
            if weight > 0.0:
                factor[number] = weight * self._partition_ratio(one, basis, temperature)
        index = lines.isotopologue[part]
        reference = np.array([one.temperature for one in lines.basis])[index]
        nu, energy, strength = lines.wavenumber[part], lines.lower_energy[part], lines.strength[part]
        ratio = strength_ratio(nu, energy, temperature, factor[index], reference)
        # A strength of 0 stays 0 however large the factor of its energy.
        return float(np.sum(np.where(strength > 0.0, strength * ratio, 0.0)))

    def _partition_ratio(self, one: Isotopologue, basis: StrengthBasis, temperature: float) -> float:
        """Q(T0)/Q(T), or 1/Q(T) for strengths that are not divided by Q."""
        if basis.holds_partition and basis.temperature == temperature:
            return 1.0
        q = self._partition.get(one.formula)
        if q is None or not q.holds(temperature):
            q = tips(_EDITION, one)
        return (q(basis.temperature) if basis.holds_partition else 1.0) / q(temperature)

    def results(self) -> list[ListBand]:
        """What the list holds of each band."""
        return [self._judge(place, wanted) for place, wanted in enumerate(self._wanted)]

    def _judge(self, place: int, wanted: Wanted) -> ListBand:
        band, published = wanted.band, wanted.band.cm_per_molecule

        def result(verdict: str, detail: str, *numbers: float | None) -> ListBand:
            words = f"{detail}; {band.temperature:g} K; {_source(band)}"
            found, difference, deviations = (*numbers, None, None, None)[:3]
            return ListBand(
                band.name, verdict, words, band.source, band.status, band.temperature, published, found,
                difference, deviations, band.sanity_only,
            )  # fmt: skip

        if band.range is None:
            return result(CANNOT_JUDGE, "no range holds it alone: other bands overlap it")
        fractions = {one: wanted.fraction(one) for one in self._reach}
        share = sum(fractions.values()) / wanted.whole
        if share <= 0.0:
            return result(CANNOT_JUDGE, f"the list holds no line of {band.isotopologue or 'its isotopologues'}")
        if place in self._faults:
            return result(CANNOT_JUDGE, self._faults[place])
        found = float(self._sums[place])
        difference = found / published - 1.0
        deviations = None if band.sanity_only or band.uncertainty is None else difference / band.uncertainty
        above, below = _limits(band)
        main = max(fractions, key=lambda one: fractions[one])
        low, high = self._reach[main]
        covered = low <= band.range[0] and high >= band.range[1]
        words = f"{found:.4e} against {published:.4e} cm/molecule, "
        if deviations is not None:
            words += f"{100.0 * difference:+.2f} % ({abs(deviations):.1f} uncertainties)"
        else:
            words += f"{found / published:.2g} times as much"
        if share < 1.0 - 1e-6 and len(self._reach) < len(isotopologues_of(band.molecule)):
            words += f"; the list's isotopologues make up {100.0 * share:.4g} % of the mixture"
        if difference > above:
            return result(MORE, words, found, difference, deviations)
        if not covered:
            ends = f"from {low:.6g} to {high:.6g} cm-1"
            detail = (
                f"the list does not cover the range: its lines of {main.formula} reach {ends},"
                f" the band {band.range[0]:g} to {band.range[1]:g} cm-1"
            )
            return result(CANNOT_JUDGE, f"{detail}; in it {words}" if found else detail, found, difference, deviations)
        # What the isotopologues that the list lacks would hold is not missing from it.
        if found / (published * min(share, 1.0)) - 1.0 >= below:
            return result(AGREES, words, found, difference, deviations)
        gap = self._gap(place, band.range)
        if gap is not None:
            detail = f"the list has no lines between {gap[0]:.6g} and {gap[1]:.6g} cm-1; in the range {words}"
            return result(CANNOT_JUDGE, detail, found, difference, deviations)
        return result(LESS, words, found, difference, deviations)


def _limits(band: PublishedBand) -> tuple[float, float]:
    """How far above (positive) and below (negative) a band a list may be, relative."""
    if band.sanity_only or band.uncertainty is None:
        return SANITY_FACTOR - 1.0, 1.0 / SANITY_FACTOR - 1.0
    limit = STANDARD_DEVIATIONS * band.uncertainty
    return limit, -limit


def _source(band: PublishedBand) -> str:
    if band.status == PUBLISHED:
        no_limit = " (no uncertainty: a factor of 1.5 is taken to agree)" if band.uncertainty is None else ""
        return band.source + no_limit
    return (
        f"{band.status}"
        if band.source.lower().startswith(("none", "from memory"))
        else f"{band.source} ({band.status})"
    )
