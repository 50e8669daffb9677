"""Lines of several species in one gas, as if they were one list: strengths times mole fractions."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

import numpy as np

from opacity.cross_sections.prepare import PreparedLines
from opacity.cross_sections.source import LineSource
from opacity.grids import FloatArray
from opacity.line_list.ledger import Ledger
from opacity.molecule.broadening import Assumption, LineBroadening

_SAMPLED = 20_000
"""Wavenumbers that stand for all lines, where they are not all at hand."""


@dataclass(frozen=True)
class MixedLines:
    """Sources of lines with the mole fraction of each; cross-sections are per molecule of the mixture."""

    parts: tuple[tuple[LineSource, float], ...]

    @property
    def ledger(self) -> Ledger:
        """The account of all lists."""
        whole = Ledger()
        for source, _ in self.parts:
            whole.add(source.ledger)
        return whole

    @property
    def assumptions(self) -> tuple[Assumption, ...]:
        """What was assumed for how many lines."""
        return tuple(one for source, _ in self.parts for one in source.assumptions)

    def __len__(self) -> int:
        return sum(len(source) for source, _ in self.parts)

    def window(self, lower: float, upper: float) -> PreparedLines:
        """The lines from one wavenumber to another (cm-1), ends included."""
        return mixed([(source.window(lower, upper), fraction) for source, fraction in self.parts])

    def count(self, lower: float, upper: float) -> int:
        """How many lines that window holds."""
        return sum(source.count(lower, upper) for source, _ in self.parts)

    def stretches(self) -> Iterator[PreparedLines]:
        """All lines, each once, those of one species after those of another."""
        for source, fraction in self.parts:
            for lines in source.stretches():
                yield mixed([(lines, fraction)])

    def sample(self) -> FloatArray:
        """Wavenumbers of some of the lines (n,), of each species as many as its share of the lines."""
        samples = [source.sample() for source, _ in self.parts]
        # The species of which the fewest are at hand, beside its lines, says how many of all may stand for all.
        share = min(
            (found.size / len(one) for (one, _), found in zip(self.parts, samples, strict=True) if len(one)),
            default=1.0,
        )
        share = min(share, _SAMPLED / max(len(self), 1))
        found = []
        for (source, _), places in zip(self.parts, samples, strict=True):
            count = min(max(round(share * len(source)), 2), places.size)
            found.append(places[np.linspace(0, places.size - 1, count).astype(np.intp)])
        return np.sort(np.concatenate(found))


def mixed(parts: Sequence[tuple[PreparedLines, float]]) -> PreparedLines:
    """Prepared lines of several species as one, in order; strengths are per molecule of the mixture."""
    first, ledger = parts[0][0], Ledger()
    for lines, _ in parts:
        ledger.add(lines.ledger)
    if len(parts) == 1:
        return replace(first, strength=parts[0][1] * first.strength)
    nu = np.concatenate([lines.wavenumber for lines, _ in parts])
    order = np.argsort(nu, kind="stable")
    offsets = np.cumsum([0, *(len(lines.isotopologues) for lines, _ in parts)])
    isotopologue = [lines.isotopologue + offset for (lines, _), offset in zip(parts, offsets[:-1], strict=True)]
    return PreparedLines(
        wavenumber=nu[order],
        strength=np.concatenate([fraction * lines.strength for lines, fraction in parts])[order],
        lower_energy=np.concatenate([lines.lower_energy for lines, _ in parts])[order],
        mass=np.concatenate([lines.mass for lines, _ in parts])[order],
        isotopologue=np.concatenate(isotopologue).astype(np.int16)[order],
        isotopologues=tuple(one for lines, _ in parts for one in lines.isotopologues),
        basis=tuple(one for lines, _ in parts for one in lines.basis),
        partition=tuple(one for lines, _ in parts for one in lines.partition),
        broadening=_broadening([lines.broadening for lines, _ in parts], order),
        assumptions=tuple(one for lines, _ in parts for one in lines.assumptions),
        ledger=ledger,
    )


def _broadening(
    parts: Sequence[LineBroadening], order: np.ndarray[tuple[int, ...], np.dtype[np.intp]]
) -> LineBroadening:
    """Widths of all lines, by every broadener of any species; one that a species does not have adds nothing."""
    names = tuple(dict.fromkeys(name for part in parts for name in part.broadeners))
    size = [part.shift.size for part in parts]
    gamma, exponent = np.zeros((len(names), sum(size))), np.zeros((len(names), sum(size)))
    start = 0
    for part, lines in zip(parts, size, strict=True):
        rows = [names.index(name) for name in part.broadeners]
        gamma[rows, start : start + lines] = part.gamma
        exponent[rows, start : start + lines] = part.exponent
        start += lines
    shift = np.concatenate([part.shift for part in parts])
    assumptions = tuple(one for part in parts for one in part.assumptions)
    ordered = (np.ascontiguousarray(gamma[:, order]), np.ascontiguousarray(exponent[:, order]), shift[order])
    return LineBroadening(names, *ordered, assumptions)
