"""Lines made ready for computing: abundances applied, broadening resolved, partition functions at hand.

Both the exact sum and the kernels take what `PreparedLines.at` gives, so that they differ in the sum alone.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.arguments import DefaultWidth
from opacity.errors import InputError, MoleculeError, problem
from opacity.grids import FloatArray
from opacity.kernels.line_strength import strengths_in_one_pass
from opacity.kernels.line_width import (
    LOWEST_SHIFTED,
    doppler_share,
    pressure_half_width,
    shifted_centre,
)
from opacity.line_list.ledger import Ledger
from opacity.line_list.model import LineList, StrengthBasis
from opacity.molecule import partition_function as pf
from opacity.molecule.broadening import Assumption, LineBroadening, resolve_broadening
from opacity.molecule.isotopologue import Isotopologue, isotopologues_of

PartitionChoice = str | Path | Mapping[str, pf.PartitionFunction]
"""A TIPS edition, a file of T and Q, or partition functions by isotopologue."""


@dataclass(frozen=True)
class NodeLines:
    """Lines at one temperature and pressure, each (n_lines,): cm-1 and cm/molecule, half-widths HWHM.

    `wavenumber` is the unshifted one that the cut-off counts from, `centre` the shifted one.
    """

    temperature: float
    pressure: float
    wavenumber: FloatArray
    centre: FloatArray
    strength: FloatArray
    doppler: FloatArray
    lorentz: FloatArray

    def per_bar(self) -> LinesAtTemperature:
        """Columns that give these lines at 1 bar."""
        reference = np.maximum(self.centre, LOWEST_SHIFTED * self.wavenumber)
        share = self.doppler / np.where(reference > 0.0, reference, 1.0)
        shift = self.centre - self.wavenumber
        return LinesAtTemperature(self.temperature, self.wavenumber, shift, self.strength, self.lorentz, share)


@dataclass(frozen=True)
class LinesAtTemperature:
    """Lines at a temperature and any pressure, each (n_lines,), sorted by `wavenumber`, cm-1.

    `shift` cm-1/bar; `strength` cm/molecule; `lorentz` pressure half-width (HWHM), cm-1/bar; `doppler` Doppler
    half-width (HWHM) as a share of the wavenumber.
    """

    temperature: float
    wavenumber: FloatArray
    shift: FloatArray
    strength: FloatArray
    lorentz: FloatArray
    doppler: FloatArray

    def at(self, pressure: float) -> NodeLines:
        """The lines at a pressure (bar)."""
        centre = shifted_centre(self.wavenumber, self.shift, pressure)
        return NodeLines(
            self.temperature,
            pressure,
            self.wavenumber,
            centre,
            self.strength,
            self.doppler * np.maximum(centre, LOWEST_SHIFTED * self.wavenumber),
            pressure * self.lorentz,
        )


@dataclass(frozen=True)
class PreparedLines:
    """Lines of one species with the choices of isotopologues, partition function and mixture made.

    Arrays are (n_lines,): `strength` in cm/molecule per molecule of the species with the abundances chosen, standing
    for what `basis` says of each isotopologue; `mass` g/mol.
    """

    wavenumber: FloatArray
    strength: FloatArray
    lower_energy: FloatArray
    mass: FloatArray
    isotopologue: NDArray[np.int16]
    isotopologues: tuple[Isotopologue, ...]
    basis: tuple[StrengthBasis, ...]
    partition: tuple[pf.PartitionFunction, ...]
    broadening: LineBroadening
    assumptions: tuple[Assumption, ...]
    ledger: Ledger

    def __len__(self) -> int:
        return int(self.wavenumber.size)

    def part(self, which: slice) -> PreparedLines:
        """Some of the lines, with everything else as it is."""
        broadening = self.broadening
        return replace(
            self,
            wavenumber=self.wavenumber[which],
            strength=self.strength[which],
            lower_energy=self.lower_energy[which],
            mass=self.mass[which],
            isotopologue=self.isotopologue[which],
            broadening=replace(
                broadening,
                gamma=np.ascontiguousarray(broadening.gamma[:, which]),
                exponent=np.ascontiguousarray(broadening.exponent[:, which]),
                shift=broadening.shift[which],
            ),
        )

    def strengths(self, temperature: float) -> FloatArray:
        """S(T) of all lines, cm/molecule, (n_lines,).  Raises MoleculeError where Q is not valid."""
        return np.asarray(self.strengths_at([temperature])[0])

    def strengths_at(self, temperatures: Sequence[float]) -> FloatArray:
        """S(T) of all lines at several temperatures (K), cm/molecule, (n_T, n_lines), in one pass over the lines.

        Raises MoleculeError where a partition function is not valid.
        """
        found = np.empty((len(temperatures), len(self)))
        if not len(self):
            return found
        pairs = list(zip(self.partition, self.basis, strict=True))
        ratio = [
            [(q(one.temperature) if one.holds_partition else 1.0) / q(temperature) for temperature in temperatures]
            for q, one in pairs
        ]
        strengths_in_one_pass(
            found,
            np.array(temperatures, dtype=np.float64),
            self.wavenumber,
            self.lower_energy,
            self.strength,
            self.isotopologue,
            np.array([one.temperature for one in self.basis]),
            np.array(ratio),
        )
        return found

    def at_temperature(self, temperature: float, strength: FloatArray | None = None) -> LinesAtTemperature:
        """The lines at a temperature (K) and any pressure; `strength` spares computing S(T) again."""
        return LinesAtTemperature(
            temperature,
            self.wavenumber,
            self.broadening.shift,
            self.strengths(temperature) if strength is None else strength,
            pressure_half_width(self.broadening.gamma, self.broadening.exponent, temperature, 1.0),
            doppler_share(temperature, self.mass),
        )

    def at(self, temperature: float, pressure: float, strength: FloatArray | None = None) -> NodeLines:
        """The lines at one node (K, bar); `strength` spares computing S(T) again.

        Raises MoleculeError where a partition function is not valid at the temperature.
        """
        return self.at_temperature(temperature, strength).at(pressure)


def prepare(
    lines: LineList,
    *,
    partition_function: PartitionChoice,
    abundance: str | Mapping[str, float],
    broadeners: Mapping[str, float],
    defaults: Mapping[str, DefaultWidth] | None = None,
) -> PreparedLines:
    """Make a line list ready.  Arguments as those of `opacity.cross_section`.

    Raises InputError for an unknown choice, MoleculeError for widths or partition functions that are not to be had.
    """
    _check_mixture(broadeners)
    factors = abundance_factors(lines.isotopologues, lines.basis, abundance, lines.dropped)
    factor = np.array(factors or [0.0])[lines.isotopologue]
    if np.any(factor == 0.0):
        lines = lines.select(factor > 0.0, "isotopologue not in the mixture chosen")
        factor = factor[factor > 0.0]
    masses = np.array([one.mass for one in lines.isotopologues] or [1.0])
    partition = tuple(partition_of(partition_function, one) for one in lines.isotopologues)
    if isinstance(partition_function, Path) and len({one.formula for one in lines.isotopologues}) > 1:
        raise MoleculeError(
            problem(
                "partition_function",
                f"one file serves one isotopologue, and {partition_function.name} is to serve {len(partition)}",
                found=", ".join(one.formula for one in lines.isotopologues),
                remedy="choose a TIPS edition, or fractions or a line list of one isotopologue",
            )
        ).about("partition_function")
    broadening = resolve_broadening(lines.broadeners, broadeners, defaults or {}, len(lines))
    unknown = int(np.count_nonzero(lines.lower_energy < 0.0))
    notes = (Assumption("lower-state energy below 0 (unknown): used as it stands", unknown),) if unknown else ()
    return PreparedLines(
        wavenumber=lines.wavenumber,
        strength=lines.strength * factor,
        lower_energy=lines.lower_energy,
        mass=masses[lines.isotopologue],
        isotopologue=lines.isotopologue,
        isotopologues=lines.isotopologues,
        basis=lines.basis,
        partition=partition,
        broadening=broadening,
        assumptions=notes + broadening.assumptions,
        ledger=lines.ledger,
    )


def _check_mixture(broadeners: Mapping[str, float]) -> None:
    total = sum(broadeners.values())
    if not broadeners or not all(0.0 < x <= 1.0 for x in broadeners.values()) or abs(total - 1.0) > 1e-6:
        raise InputError(
            problem("broadeners", "not mole fractions", expected="values above 0 with sum 1", found=dict(broadeners))
        ).about("broadeners")


def partition_of(choice: PartitionChoice, isotopologue: Isotopologue) -> pf.PartitionFunction:
    """The partition function of an isotopologue: a TIPS edition by name, or a file of T and Q."""
    if isinstance(choice, Mapping):
        if isotopologue.formula not in choice:
            raise MoleculeError(
                problem(
                    "partition_function",
                    f"no states are there to sum for {isotopologue.formula}",
                    expected=f"states of {', '.join(choice)} only",
                    remedy="choose another source",
                )
            ).about("partition_function")
        return choice[isotopologue.formula]
    if isinstance(choice, Path):
        return pf.from_file(choice)
    if isinstance(choice, str) and choice in pf.TIPS_EDITIONS:
        if not isotopologue.known:
            raise MoleculeError(
                problem(
                    "partition_function",
                    f"{choice} does not hold {isotopologue.molecule_formula}",
                    remedy="give a file of T and Q",
                )
            ).about("partition_function")
        return pf.tips(choice, isotopologue)
    expected = " or ".join([*(f'"{name}"' for name in pf.TIPS_EDITIONS), "a Path of a file of T and Q"])
    raise InputError(problem("partition_function", "unknown source", expected=expected, found=f'"{choice}"'))


def abundance_factors(
    isotopologues: tuple[Isotopologue, ...],
    basis: tuple[StrengthBasis, ...],
    abundance: str | Mapping[str, float],
    dropped: tuple[Isotopologue, ...] = (),
) -> list[float]:
    """By what to multiply a list's strengths, isotopologue by isotopologue; 0 leaves its lines out.

    What abundance a list's strengths already hold (the terrestrial one in HITRAN format) is taken out before
    another one is applied.  Fractions may also name what was `dropped` for having no line left.
    """
    formulas = list(dict.fromkeys(one.formula for one in isotopologues))
    if abundance == "pure" and len(formulas) > 1:
        found = ", ".join(formulas)
        raise _wrong_abundance('"pure" needs lines of one isotopologue', expected="one", found=found)
    strangers = [one.formula for one in isotopologues if not one.known and isotopologues_of(one.molecule_formula)]
    if abundance == "terrestrial" and strangers:
        what = f"the terrestrial abundance of {strangers[0]} is not known"
        raise _wrong_abundance(what, expected='"pure", or fractions by isotopologue')
    if isinstance(abundance, str):
        if abundance not in ("terrestrial", "pure"):
            expected = '"terrestrial", "pure" or fractions by isotopologue'
            raise _wrong_abundance("unknown", expected=expected, found=abundance)
    else:
        _check_fractions((*isotopologues, *dropped), abundance)
    return [fraction_of(one, abundance) / of.abundance for one, of in zip(isotopologues, basis, strict=True)]


def _check_fractions(isotopologues: tuple[Isotopologue, ...], abundance: Mapping[str, float]) -> None:
    names = {name for one in isotopologues for name in (one.formula, str(one.local))}
    unknown = sorted(set(abundance) - names)
    if unknown:
        listed = ", ".join(f"{one.formula} ({one.local})" for one in isotopologues)
        raise _wrong_abundance(f"no lines of isotopologue {unknown[0]}", expected=listed or "a list with lines")
    for one in isotopologues:
        if one.formula in abundance and str(one.local) in abundance:
            raise _wrong_abundance(f"{one.formula} is given twice", remedy="name it by formula or by number")
    total = sum(abundance.values())
    if not abundance or not all(0.0 <= x <= 1.0 for x in abundance.values()) or not total <= 1.0 + 1e-6:
        raise _wrong_abundance("not fractions", expected="0 to 1 each, sum at most 1", found=dict(abundance))


def _wrong_abundance(what: str, **parts: Any) -> InputError:
    return InputError(problem("abundance", what, **parts)).about("abundance")


def fraction_of(isotopologue: Isotopologue, abundance: str | Mapping[str, float]) -> float:
    """The fraction of an isotopologue in the species chosen: "terrestrial", "pure" or one of fractions by name."""
    if isinstance(abundance, str):
        return 1.0 if abundance == "pure" else isotopologue.abundance
    return abundance.get(isotopologue.formula, abundance.get(str(isotopologue.local), 0.0))
