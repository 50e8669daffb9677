"""A cross-section table in memory, as the writer takes it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray


@dataclass(frozen=True)
class TableFrame:
    """A table without its values and checks; fields as those of `CrossSectionTable`."""

    title: str
    formula: str
    temperature: FloatArray
    pressure: FloatArray
    wavenumber: FloatArray
    recipe: str
    provenance: dict[str, Any]
    profile: bool = False

    @property
    def shape(self) -> tuple[int, ...]:
        """Shape of the cross-section."""
        sizes = self.temperature.size, self.pressure.size
        return ((sizes[0],) if self.profile else sizes) + (self.wavenumber.size,)


@dataclass(frozen=True)
class CrossSectionTable:
    """Everything that goes into `<name>.cross-section.h5`.

    On a grid `temperature` is (n_T,), `pressure` (n_P,) and `cross_section` (n_T, n_P, n_nu); along a
    profile (`profile` true) both axes are (n_node,) in the order given and `cross_section` is
    (n_node, n_nu).  Units: K, bar, cm-1, cm2 per molecule.  `provenance` and `checks` hold only what
    JSON can say and nothing that depends on time, host or the number of workers.
    """

    title: str
    formula: str
    temperature: FloatArray
    pressure: FloatArray
    wavenumber: FloatArray
    cross_section: NDArray[np.float64]
    recipe: str
    provenance: dict[str, Any]
    checks: dict[str, Any]
    profile: bool = False

    @property
    def frame(self) -> TableFrame:
        """The table without its values and checks."""
        axes = self.temperature, self.pressure, self.wavenumber
        return TableFrame(self.title, self.formula, *axes, self.recipe, self.provenance, self.profile)

    def spectrum(self, *node: int) -> FloatArray:
        """Cross-section (cm2/molecule) of one node by its indices, (n_nu,)."""
        return np.asarray(self.cross_section[node], dtype=np.float64)
