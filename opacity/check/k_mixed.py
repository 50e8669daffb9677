"""k-coefficients of a mixture against the product of its species' transmissions."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from opacity.grids import FloatArray
from opacity.k_coefficient.certificate import BandError, BandErrors, NodeErrors
from opacity.k_coefficient.collapse import CELL_WIDTHS
from opacity.k_coefficient.transmission import N_COLUMNS, columns_of, means_over_g, transmission


class MixedErrors:
    """Errors of a mixture's k, gathered node by node; `fractions` are the mole fractions of its species.

    Columns of the mixture go from the thinnest that any species asks for to the thickest.
    """

    def __init__(self, fractions: Sequence[float], bands: int) -> None:
        self._fractions = fractions
        self._errors = BandErrors(bands)

    def add(self, node: int, k: FloatArray, weights: FloatArray, cells: Sequence[FloatArray], pressure: float) -> None:
        """A node: mixed `k` (n_band, n_g), and fine cells (n_band, N_CELLS) of each species, cm2; pressure in bar."""
        self._errors.add(node, mixed_errors(k, weights, cells, self._fractions, pressure))

    def found(self) -> tuple[BandError, ...]:
        """The errors of every band over the nodes that were added."""
        return self._errors.found()


def mixed_errors(
    k: FloatArray, weights: FloatArray, cells: Sequence[FloatArray], fractions: Sequence[float], pressure: float
) -> NodeErrors:
    """Errors at a node: mixed `k` (n_band, n_g) against fine cells (n_band, N_CELLS) of each species, cm2."""
    pressures = np.full(len(k), pressure)
    own = [columns_of(one, pressures) / x for one, x in zip(cells, fractions, strict=True)]
    # A species without opacity asks for no column.
    thin = np.min([np.where(one[:, 0] > 0.0, one[:, 0], np.inf) for one in own], axis=0)
    thick = np.max([one[:, -1] for one in own], axis=0)
    thin = np.where(np.isfinite(thin), thin, 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        span = np.where(thin > 0.0, np.log(thick / thin), 0.0)
    columns = thin[:, None] * np.exp(span[:, None] * np.linspace(0.0, 1.0, N_COLUMNS))
    truth, means = np.ones_like(columns), np.zeros(len(k))
    for one, x in zip(cells, fractions, strict=True):
        truth *= transmission(one, CELL_WIDTHS, x * columns)
        means += x * means_over_g(one, CELL_WIDTHS)
    shares = np.broadcast_to(weights, k.shape)
    off = np.sum(k * shares, axis=1) - means
    errors = transmission(k, shares, columns) - truth
    return NodeErrors(columns, errors, np.divide(off, means, out=np.zeros_like(means), where=means > 0.0))
