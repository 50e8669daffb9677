"""Published integrated strengths of bands, from `band_strengths.csv` beside this file; every row names its source.

Strengths, temperatures and uncertainties are as published, in the units published.  The ranges are chosen here: they
hold the band with its hot bands and those of other isotopologues, so that lines need no assignment; a band that no
range holds alone has none, and is not judged.  Rows whose status is "from memory: sanity only" have no source and find
errors of a factor, not of per cents.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

from opacity.units import band_strength_to_cm_per_molecule

PUBLISHED, QUOTED, FROM_MEMORY = "published", "quoted in a second source", "from memory: sanity only"
STATUSES = (PUBLISHED, QUOTED, FROM_MEMORY)

_FILE = Path(__file__).with_name("band_strengths.csv")


@dataclass(frozen=True)
class PublishedBand:
    """One band: `range` cm-1, None where others overlap it; `strength` in `unit` of `opacity.units`; `temperature` K.

    The strength is per molecule of one `isotopologue` (by hapi's formula), or of the natural mixture where that is
    None.  `uncertainty` is relative, one standard deviation, None where none was published.
    """

    molecule: str
    isotopologue: str | None
    name: str
    range: tuple[float, float] | None
    strength: float
    unit: str
    temperature: float
    uncertainty: float | None
    status: str
    source: str

    @property
    def cm_per_molecule(self) -> float:
        """The strength in cm/molecule."""
        return band_strength_to_cm_per_molecule(self.strength, self.unit)

    @property
    def sanity_only(self) -> bool:
        """Whether only errors of a factor can be seen by it: it is from memory, or has no uncertainty."""
        return self.status == FROM_MEMORY or self.uncertainty is None


@lru_cache(maxsize=1)
def all_published_bands() -> tuple[PublishedBand, ...]:
    """All bands, in the order of the file."""
    with open(_FILE, encoding="utf-8", newline="") as file:
        return tuple(
            PublishedBand(
                molecule=row["molecule"],
                isotopologue=row["isotopologue"] or None,
                name=row["name"],
                range=(float(row["lower"]), float(row["upper"])) if row["lower"] else None,
                strength=float(row["strength"]),
                unit=row["unit"],
                temperature=float(row["temperature"]),
                uncertainty=float(row["uncertainty"]) if row["uncertainty"] else None,
                status=row["status"],
                source=row["source"],
            )
            for row in csv.DictReader(file)
        )


def published_bands(molecule: str) -> tuple[PublishedBand, ...]:
    """The bands of a molecule by its formula (CO, H2O), which may be none."""
    return tuple(band for band in all_published_bands() if band.molecule == molecule)
