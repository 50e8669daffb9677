"""The public functions of k-coefficients: spectra to k in bands, and k of species to k of a mixture."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.arguments import as_mapping, as_numbers, check_workers, shown
from opacity.errors import InputError, problem
from opacity.grids import FloatArray, as_wavenumbers
from opacity.k_coefficient.bands import as_band_edges
from opacity.k_coefficient.collapse import fine_cells
from opacity.k_coefficient.mix import mix
from opacity.k_coefficient.quadrature import g_points as made_points
from opacity.k_coefficient.quadrature import k_from_cells, points_of_bounds, points_of_weights

_ROUNDING = 1e-6


def k_coefficients(
    sigma: NDArray[Any],
    *,
    wavenumber: Sequence[float] | NDArray[Any],
    band_edges: Sequence[float] | NDArray[Any],
    g_points: int | Sequence[float] | NDArray[Any] = 16,
    quadrature: str = "matched",
    workers: int = 1,
) -> tuple[FloatArray, FloatArray]:
    """k-coefficients of spectra in bands: k (..., n_band, n_g), in the unit of `sigma`, and the weights (n_g,) in g.

    `sigma` (..., n_nu), finite and 0 or above, at the rising `wavenumber` (n_nu,), cm-1; `band_edges` (n_band + 1,),
    cm-1, rise within the grid and may fall between its points.  `g_points` is their number or, for "matched" and
    "interval-mean", the bounds of their intervals in g, (n_g + 1,) from 0 to 1.  `quadrature` is "matched" (matched
    intervals with mean closure: the band's mean is exact), "gauss-legendre", "split" or "interval-mean".  k rises with
    g; weights sum to 1.  `workers` threads give the same bits as one.  Raises InputError for what cannot be right.
    """
    check_workers(workers)
    count = isinstance(g_points, (int, np.integer, float, str)) or g_points is None
    chosen = made_points if count else points_of_bounds
    points = chosen(g_points, quadrature)  # type: ignore[arg-type]
    if points.bounds.ndim != 1:
        expected = "one number, or bounds (n_g + 1,)"
        raise InputError(problem("g_points", "impossible", expected=expected, found=f"shape {points.bounds.shape}"))
    spectra = as_numbers("sigma", sigma, "cross-sections")
    executor = ThreadPoolExecutor(workers) if workers > 1 else None
    try:
        cells = fine_cells(spectra, as_wavenumbers(wavenumber), as_band_edges(band_edges), executor)
    finally:
        if executor is not None:
            executor.shutdown(cancel_futures=True)
    return k_from_cells(cells, points), points.weights


def mix_k(
    k: Mapping[str, NDArray[Any]],
    fractions: Mapping[str, float | NDArray[Any]],
    *,
    weights: Sequence[float] | NDArray[Any],
    quadrature: str = "matched",
) -> FloatArray:
    """k-coefficients of a mixture, (..., n_band, n_g), per molecule of the mixture, by random overlap.

    `k` of each species by name, (..., n_band, n_g), 0 or above, rising with g, all with the same `weights` (n_g,) and
    `quadrature`; `fractions` the mole fraction of each, a number or an array that fits the axes before n_band, with a
    sum of at most 1 (what is left does not absorb).  The sums of all pairs are put in order and rebinned as the
    quadrature is: into matched intervals with mean closure, interval means, or by interpolation of ln k in g.
    Raises InputError for what cannot be right.
    """
    species = as_mapping("k", k, "k-coefficients by species")
    parts = as_mapping("fractions", fractions, "mole fractions by species")
    if set(species) != set(parts) or not species:
        found = f"{', '.join(sorted(parts)) or 'none'}"
        expected = f"those of k: {', '.join(sorted(species)) or 'one or more'}"
        raise InputError(problem("fractions", "of other species", expected=expected, found=found))
    shares = [_fraction(name, parts[name]) for name in species]
    points = points_of_weights(weights, quadrature)
    sizes = {np.shape(one) for one in species.values()}
    if len(sizes) > 1:
        found = ", ".join(str(size) for size in sorted(sizes))
        raise InputError(problem("k", "of another shape", expected="one shape for all species", found=found))
    mixture = mix([_rising_k(name, one) for name, one in species.items()], shares, points)
    total = np.max(sum(shares))
    if total > 1.0 + _ROUNDING:
        raise InputError(problem("fractions", "too large", expected="a sum of at most 1", found=f"{total:g}"))
    return mixture


def _fraction(name: str, value: object) -> FloatArray:
    place = f"fractions[{name!r}]"
    array = as_numbers(place, value, "mole fractions")
    if not np.all((array >= 0.0) & (array <= 1.0)):
        raise InputError(problem(place, "impossible", expected="from 0 to 1", found=shown(value)))
    return array if np.ndim(value) else array.reshape(())  # type: ignore[arg-type]


def _rising_k(name: str, value: object) -> FloatArray:
    place = f"k[{name!r}]"
    array = as_numbers(place, value, "k-coefficients in cm2 per molecule")
    if not (np.all(np.isfinite(array)) and np.all(array >= 0.0) and np.all(np.diff(array, axis=-1) >= 0.0)):
        expected = "finite values of 0 or above that rise with g"
        raise InputError(problem(place, "impossible value", expected=expected, found=shown(value)))
    return array
