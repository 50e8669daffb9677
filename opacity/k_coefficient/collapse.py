"""Spectra to fine cells: 398 means a band and node, from which any number of g points can be made afterwards.

A cell is the exact mean of the cross-section over a fixed interval of g.  The cells grow narrow towards the top, where
the centres of lines lie: g_i = 1 - (1 - i/398)^2.

A band wider than what is held at once is collapsed part by part and `merge_cells` puts the parts together.  It takes
the cells of all parts for samples of their width, so that the mean stays exact, while what is lost within the cells
is lost once more.
"""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Executor

import numpy as np

from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.bands import BandPoints, as_band_edges, band_points
from opacity.kernels.collapse import collapse_bands, collapse_rows

N_CELLS = 398

_POINTS_A_JOB = 1 << 16
_INFINITY = np.float64(np.inf).view(np.uint64)


CELL_BOUNDS: FloatArray = 1.0 - (1.0 - np.arange(N_CELLS + 1) / N_CELLS) ** 2
"""Borders of the fine cells in g, (N_CELLS + 1,), from 0 to 1."""

CELL_WIDTHS = np.diff(CELL_BOUNDS)
"""Widths of the fine cells in g, (N_CELLS,), sum 1."""


def fine_cells(
    sigma: FloatArray, wavenumber: FloatArray, band_edges: FloatArray, executor: Executor | None = None
) -> FloatArray:
    """Means of spectra over the fine cells of g in each band, (..., n_band, N_CELLS), in the spectrum's unit.

    `sigma` (..., n_nu), finite and 0 or above, at the rising `wavenumber` (n_nu,); `band_edges` (n_band + 1,) rising;
    both cm-1.  Cells rise with g and are 0 exactly where all of their share of the band is.  With an executor of
    threads nodes and bands are done side by side, to the same bits.  Raises InputError for anything else.
    """
    spectra = checked_spectra(sigma, wavenumber)
    points = band_points(wavenumber, as_band_edges(band_edges))
    cells = np.empty((len(spectra), points.first.size, N_CELLS))
    jobs = [(node, part) for node in range(len(spectra)) for part in _parts(points)]

    def do(job: tuple[int, slice]) -> None:
        node, part = job
        bits, edges = spectra[node].view(np.uint64), points.edges[part.start : part.stop + 1]
        its_points = (points.borders, edges, points.first[part], points.last[part])
        collapse_bands(spectra[node], bits, *its_points, CELL_WIDTHS, cells[node, part])

    for _ in map(do, jobs) if executor is None else executor.map(do, jobs):
        pass
    return cells.reshape(*np.shape(sigma)[:-1], points.first.size, N_CELLS)


def checked_spectra(sigma: FloatArray, wavenumber: FloatArray) -> FloatArray:
    """Spectra as rows of contiguous f8, (n_node, n_nu).  Raises InputError unless all are finite and 0 or above."""
    spectra = np.ascontiguousarray(sigma, dtype=np.float64)
    if spectra.ndim == 0 or spectra.shape[-1] != wavenumber.size:
        expected, found = f"last axis of {wavenumber.size} wavenumbers", f"shape {spectra.shape}"
        raise InputError(problem("sigma", "does not fit the wavenumbers", expected=expected, found=found))
    spectra = spectra.reshape(-1, wavenumber.size)
    # Positive finite numbers are those whose bits, read as an integer, lie below infinity's.
    if np.max(spectra.view(np.uint64), initial=0) < _INFINITY:
        return spectra
    bad = np.argwhere(~(np.isfinite(spectra) & (spectra >= 0.0)))
    if len(bad):
        row, point = bad[0]
        where = f"{spectra[row, point]} at {wavenumber[point]:.10g} cm-1 (spectrum {row})"
        raise InputError(problem("sigma", "impossible value", expected="finite, 0 or above", found=where))
    # What is left are negative zeros.
    return spectra + 0.0


def _parts(points: BandPoints) -> list[slice]:
    """Runs of bands with some 2^16 points each."""
    number = (points.first - points.first[0]) // _POINTS_A_JOB
    starts = np.flatnonzero(np.diff(number, prepend=-1))
    return [slice(int(a), int(b)) for a, b in zip(starts, [*starts[1:], points.first.size], strict=True)]


def merge_cells(parts: Sequence[FloatArray], widths: Sequence[float]) -> FloatArray:
    """Fine cells of a band out of those of its parts, (..., N_CELLS).

    `parts` are cells (..., N_CELLS) of adjoining stretches of the band, `widths` (cm-1) how much of it each has.
    """
    if not len(parts) or len(parts) != len(widths) or not all(width > 0.0 for width in widths):
        expected, found = "as many widths above 0 as parts", f"{len(parts)} parts, widths {list(widths)}"
        raise InputError(problem("widths", "impossible", expected=expected, found=found))
    values = np.ascontiguousarray(np.concatenate(np.broadcast_arrays(*parts), axis=-1), dtype=np.float64)
    rows = values.reshape(-1, values.shape[-1])
    weights = np.concatenate([width * CELL_WIDTHS for width in widths])
    cells = np.empty((len(rows), N_CELLS))
    weights = np.ascontiguousarray(np.broadcast_to(weights, rows.shape))
    collapse_rows(rows, rows.view(np.uint64), weights, CELL_WIDTHS, cells)
    return cells.reshape(*values.shape[:-1], N_CELLS)
