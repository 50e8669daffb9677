"""The certificate of k-coefficients: how far their transmissions are from those of the spectra, band by band.

Errors are differences of transmission (k-coefficients less the truth) at 64 columns a node and band, from a
transmission of 0.98 to one of 1e-3, no column above a cap for each bar (`transmission`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.k_coefficient.bands import BandPoints
from opacity.k_coefficient.collapse import CELL_WIDTHS
from opacity.k_coefficient.transmission import (
    BLACK,
    COLUMN_A_BAR,
    N_COLUMNS,
    THINNEST,
    columns_of,
    means_over_g,
    transmission,
)

_SMALLEST = 1e-12
_BINS_A_DECADE = 60
_BINS = 12 * _BINS_A_DECADE + 1


@dataclass(frozen=True)
class BandError:
    """Errors of one band over all nodes and columns.

    `largest` with its sign, `p99` the 99th percentile of the sizes; `node` and `column` (cm-2) where the largest is;
    `mean` the largest relative error of the mean k, with its sign.
    """

    largest: float
    p99: float
    node: int
    column: float
    mean: float


@dataclass(frozen=True)
class TwoLayerError:
    """Errors of the transmission of two layers, at pairs of nodes: correlated k against line by line."""

    largest: float
    p99: float
    pairs: tuple[tuple[int, int], ...]


@dataclass(frozen=True)
class Certificate:
    """What was measured: `bands` against the fine cells, and where spectra were at hand the other two.

    `fine_cells` is the largest error of the fine cells against the spectra, for each band.
    """

    bands: tuple[BandError, ...]
    columns: int = N_COLUMNS
    thinnest: float = THINNEST
    black: float = BLACK
    column_a_bar: float = COLUMN_A_BAR
    fine_cells: tuple[float, ...] | None = None
    two_layers: TwoLayerError | None = None
    seed: int | None = None
    trained_nodes: tuple[int, ...] | None = None

    @property
    def largest(self) -> float:
        """Size of the largest error of any band."""
        return max(abs(band.largest) for band in self.bands)

    def as_dict(self) -> dict[str, Any]:
        """Plain numbers, lists and dicts, as JSON takes them."""
        return asdict(self)


class NodeErrors(NamedTuple):
    """Errors at a node: of `transmission` at `columns` (n_band, n_column), cm-2; relative of the `mean` (n_band,)."""

    columns: FloatArray
    transmission: FloatArray
    mean: FloatArray


def errors_at_node(k: FloatArray, weights: FloatArray, cells: FloatArray, pressure: float) -> NodeErrors:
    """Errors of k (n_band, n_g) against fine cells (n_band, N_CELLS), cm2, at a pressure (bar).

    `weights` are (n_g,) or (n_band, n_g).
    """
    columns = columns_of(cells, np.full(len(k), pressure))
    shares = np.broadcast_to(weights, k.shape)
    errors = transmission(k, shares, columns) - transmission(cells, CELL_WIDTHS, columns)
    truth = means_over_g(cells, CELL_WIDTHS)
    mean = np.sum(k * shares, axis=1) - truth
    return NodeErrors(columns, errors, np.divide(mean, truth, out=np.zeros_like(truth), where=truth > 0.0))


class BandErrors:
    """Errors of k against fine cells, gathered node by node; 99th percentiles are good to 4 %."""

    def __init__(self, bands: int) -> None:
        self._largest, self._mean = np.zeros(bands), np.zeros(bands)
        self._node, self._column = np.zeros(bands, dtype=np.int64), np.zeros(bands)
        self._sizes = np.zeros((bands, _BINS), dtype=np.int32)

    def add(self, node: int, errors: NodeErrors) -> None:
        """The errors of one more node, by its number."""
        bands = np.arange(self._largest.size)
        worst = np.argmax(np.abs(errors.transmission), axis=1)
        largest = errors.transmission[bands, worst]
        larger = np.abs(largest) > np.abs(self._largest)
        self._largest[larger], self._node[larger] = largest[larger], node
        self._column[larger] = errors.columns[bands, worst][larger]
        self._mean = np.where(np.abs(errors.mean) > np.abs(self._mean), errors.mean, self._mean)
        decades = np.log10(np.maximum(np.abs(errors.transmission), _SMALLEST)) - np.log10(_SMALLEST)
        bins = np.minimum((decades * _BINS_A_DECADE).astype(np.int64), _BINS - 1)
        np.add.at(self._sizes, (np.broadcast_to(bands[:, None], bins.shape), bins), 1)

    def found(self) -> tuple[BandError, ...]:
        """The errors of every band over the nodes that were added."""
        # Band by band, so that no second array of this size is made.
        bins = [int(np.argmax(np.cumsum(one) >= 0.99 * one.sum())) for one in self._sizes]
        p99 = _SMALLEST * 10.0 ** ((np.array(bins) + 0.5) / _BINS_A_DECADE)
        rows = zip(
            self._largest, np.where(p99 > 2.0 * _SMALLEST, p99, 0.0), self._node, self._column, self._mean, strict=True
        )
        return tuple(BandError(float(a), float(b), int(c), float(d), float(e)) for a, b, c, d, e in rows)


def band_errors(k: FloatArray, weights: FloatArray, cells: FloatArray, pressure: FloatArray) -> tuple[BandError, ...]:
    """Errors of k (n_node, n_band, n_g) of `weights` (n_g,) or (n_band, n_g) against fine cells.

    `cells` (n_node, n_band, N_CELLS), both in cm2; `pressure` (n_node,) in bar.
    """
    errors = BandErrors(k.shape[1])
    for node in range(len(k)):
        errors.add(node, errors_at_node(k[node], weights, cells[node], float(pressure[node])))
    return errors.found()


def fine_cell_errors(
    cells: FloatArray, sigma: FloatArray, points: BandPoints, pressure: FloatArray
) -> tuple[float, ...]:
    """Largest error of the fine cells' transmissions against the spectra themselves, for each band.

    `cells` (n_node, n_band, N_CELLS) and `sigma` (n_node, n_nu), cm2, of nodes at `pressure` (n_node,), bar; `points`
    are the grid's in those bands.
    """
    largest = []
    for band in range(cells.shape[1]):
        columns = columns_of(cells[:, band], pressure)
        weights = _shares(points, band)
        spectra = sigma[:, points.first[band] : points.last[band]]
        errors = transmission(cells[:, band], CELL_WIDTHS, columns) - transmission(spectra, weights, columns)
        largest.append(float(np.max(np.abs(errors))))
    return tuple(largest)


def random_pairs(nodes: int, pairs: int, seed: int) -> tuple[tuple[int, int], ...]:
    """Pairs of different nodes drawn by a seed."""
    random = np.random.default_rng(seed)
    drawn = [random.choice(nodes, 2, replace=False) for _ in range(pairs if nodes > 1 else 0)]
    return tuple((int(a), int(b)) for a, b in drawn)


def two_layer_error(
    k: FloatArray,
    weights: FloatArray,
    cells: FloatArray,
    sigma: FloatArray,
    points: BandPoints,
    pressure: FloatArray,
    pairs: Sequence[tuple[int, int]],
) -> TwoLayerError:
    """Transmission of two layers one behind the other, correlated k against line by line, at pairs of nodes.

    Arguments as those of `band_errors` and `fine_cell_errors`.  Each layer has the columns of its own node and band,
    the thinnest with the thinnest and so on, every fourth of the 64.
    """
    weights = np.broadcast_to(weights, k.shape[1:])
    sizes: list[FloatArray] = []
    for band in range(k.shape[1]):
        shares, part = _shares(points, band), slice(points.first[band], points.last[band])
        for pair in pairs:
            both = list(pair)
            columns = columns_of(cells[both, band], pressure[both])[:, ::4]
            truth = _through(sigma[both, part], shares, columns)
            sizes.append(np.abs(_through(k[both, band], weights[band], columns) - truth))
    if not sizes:
        return TwoLayerError(0.0, 0.0, ())
    return TwoLayerError(float(np.max(sizes)), float(np.percentile(sizes, 99.0)), tuple(pairs))


def _through(k: FloatArray, weights: FloatArray, columns: FloatArray) -> FloatArray:
    """Transmissions (n_column,) through layers k (n_layer, n) of `columns` (n_layer, n_column)."""
    depths = (np.sum(k * column[:, None], axis=0) for column in columns.T)
    return np.array([np.sum(np.exp(-depth) * weights) for depth in depths])


def _shares(points: BandPoints, band: int) -> FloatArray:
    weights = points.weights(band)
    return np.asarray(weights / weights.sum())


def certify(
    k: FloatArray,
    weights: FloatArray,
    cells: FloatArray,
    pressure: FloatArray,
    sigma: FloatArray | None = None,
    points: BandPoints | None = None,
    pairs: int = 16,
    seed: int = 0,
    trained_nodes: NDArray[np.int64] | None = None,
) -> Certificate:
    """The certificate of k (n_node, n_band, n_g) with `weights` (n_g,) or (n_band, n_g).

    `cells` (n_node, n_band, N_CELLS) in cm2, `pressure` (n_node,) in bar.  With the spectra `sigma` (n_node, n_nu) and
    `points` of their grid, also the error of the fine cells and that of two layers at `pairs` of nodes drawn by `seed`.
    """
    bands = band_errors(k, weights, cells, pressure)
    trained = None if trained_nodes is None else tuple(int(node) for node in trained_nodes)
    if sigma is None or points is None:
        return Certificate(bands, seed=seed, trained_nodes=trained)
    drawn = random_pairs(len(k), pairs, seed)
    layers = two_layer_error(k, weights, cells, sigma, points, pressure, drawn)
    fine = fine_cell_errors(cells, sigma, points, pressure)
    return Certificate(bands, fine_cells=fine, two_layers=layers, seed=seed, trained_nodes=trained)
