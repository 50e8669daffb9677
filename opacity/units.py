"""Conversions at the door: everything inside is cm-1, K, bar and cm2 per molecule.

Band strengths are published in many units; the temperature meant by an "atm" is part of
the unit's name here, because mixing up 273.15 K and 296 K is an error of 8.4 %.
"""

from __future__ import annotations

from collections.abc import Mapping

from opacity.constants import AVOGADRO, LOSCHMIDT
from opacity.errors import InputError, problem

_KM_PER_MOL = 1e5 / AVOGADRO

BAND_STRENGTH_UNITS: dict[str, float] = {
    "cm/molecule": 1.0,
    "km/mol": _KM_PER_MOL,
    "cm/mol": 1.0 / AVOGADRO,
    "cm-2 atm-1 (273.15 K)": 1.0 / LOSCHMIDT,
    "cm-2 atm-1 (296 K)": 296.0 / 273.15 / LOSCHMIDT,
    "cm-2 atm-1 (300 K)": 300.0 / 273.15 / LOSCHMIDT,
    "cm-2 amagat-1": 1.0 / LOSCHMIDT,
}
"""Factor from each unit of integrated band strength to cm per molecule."""


def band_strength_to_cm_per_molecule(value: float, unit: str) -> float:
    """An integrated band strength in one of `BAND_STRENGTH_UNITS` as cm per molecule.

    Raises InputError for a unit that is not in the table.
    """
    if unit not in BAND_STRENGTH_UNITS:
        allowed = ", ".join(f'"{name}"' for name in BAND_STRENGTH_UNITS)
        raise InputError(problem("unit", "unknown unit of band strength", expected=allowed, found=f'"{unit}"'))
    return value * BAND_STRENGTH_UNITS[unit]


CROSS_SECTION_UNITS = ("cm2/molecule", "m2/molecule", "cm2/g")
"""Units of cross-section that are understood; the last one is an opacity by mass and needs a molecule's."""

SPECTRAL_UNITS: Mapping[str, float | None] = {"cm-1": None, "um": 1e4, "nm": 1e7}
"""Units of a spectral axis: wavenumbers, or by what a vacuum wavelength is to be divided to be one."""


def cross_section_factor(unit: str, mass: float | None = None) -> float:
    """By what a cross-section in one of `CROSS_SECTION_UNITS` is multiplied to be in cm2 per molecule.

    `mass` (g/mol) is needed for cm2/g alone.  Raises InputError for another unit, or without a mass where it is needed.
    """
    if unit not in CROSS_SECTION_UNITS:
        allowed = ", ".join(f'"{name}"' for name in CROSS_SECTION_UNITS)
        raise InputError(problem("unit", "unknown unit of cross-section", expected=allowed, found=f'"{unit}"'))
    if unit != "cm2/g":
        return 1.0 if unit == "cm2/molecule" else 1e4
    if mass is None:
        raise InputError(problem("mass", "not known", expected="the molecule's mass in g/mol, for the unit cm2/g"))
    return mass / AVOGADRO
