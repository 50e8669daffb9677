"""k-coefficients of a mixture out of those of its species: random overlap, put in order and rebinned.

Two species overlap at random: each k of the one meets each k of the other with the product of their weights (Lacis &
Oinas 1991, J. Geophys. Res. 96, 9027; with resorting and rebinning, Amundsen et al. 2017, A&A 598, A97; both from
memory).  The sums are put in order and rebinned to the same points: into matched intervals with mean closure (this
project's own way) or interval means, which both keep the mean, or by interpolation of ln k at points of g, the
classical way.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from opacity.errors import InputError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.quadrature import INTERVALS, GPoints
from opacity.kernels.matched import mix_interpolated, mix_matched


def mix(k: Sequence[FloatArray], fractions: Sequence[FloatArray | float], points: GPoints) -> FloatArray:
    """k-coefficients of a mixture, cm2 per molecule of it, (..., n_band, n_g).

    `k` of each species (..., n_band, n_g), cm2 per molecule, rising with g, all of the quadrature `points`; `fractions`
    the mole fraction of each, a number or an array that fits the axes before n_band.  More than two species are added
    one by one, in the order given.  Raises InputError where shapes do not fit.
    """
    if not k or len(k) != len(fractions):
        found = f"{len(k)} of k, {len(fractions)} fractions"
        raise InputError(problem("fractions", "do not fit k", expected="one for each species", found=found))
    _check_shapes(k, points)
    shares = [np.asarray(x, dtype=np.float64)[..., None, None] for x in fractions]
    shape = _common_shape([*(np.shape(one) for one in k), *(share.shape for share in shares)])
    parts = [np.asarray(one) * share for one, share in zip(k, shares, strict=True)]
    # Rows in the order of bands, so that each finds the bounds of its band.
    rows = [np.ascontiguousarray(np.broadcast_to(part, shape)).reshape(-1, shape[-1]) for part in parts]
    mixture = rows[0]
    for one in rows[1:]:
        mixture = _overlap(mixture, one, points)
    return mixture.reshape(shape)


def _common_shape(shapes: Sequence[tuple[int, ...]]) -> tuple[int, ...]:
    try:
        return np.broadcast_shapes(*shapes)
    except ValueError:
        found = ", ".join(str(shape) for shape in shapes)
        expected = "axes before n_band that fit each other"
        raise InputError(problem("k and fractions", "do not fit", expected=expected, found=found)) from None


def _check_shapes(k: Sequence[FloatArray], points: GPoints) -> None:
    bands = points.weights.shape[:-1]
    for one in k:
        shape = np.shape(one)
        if (
            len(shape) < 2
            or shape[-1] != points.count
            or shape[-2] != np.shape(k[0])[-2]
            or bands not in ((), shape[-2:-1])
        ):
            expected = f"(..., n_band, {points.count}), all of the same bands"
            raise InputError(problem("k", "of another shape", expected=expected, found=f"shape {shape}"))


def _overlap(first: FloatArray, second: FloatArray, points: GPoints) -> FloatArray:
    """Two species' rows (n_row, n_g) as one."""
    out = np.empty_like(first)
    weights = np.atleast_2d(points.weights)
    if points.quadrature in INTERVALS:
        mix_matched(first, second, weights, np.atleast_2d(points.bounds), points.depth, out)
    else:
        mix_interpolated(first, second, weights, np.atleast_2d(points.g), out)
    return out
