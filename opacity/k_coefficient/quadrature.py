"""g points: where they lie, what they weigh, and the k-coefficients there out of fine cells.

matched           matched intervals with mean closure (`kernels.matched`), this project's own: fewest points for an
                  error of transmission, and the mean of the band exact
interval-mean     the mean of k over each interval; as intervals those of Gauss and Legendre's weights, or given bounds
gauss-legendre    k at the points of Gauss and Legendre's quadrature in g (Lacis & Oinas 1991, from memory)
split             the same in two pieces, g below and above 0.95, half of the points in each
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from opacity.arguments import as_numbers, shown
from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.collapse import CELL_WIDTHS, N_CELLS
from opacity.kernels.matched import at_points, match_rows

QUADRATURES = ("matched", "gauss-legendre", "split", "interval-mean")
INTERVALS = ("matched", "interval-mean")
"""Those whose k stand for intervals and keep the band's mean."""
MOST_POINTS = 200
SPLIT = 0.95
_ROUNDING = 1e-6


@dataclass(frozen=True)
class GPoints:
    """A quadrature in g: its name, `g` (n,) of the points, `bounds` (n + 1,) of their intervals, `weights` (n,).

    Where bands have quadratures of their own each array has their number as its first axis.
    """

    quadrature: str
    g: FloatArray
    bounds: FloatArray
    weights: FloatArray

    @property
    def count(self) -> int:
        """How many points a band has."""
        return int(self.weights.shape[-1])

    @property
    def depth(self) -> float:
        """x0, the optical depth of an interval's mean at which its k is matched; 0 for plain means.

        The leading error of narrow intervals goes as 1 - x0; with few points a larger value was measured to be better.
        """
        if self.quadrature != "matched":
            return 0.0
        return 1.5 if self.count <= 8 else 1.25 if self.count <= 16 else 1.0


def g_points(count: int, quadrature: str = "matched") -> GPoints:
    """The quadrature with a number of points, 1 to 200 ("split": 2 or more).

    The matched intervals' bounds are g_i = erf(a i/n) / erf(a) with a = sqrt(ln n): even below, and the more crowded
    towards the top the more there are (`optimise` finds better ones for given spectra).
    Raises InputError for a quadrature that there is not.
    """
    check_quadrature(quadrature)
    least = 2 if quadrature == "split" else 1
    whole = isinstance(count, (int, np.integer)) and not isinstance(count, bool)
    if not whole or not least <= count <= MOST_POINTS:
        expected = f"a whole number from {least} to {MOST_POINTS}"
        raise InputError(problem("g_points", "impossible", expected=expected, found=shown(count)))
    return _MADE_BY[quadrature](int(count))


def check_quadrature(quadrature: object) -> None:
    """Raise InputError for a name that is not one of `QUADRATURES`."""
    if not isinstance(quadrature, str) or quadrature not in QUADRATURES:
        expected = " or ".join(f'"{name}"' for name in QUADRATURES)
        raise InputError(problem("quadrature", "unknown", expected=expected, found=shown(quadrature)))


def points_of_bounds(bounds: object, quadrature: str = "matched") -> GPoints:
    """Intervals with given bounds in g, (n + 1,) or (n_band, n + 1), rising from 0 to 1: "matched" or "interval-mean".

    Raises InputError for anything else.
    """
    check_quadrature(quadrature)
    if quadrature not in INTERVALS:
        expected = 'a number of points, or quadrature "matched" or "interval-mean"'
        raise InputError(problem("g_points", "bounds do not fit the quadrature", expected=expected, found=quadrature))
    array = as_numbers("g_points", bounds, "bounds from 0 to 1")
    fits = array.ndim in (1, 2) and 2 <= array.shape[-1] <= MOST_POINTS + 1
    if not fits or np.any(array[..., 0] != 0.0) or np.any(array[..., -1] != 1.0) or not np.all(np.diff(array) > 0.0):
        expected = f"bounds of 1 to {MOST_POINTS} intervals, rising from 0 to 1"
        raise InputError(problem("g_points", "impossible", expected=expected, found=shown(bounds)))
    return _intervals(quadrature, np.ascontiguousarray(array))


def points_of_weights(weights: object, quadrature: str = "matched") -> GPoints:
    """The quadrature of known weights (n,), sum 1.

    Raises InputError where they are impossible, or not those of the quadrature with so many points.
    """
    check_quadrature(quadrature)
    array = as_numbers("weights", weights, "weights in g")
    fits = array.ndim == 1 and 1 <= array.size <= MOST_POINTS
    if not fits or not np.all(array > 0.0) or not abs(float(array.sum()) - 1.0) <= _ROUNDING:
        expected = f"1 to {MOST_POINTS} weights above 0, sum 1"
        raise InputError(problem("weights", "impossible", expected=expected, found=shown(weights)))
    if quadrature in INTERVALS:
        return _intervals(quadrature, _bounds_of(array))
    made = g_points(array.size, quadrature)
    if not np.allclose(made.weights, array, rtol=0.0, atol=_ROUNDING):
        expected = f'those of "{quadrature}" with {array.size} points'
        raise InputError(problem("weights", "of another quadrature", expected=expected, found=shown(weights)))
    return made


def k_from_cells(cells: FloatArray, points: GPoints) -> FloatArray:
    """k-coefficients (..., n_band, n_g) out of fine cells (..., n_band, N_CELLS), in their unit; they rise with g.

    The mean of the band is exact for "matched" and "interval-mean".
    """
    if cells.shape[-1:] != (N_CELLS,) or (points.bounds.ndim == 2 and cells.shape[-2:-1] != points.bounds.shape[:1]):
        expected = f"(..., n_band, {N_CELLS})"
        raise InputError(problem("cells", "of another shape", expected=expected, found=f"shape {cells.shape}"))
    rows = np.ascontiguousarray(cells, dtype=np.float64).reshape(-1, N_CELLS)
    k = np.empty((len(rows), points.count))
    if points.quadrature in INTERVALS:
        match_rows(rows, CELL_WIDTHS, np.atleast_2d(points.bounds), points.depth, k)
    else:
        at_points(rows, CELL_WIDTHS, np.atleast_2d(points.g), k)
    return k.reshape(*cells.shape[:-1], points.count)


def _intervals(quadrature: str, bounds: FloatArray) -> GPoints:
    return GPoints(quadrature, 0.5 * (bounds[..., 1:] + bounds[..., :-1]), bounds, np.diff(bounds))


def _crowded(count: int) -> GPoints:
    steep = math.sqrt(math.log(count))
    bounds = [math.erf(steep * i / count) / math.erf(steep) for i in range(count)] if count > 1 else [0.0]
    return _intervals("matched", np.array([*bounds, 1.0]))


def _legendre(count: int) -> tuple[FloatArray, FloatArray]:
    """Points and weights on 0 to 1."""
    x, w = np.polynomial.legendre.leggauss(count)
    return 0.5 * (x + 1.0), 0.5 * w


def _with_weights(quadrature: str, g: FloatArray, weights: FloatArray) -> GPoints:
    return GPoints(quadrature, g, _bounds_of(weights), weights)


def _bounds_of(weights: FloatArray) -> FloatArray:
    bounds = np.concatenate([[0.0], np.cumsum(weights)])
    bounds[-1] = 1.0
    return bounds


def _gauss_legendre(count: int) -> GPoints:
    return _with_weights("gauss-legendre", *_legendre(count))


def _interval_mean(count: int) -> GPoints:
    return _intervals("interval-mean", _gauss_legendre(count).bounds)


def _split(count: int) -> GPoints:
    (below, w_below), (above, w_above) = _legendre(count // 2), _legendre(count - count // 2)
    g = np.concatenate([SPLIT * below, SPLIT + (1.0 - SPLIT) * above])
    return _with_weights("split", g, np.concatenate([SPLIT * w_below, (1.0 - SPLIT) * w_above]))


_MADE_BY: dict[str, Callable[[int], GPoints]] = {
    "matched": _crowded,
    "gauss-legendre": _gauss_legendre,
    "split": _split,
    "interval-mean": _interval_mean,
}
