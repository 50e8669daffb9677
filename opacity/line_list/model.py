"""Lines in memory, in the units used inside."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.line_list.ledger import Ledger
from opacity.molecule.broadening import BroadenerColumns
from opacity.molecule.isotopologue import Isotopologue


@dataclass(frozen=True)
class StrengthBasis:
    """What a list's strengths stand for, isotopologue by isotopologue.

    `temperature` K, at which they hold; `holds_partition` whether they are divided by Q at that temperature;
    `abundance` the isotopologue's abundance that they are multiplied with (1 for none).
    HITRAN: 296 K, divided, terrestrial.  From A coefficients: not divided, none.  JPL/CDMS: 300 K, divided, none.
    """

    temperature: float
    holds_partition: bool
    abundance: float


@dataclass(frozen=True)
class LineList:
    """A line list as columns, sorted by wavenumber; every array is (n_lines,).

    `wavenumber` cm-1; `strength` cm/molecule, standing for what `basis` says of each isotopologue (in HITRAN
    format at 296 K with terrestrial abundance); `lower_energy` cm-1; `einstein_a` s-1 and the weights `upper_weight`,
    `lower_weight` NaN where not given; `isotopologue` index into `isotopologues`; `broadeners` by lower-case
    name, in cm-1/bar; `record` the line number in its file and `file` the index into `files`;
    `dropped` the isotopologues of which a selection has left no line.
    """

    wavenumber: FloatArray
    strength: FloatArray
    lower_energy: FloatArray
    einstein_a: FloatArray
    upper_weight: FloatArray
    lower_weight: FloatArray
    isotopologue: NDArray[np.int16]
    isotopologues: tuple[Isotopologue, ...]
    basis: tuple[StrengthBasis, ...]
    broadeners: dict[str, BroadenerColumns]
    record: NDArray[np.int64]
    file: NDArray[np.int16]
    files: tuple[str, ...]
    ledger: Ledger = field(default_factory=Ledger)
    dropped: tuple[Isotopologue, ...] = ()

    def __repr__(self) -> str:
        reach = f", {self.wavenumber[0]:.6g} to {self.wavenumber[-1]:.6g} cm-1" if len(self) else ""
        return (
            f"<LineList: {len(self)} lines of {self.molecule_formula or 'no molecule'}{reach};"
            f" isotopologues {', '.join(one.formula for one in self.isotopologues) or 'none'};"
            f" widths by {', '.join(sorted(self.broadeners)) or 'none'}>"
        )

    def __len__(self) -> int:
        return int(self.wavenumber.size)

    @property
    def molecule_formula(self) -> str:
        """Formula of the molecule, empty for a list without lines."""
        return self.isotopologues[0].molecule_formula if self.isotopologues else ""

    def select(self, which: NDArray[np.bool_] | NDArray[np.intp] | slice, reason: str | None = None) -> LineList:
        """The lines picked by a mask or an index; with `reason` the others are entered in the ledger.

        Isotopologues of which no line is left are no longer among `isotopologues`.
        """
        ledger = Ledger()
        ledger.add(self.ledger)
        picked = self.wavenumber[which]
        left, index = np.unique(self.isotopologue[which], return_inverse=True)
        kept = tuple(self.isotopologues[number] for number in left)
        if reason is not None:
            ledger.leave_out(reason, len(self) - picked.size)
        return replace(
            self,
            wavenumber=picked,
            strength=self.strength[which],
            lower_energy=self.lower_energy[which],
            einstein_a=self.einstein_a[which],
            upper_weight=self.upper_weight[which],
            lower_weight=self.lower_weight[which],
            isotopologue=index.astype(np.int16),
            isotopologues=kept,
            basis=tuple(self.basis[number] for number in left),
            dropped=self.dropped + tuple(one for one in self.isotopologues if one not in kept),
            broadeners={
                name: BroadenerColumns(one.gamma[which], one.exponent[which], one.shift[which])
                for name, one in self.broadeners.items()
            },
            record=self.record[which],
            file=self.file[which],
            ledger=ledger,
        )
