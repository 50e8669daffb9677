"""Interpolating cross-sections between the nodes of a grid of temperature and pressure.

ln(sigma) is a Lagrange polynomial through 4 nodes in ln T and 4 in ln P, one-sided in the end cells,
linear along an axis of fewer than 4 nodes.  Where some of the nodes used are 0 their logarithm does
not exist: there sigma itself is linear in ln T and ln P over the enclosing cell, and 0 where all are 0.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import InputError, TableError, problem
from opacity.grids import FloatArray

METHODS = ("cubic", "linear")

_ROUNDING = 1e-12
"""Relative distance within which a value is a node's own: it differs by rounding only."""


Node = tuple[int, int, float, float]
"""i_T, i_P, weight of ln(sigma), weight of sigma."""


@dataclass(frozen=True)
class Stencil:
    """Nodes `first`, `first + 1`, ... of an axis with their weights, (n,) each.

    `weights` apply to ln(sigma); `linear` to sigma, and are 0 outside the enclosing cell.
    """

    first: int
    weights: FloatArray
    linear: FloatArray


def interpolate(
    values: NDArray[Any],
    temperatures: FloatArray,
    pressures: FloatArray,
    temperature: float,
    pressure: float,
    *,
    clamp: bool = False,
    method: str = "cubic",
) -> FloatArray:
    """Cross-section at one temperature (K) and pressure (bar), (n_nu,).

    `values` is (n_T, n_P, n_nu), 0 or above, on rising axes `temperatures` (n_T,) and `pressures`
    (n_P,).  `method` is "cubic" or "linear"; `clamp` takes the nearest end for what lies outside.
    Raises TableError outside the grid, InputError for an argument that can't be one.
    """
    nodes = grid_nodes(temperatures, pressures, temperature, pressure, clamp=clamp, method=method)
    return from_nodes(nodes, values.shape[-1], lambda i, j: np.asarray(values[i, j]))


def positive_number(name: str, unit: str, value: Any) -> float:
    """`value` as a float; InputError unless it is one finite number above 0."""
    try:
        number = float(value)
    except (TypeError, ValueError, OverflowError):
        number = math.nan
    if not (math.isfinite(number) and number > 0.0):
        raise InputError(problem(name, "impossible value", expected=f"one number above 0 {unit}", found=repr(value)))
    return number


def axis_stencil(name: str, unit: str, axis: FloatArray, value: Any, *, clamp: bool, method: str) -> Stencil:
    """The nodes of a rising `axis` (n,) from which `value` is made; one node where it is a node's own.

    Raises TableError outside the axis unless `clamp`, InputError for an impossible value or method.
    """
    if method not in METHODS:
        raise InputError(problem("method", "unknown", expected=" or ".join(METHODS), found=repr(method)))
    number = positive_number(name, unit, value)
    nearest = int(np.argmin(np.abs(axis - number)))
    outside = number < axis[0] or number > axis[-1]
    if same_number(number, float(axis[nearest])) or (outside and clamp):
        return Stencil(nearest, np.ones(1), np.ones(1))
    if outside:
        raise TableError(
            problem(
                name,
                "outside the table",
                expected=_range(axis, unit),
                found=f"{number:.10g} {unit}",
                remedy="clamp=True takes the nearest end",
            )
        )
    return _inner_stencil(axis, number, 2 if method == "linear" or axis.size < 4 else 4)


def same_number(first: float, second: float) -> bool:
    """Whether two numbers differ by rounding only."""
    return abs(first - second) <= _ROUNDING * abs(second)


def grid_nodes(
    temperatures: FloatArray, pressures: FloatArray, temperature: float, pressure: float, *, clamp: bool, method: str
) -> list[Node]:
    """The nodes from which a temperature (K) and pressure (bar) is made; errors as for `axis_stencil`."""
    along_t = axis_stencil("temperature", "K", temperatures, temperature, clamp=clamp, method=method)
    along_p = axis_stencil("pressure", "bar", pressures, pressure, clamp=clamp, method=method)
    return [
        (along_t.first + i, along_p.first + j, float(weight_t * weight_p), float(linear_t * linear_p))
        for i, (weight_t, linear_t) in enumerate(zip(along_t.weights, along_t.linear, strict=True))
        for j, (weight_p, linear_p) in enumerate(zip(along_p.weights, along_p.linear, strict=True))
    ]


def from_nodes(nodes: list[Node], points: int, spectrum: Callable[[int, int], NDArray[Any]]) -> FloatArray:
    """One spectrum, (points,), from `grid_nodes` and a function that gives the spectrum of a node, (points,).

    A node that stands alone is returned as it is.  One spectrum is held at a time.
    """
    if len(nodes) == 1:
        return spectrum(nodes[0][0], nodes[0][1]).astype(np.float64)
    logarithm, linear, some_zero = np.zeros(points), np.zeros(points), np.zeros(points, dtype=bool)
    for i, j, weight, linear_weight in nodes:
        values = spectrum(i, j).astype(np.float64)
        linear += linear_weight * values
        zero = values == 0.0
        some_zero |= zero
        values[zero] = 1.0
        logarithm += weight * np.log(values)
    return np.where(some_zero, linear, np.exp(logarithm))


def _inner_stencil(axis: FloatArray, value: float, count: int) -> Stencil:
    cell = min(int(np.searchsorted(axis, value, side="right")) - 1, axis.size - 2)
    first = min(max(cell - (count - 2) // 2, 0), axis.size - count)
    nodes = np.log(axis[first : first + count])
    position = math.log(value)
    linear = np.zeros(count)
    here = cell - first
    linear[here : here + 2] = _lagrange(nodes[here : here + 2], position)
    return Stencil(first, _lagrange(nodes, position), linear)


def _lagrange(nodes: FloatArray, position: float) -> FloatArray:
    """Weights of the polynomial through `nodes` (n,) at `position`, (n,)."""
    gaps = nodes[:, np.newaxis] - nodes
    ratios = (position - nodes) / np.where(gaps == 0.0, 1.0, gaps)
    np.fill_diagonal(ratios, 1.0)
    return np.asarray(ratios.prod(axis=1), dtype=np.float64)


def _range(axis: FloatArray, unit: str) -> str:
    if axis.size == 1:
        return f"{axis[0]:.10g} {unit}, the only node"
    return f"{axis[0]:.10g} to {axis[-1]:.10g} {unit}"
