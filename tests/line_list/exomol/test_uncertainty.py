"""Uncertainties of transitions from those of states, found again by energies alone."""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import replace

import numpy as np
import pytest

from opacity.line_list.catalogue import CatalogueLines, as_line_list
from opacity.line_list.exomol.states import IdIndex, States
from opacity.line_list.exomol.uncertainty import state_errors
from opacity.line_list.ledger import Ledger
from opacity.line_list.packed import decode_energy, encode_energy
from opacity.molecule.isotopologue import isotopologue


def states_of(energy, uncertainty):
    n = len(energy)
    given = None if uncertainty is None else np.array(uncertainty, dtype=np.float32)
    return States("a.states", np.array(energy), np.ones(n), np.zeros(n, np.float32), given, IdIndex(1, n), Counter())


def lines_of(energy, pairs):
    """Lines as a store gives them back: the lower energy rounded, the wavenumber exact."""
    upper, lower = np.array(pairs).T
    energy = np.array(energy)
    n = len(pairs)
    nothing = np.zeros(n)
    found = CatalogueLines(
        "a", energy[upper] - energy[lower], nothing, nothing, decode_energy(encode_energy(energy[lower])), nothing,
        np.zeros(n, np.int64), np.zeros(n, bool), np.arange(n), Ledger(),
    )  # fmt: skip
    return as_line_list(found, isotopologue(5, 1))


@pytest.mark.nojit
def test_both_states_in_quadrature_however_close_their_energies():
    rng = np.random.default_rng(8)
    # A third of the states lie within a few steps of the stores' rounding of each other.
    energy = np.round(np.concatenate([rng.uniform(0.0, 9000.0, 120), 4000.0 + rng.uniform(0.0, 1e-4, 60)]), 6)
    uncertainty = rng.uniform(1e-6, 0.3, energy.size)
    pairs = [(u, low) for u, low in rng.integers(0, energy.size, (900, 2)) if energy[u] - energy[low] > 0.01]
    found = state_errors(states_of(energy, uncertainty)).of(lines_of(energy, pairs)).position
    # Every pair of the very difference whose lower energy rounds alike may be the line's own.
    coded = encode_energy(energy)
    for (upper, lower), value in zip(pairs, found, strict=True):
        nu = energy[upper] - energy[lower]
        same = [
            math.hypot(np.float32(uncertainty[low]), np.float32(uncertainty[high]))
            for low in np.flatnonzero(coded == coded[lower])
            for high in np.flatnonzero(energy - energy[low] == nu)
        ]
        own = math.hypot(np.float32(uncertainty[upper]), np.float32(uncertainty[lower]))
        assert own <= value * (1.0 + 1e-12)
        assert value == pytest.approx(max(same), rel=1e-12)


def test_of_states_of_one_energy_the_larger_uncertainty():
    energy, uncertainty = [0.0, 10.0, 10.0, 2000.0], [0.0, 0.003, 0.004, 0.3]
    found = state_errors(states_of(energy, uncertainty)).of(lines_of(energy, [(1, 0), (2, 0), (3, 1)])).position
    assert found == pytest.approx([0.004, 0.004, math.hypot(0.3, 0.004)], rel=1e-6)


def test_nothing_where_the_list_says_nothing():
    energy = [0.0, 10.0, 2000.0]
    assert state_errors(states_of(energy, None)) is None
    lines = lines_of(energy, [(2, 1), (1, 0)])
    stated = state_errors(states_of(energy, [0.0, 0.0, 0.1])).of(lines)
    assert stated.position == pytest.approx([0.1, math.nan], rel=1e-6, nan_ok=True)
    assert np.all(np.isnan(stated.strength))
    stranger = replace(lines, wavenumber=lines.wavenumber + 1e-9)
    assert np.all(np.isnan(state_errors(states_of(energy, [0.1, 0.1, 0.1])).of(stranger).position))
