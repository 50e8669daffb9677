"""The section [k_coefficient] of a recipe: bands, points in g, and how they are chosen."""

from __future__ import annotations

import math
from itertools import pairwise
from typing import Any

from opacity import grids
from opacity.errors import InputError
from opacity.recipe.faults import shown
from opacity.recipe.line_lists import WAVENUMBER
from opacity.recipe.model import Bands, Grid, KCoefficientChoice
from opacity.recipe.table import Bounds, Table, checked_number

QUADRATURES = ("matched", "gauss-legendre", "split", "interval-mean")
WEIGHTS = ("optimised", "optimised-per-band", "fixed")
MOST_POINTS = 200
MOST_BANDS = 1_000_000
_BANDS = "{ resolving_power }, { width }, { edges } or { wavelength }"
_RESOLVING_POWER = Bounds(1.0, 1e6)
_WIDTH = Bounds(1e-3, 1e6, "cm-1")
_WAVELENGTH = Bounds(1e-2, 1e8, "micrometres")
_ERROR = Bounds(1e-4, 0.1)


def read_k_coefficient(root: Table, grid: Grid) -> KCoefficientChoice | None:
    """The section [k_coefficient], None where it is not there."""
    if "k_coefficient" not in root:
        return None
    values = root.table("k_coefficient", "a section [k_coefficient] with bands")
    if values is None:
        return None
    allowed = ("bands", "g_points", "transmission_error", "quadrature", "weights")
    table = Table(root.faults, root.path("k_coefficient"), values, allowed)
    quadrature = table.choice("quadrature", QUADRATURES, default="matched")
    weights = table.choice("weights", WEIGHTS, default="optimised" if quadrature == "matched" else "fixed")
    auto = table.values.get("g_points") == "auto"
    least = 2 if quadrature == "split" else 1
    named = isinstance(table.values.get("g_points"), str)
    if named and not auto:
        expected = f'"auto" or a whole number from {least} to {MOST_POINTS}'
        table.faults.add(table.path("g_points"), "impossible", expected=expected, found=shown(table.values["g_points"]))
    count = None if named else table.count("g_points", least, MOST_POINTS) if "g_points" in table else 16
    if (auto or weights != "fixed") and quadrature != "matched":
        what = "goes with the quadrature matched alone"
        table.faults.add(table.path("g_points" if auto else "weights"), what, found=shown(quadrature))
    if "transmission_error" in table and not named:
        table.faults.add(table.path("transmission_error"), 'goes with g_points = "auto" alone')
    return KCoefficientChoice(
        _bands(table, grid), count, table.number("transmission_error", _ERROR, 5e-3), quadrature, weights
    )


def _bands(table: Table, grid: Grid) -> Bands:
    """How bands are given; the edges themselves are made where they are used."""
    none = Bands("width", ())
    values = table.table("bands", _BANDS)
    if values is None:
        return none
    inner = Table(table.faults, table.path("bands"), values, ("resolving_power", "width", "edges", "wavelength"))
    kinds = [name for name in ("resolving_power", "width", "edges", "wavelength") if name in inner]
    if len(kinds) != 1:
        if kinds or not values:
            table.faults.add(inner.key, "not one way to give bands", expected=_BANDS, found=shown(values))
        return none
    kind = kinds[0]
    if kind not in ("resolving_power", "width"):
        return Bands(kind, _edges(inner, kind, grid))
    value = inner.number(kind, _RESOLVING_POWER if kind == "resolving_power" else _WIDTH)
    if grid.wavenumber.size and value > 0.0:
        _check_that_they_fit(inner, kind, value, grid)
    return Bands(kind, (value,))


def _check_that_they_fit(table: Table, kind: str, value: float, grid: Grid) -> None:
    """Bands of one width, or even in log, fill the grid's range, and are not too many."""
    start, stop = float(grid.wavenumber[0]), float(grid.wavenumber[-1])
    span = f"{start:.10g} to {stop:.10g} cm-1"
    if start == stop or (kind == "resolving_power" and start == 0.0):
        expected = "a grid with start < stop" if start == stop else "a grid with start above 0 cm-1"
        remedy = None if start == stop else "bands even in log have none at 0; give width or edges"
        table.faults.add(table.key, "no range for bands", expected=expected, found=span, remedy=remedy)
        return
    count = (stop - start) / value if kind == "width" else math.log(stop / start) * value
    if count > MOST_BANDS:
        table.faults.add(table.path(kind), "too many bands", expected=f"at most {MOST_BANDS}", found=f"{count:.3g}")
    elif kind == "width":
        try:
            grids.uniform_wavenumbers(start, stop, value)
        except InputError:
            remedy = "choose a width that divides the range, or other ends of the grid"
            expected, found = f"a whole number of widths in {span}", f"{count:.6g} of {value:.10g} cm-1"
            table.faults.add(table.path(kind), "does not fit the grid", expected=expected, found=found, remedy=remedy)


def _edges(table: Table, kind: str, grid: Grid) -> tuple[float, ...]:
    """Two or more edges in rising order within the grid; wavelengths may fall."""
    value: Any = table.values[kind]
    bounds = WAVENUMBER if kind == "edges" else _WAVELENGTH
    if not isinstance(value, list) or len(value) < 2:
        table.faults.add(table.path(kind), "no edges", expected="a list of two or more numbers", found=shown(value))
        return ()
    edges = [checked_number(table.faults, table.path(kind, i), one, bounds) for i, one in enumerate(value)]
    falls = kind == "wavelength" and edges[0] > edges[-1]
    for index, (before, after) in enumerate(pairwise(edges), start=1):
        if after <= before if not falls else after >= before:
            found = f"{after:g} after {before:g}"
            table.faults.add(table.path(kind, index), "not in order", expected="edges in order", found=found)
    nu = grid.wavenumber
    low, high = (edges[0], edges[-1]) if kind == "edges" else tuple(sorted((1e4 / edges[0], 1e4 / edges[-1])))
    if nu.size and (low < nu[0] * (1.0 - 1e-9) or high > nu[-1] * (1.0 + 1e-9)):
        expected, found = f"{nu[0]:.10g} to {nu[-1]:.10g} cm-1", f"{low:.10g} to {high:.10g} cm-1"
        table.faults.add(table.path(kind), "bands beyond the grid", expected=expected, found=found)
    return tuple(edges)
