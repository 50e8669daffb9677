"""A k-coefficient table in memory, as the writer takes it, and the rules that its arrays keep on disk too."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

from opacity.grids import FloatArray
from opacity.tables import layout
from opacity.tables.model import TableFrame

_ROUNDING = 1e-9
"""By how much sums and differences of weights and bounds may be off."""


class NodeValues(Protocol):
    """Values by node: an array, or what makes those of a node when it is asked for them."""

    @property
    def shape(self) -> tuple[int, ...]:
        """The shape of the array that they are, or would be."""

    def __getitem__(self, node: Any, /) -> Any:
        """The values of a node, given by the tuple of its indices."""


@dataclass(frozen=True)
class KTable:
    """Everything that goes into a file of k-coefficients.

    On a grid `temperature` is (n_T,), `pressure` (n_P,), `k_coefficient` (n_T, n_P, n_band, n_g), and `fine_cells`
    (n_T, n_P, n_band, n_cell); along a profile (`profile` true) both axes are (n_node,) in the order given, and
    n_node stands for n_T, n_P everywhere.  `band_bounds` (n_band, 2); `g` (n_g,); `g_bounds` (n_g, 2) and
    `g_weight` (n_g,), or (n_band, n_g, 2) and (n_band, n_g) where each band has its own, `g` then being nominal,
    such as their mean over the bands.  `cell_bounds` (n_cell, 2) comes with fine cells.  `planck_mean` and
    `rosseland_mean` (n_T, n_P).  Units: K, bar, cm-1, cm2 per molecule.  `quadrature` says how k stands for g.
    `provenance` and `checks` hold only what JSON can say and nothing that depends on time, host or the number of
    workers.
    """

    title: str
    formula: str
    temperature: FloatArray
    pressure: FloatArray
    band_bounds: FloatArray
    g: FloatArray
    g_bounds: FloatArray
    g_weight: FloatArray
    k_coefficient: NodeValues
    quadrature: str
    recipe: str
    provenance: dict[str, Any]
    checks: dict[str, Any]
    profile: bool = False
    fine_cells: NodeValues | None = None
    cell_bounds: FloatArray | None = None
    planck_mean: FloatArray | None = None
    rosseland_mean: FloatArray | None = None

    @property
    def band(self) -> FloatArray:
        """Middles of the bands (cm-1), (n_band,)."""
        return np.asarray(0.5 * (self.band_bounds[:, 0] + self.band_bounds[:, 1]))

    @property
    def frame(self) -> TableFrame:
        """What it has in common with a table of cross-sections, the middles of bands as wavenumbers."""
        axes = self.temperature, self.pressure, self.band
        return TableFrame(self.title, self.formula, *axes, self.recipe, self.provenance, self.profile)

    @property
    def nodes(self) -> tuple[int, ...]:
        """How many nodes there are along each of their dimensions."""
        return layout.spectra_shape(self.temperature.size, self.pressure.size, self.profile)


class Fault(NamedTuple):
    """What breaks a rule: where and what, what was expected, what was found."""

    what: str
    expected: str
    found: object


def fault_of_bands(bounds: FloatArray) -> Fault | None:
    """What is wrong with bands' bounds (n_band, 2), cm-1: they rise and do not overlap."""
    if bounds.ndim != 2 or bounds.shape[-1] != 2 or bounds.size == 0:
        return Fault("shape of band_bounds", "(n_band, 2)", bounds.shape)
    if not np.all(np.isfinite(bounds)) or np.any(bounds < 0.0):
        return Fault("band_bounds", "finite numbers, 0 or above", "others")
    for number, (lower, upper) in enumerate(bounds):
        if not lower < upper:
            return Fault(f"bounds of band {number}", "the lower one first", f"{lower:.10g}, {upper:.10g}")
        if number and lower < bounds[number - 1, 1]:
            found = f"one from {lower:.10g} cm-1, where the one before ends at {bounds[number - 1, 1]:.10g} cm-1"
            return Fault(f"band {number}", "bands in rising order that do not overlap", found)
    return None


def fault_of_quadrature(bands: int, g: FloatArray, bounds: FloatArray, weight: FloatArray) -> Fault | None:
    """What is wrong with points `g` (n_g,), their `bounds` (..., n_g, 2) and `weight` (..., n_g)."""
    shapes = ((g.size,), (bands, g.size))
    if g.ndim != 1 or g.size == 0:
        return Fault("shape of g", "(n_g,)", g.shape)
    if weight.shape not in shapes:
        return Fault("shape of g_weight", " or ".join(str(shape) for shape in shapes), weight.shape)
    if bounds.shape != (*weight.shape, 2):
        return Fault("shape of g_bounds", f"{(*weight.shape, 2)}", bounds.shape)
    if not np.all(np.isfinite(weight) & (weight > 0.0)):
        return Fault("g_weight", "finite numbers above 0", "others")
    sums = np.atleast_1d(weight.sum(axis=-1))
    off = int(np.argmax(np.abs(sums - 1.0)))
    if not abs(sums[off] - 1.0) <= _ROUNDING:
        return Fault("sum of g_weight" + (f" of band {off}" if weight.ndim == 2 else ""), "1", f"{sums[off]:.10g}")
    if (fault := _fault_of_intervals("g_bounds", bounds)) is not None:
        return fault
    if not np.allclose(bounds[..., 1] - bounds[..., 0], weight, rtol=0.0, atol=_ROUNDING):
        return Fault("g_bounds", "intervals as wide as the weights", "others")
    # Of bands that have each their own, g is nominal: it lies where the bounds do on average.
    middle = bounds.reshape(-1, g.size, 2).mean(axis=0)
    inside = (g >= middle[:, 0] - _ROUNDING) & (g <= middle[:, 1] + _ROUNDING)
    if not np.all(np.isfinite(g)) or not np.all(inside) or np.any(np.diff(g) <= 0.0):
        return Fault("g", "rising, each point within its bounds", "others")
    return None


def fault_of_cells(bounds: FloatArray) -> Fault | None:
    """What is wrong with the bounds of fine cells (n_cell, 2)."""
    if bounds.ndim != 2 or bounds.shape[-1] != 2 or bounds.size == 0:
        return Fault("shape of cell_bounds", "(n_cell, 2)", bounds.shape)
    return _fault_of_intervals("cell_bounds", bounds)


def _fault_of_intervals(name: str, bounds: FloatArray) -> Fault | None:
    """Intervals (..., n, 2) fill 0 to 1, one after the other."""
    gaps = np.abs(bounds[..., 1:, 0] - bounds[..., :-1, 1])
    ends = np.abs(bounds[..., 0, 0]), np.abs(bounds[..., -1, 1] - 1.0)
    # Written so that NaN, which compares false, is a fault.
    fits = all(np.all(one <= _ROUNDING) for one in (gaps, *ends))
    if not fits or not np.all(bounds[..., 0] < bounds[..., 1]):
        return Fault(name, "intervals that fill 0 to 1 in rising order", "others")
    return None


def first_impossible(values: NDArray[Any], rising: bool) -> tuple[int, int] | None:
    """The band and point of the first of a node's values (n_band, n) that is not finite, 0 or above, and in order."""
    good = np.isfinite(values) & (values >= 0.0)
    if rising:
        good[:, 1:] &= values[:, 1:] >= values[:, :-1]
    bad = np.argwhere(~good)
    return (int(bad[0, 0]), int(bad[0, 1])) if bad.size else None
