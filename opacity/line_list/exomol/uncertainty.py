"""Uncertainties of positions in a list in ExoMol format, from those of its states' energies.

A line keeps no ids of its states, but their energies: the lower one to a step, and the difference exactly.  So no
transition is read again.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from opacity.grids import FloatArray
from opacity.kernels.uncertainty import uncertainty_of_transitions
from opacity.line_list.exomol.states import States
from opacity.line_list.model import LineList
from opacity.line_list.packed import ENERGY_STEP
from opacity.line_list.uncertainty import StatedUncertainty


@dataclass(frozen=True)
class StateErrors:
    """Energies of the states in rising order and the uncertainty of each, (n_states,), cm-1."""

    energy: FloatArray
    uncertainty: FloatArray

    def of(self, lines: LineList) -> StatedUncertainty:
        """What is stated of lines between these states; where both uncertainties are 0, nothing."""
        stated = StatedUncertainty.nothing(len(lines))
        found = np.empty(len(lines))
        # Stores keep energies to half a step.
        step = 0.51 * ENERGY_STEP
        uncertainty_of_transitions(lines.wavenumber, lines.lower_energy, step, self.energy, self.uncertainty, found)
        stated.position[:] = np.where(found > 0.0, found, np.nan)
        return stated


def state_errors(states: States) -> StateErrors | None:
    """The states by energy; None where the list gives no uncertainties."""
    if states.uncertainty is None:
        return None
    order = np.argsort(states.energy, kind="stable")
    return StateErrors(states.energy[order], states.uncertainty[order].astype(np.float64))
