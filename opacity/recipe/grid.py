"""The section [grid] of a recipe; sizes are checked before any axis is made."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

from opacity import grids
from opacity.errors import InputError
from opacity.recipe.faults import shown
from opacity.recipe.line_lists import WAVENUMBER
from opacity.recipe.model import Grid
from opacity.recipe.sections import PRESSURE, TEMPERATURE
from opacity.recipe.table import Bounds, Table, checked_number

MAX_NODES = 1_000_000

_WAVENUMBER_KEYS = ("start", "stop", "step", "resolving_power")
_WAVENUMBER_EXPECTED = "{ start, stop, step } or { start, stop, resolving_power }"
_AXIS_EXPECTED = "a number, a rising list, or { start, stop, count, spacing }"
_NODES_EXPECTED = "a list of [temperature, pressure]"
# Far below and above anything useful; they keep the number of points within what a float can count.
_STEP = Bounds(1e-9, 1e6, "cm-1")
_RESOLVING_POWER = Bounds(1.0, 1e12)


def read_grid(root: Table, points: bool = True) -> Grid:
    """The section [grid]; without `points` no spectrum is to be stored, and its step may be left out."""
    values = root.table("grid", "a section [grid] with wavenumber, temperature and pressure")
    if values is None:
        return Grid(np.empty(0), (), ())
    table = Table(
        root.faults,
        root.path("grid"),
        values,
        ("wavenumber", "temperature", "pressure", "nodes"),
        later=("interpolation_error",),
    )
    wavenumber = _wavenumbers(table, points)
    if "nodes" in table or table.misspelt("nodes"):
        nodes = _nodes(table) if "nodes" in table else ()
        return Grid(wavenumber, tuple(t for t, _ in nodes), tuple(p for _, p in nodes), nodes)
    temperature = _axis(table, "temperature", TEMPERATURE)
    pressure = _axis(table, "pressure", PRESSURE)
    if len(temperature) * len(pressure) > MAX_NODES:
        table.faults.add(
            table.key, "too many nodes", expected=f"at most {MAX_NODES}", found=len(temperature) * len(pressure)
        )
    return Grid(wavenumber, temperature, pressure)


def _wavenumbers(table: Table, points: bool) -> grids.FloatArray:
    """The wavenumber axis, empty after a fault; its two ends where no points are needed and no step is given."""
    none = np.empty(0)
    values = table.table("wavenumber", _WAVENUMBER_EXPECTED)
    if values is None:
        return none
    axis = Table(table.faults, table.path("wavenumber"), values, _WAVENUMBER_KEYS)
    start, stop = axis.number("start", WAVENUMBER), axis.number("stop", WAVENUMBER)
    if "step" in axis and "resolving_power" in axis:
        axis.faults.add(axis.key, "both step and resolving_power", expected="one of them")
        return none
    make: Callable[[float, float, float], grids.FloatArray] = grids.uniform_wavenumbers
    if "resolving_power" in axis:
        width, make = axis.number("resolving_power", _RESOLVING_POWER), grids.log_wavenumbers
    elif axis.misspelt("resolving_power"):
        return none
    elif not points and "step" not in axis and not axis.misspelt("step"):
        # One point, where there is no range: what asks for one says so.
        width, make = stop - start if stop > start else 1.0, grids.uniform_wavenumbers
    else:
        width = axis.number("step", _STEP)
    if np.isnan([start, stop, width]).any():
        return none
    try:
        return grids.as_wavenumbers(make(start, stop, width))
    except InputError as error:
        where = str(error).partition(": ")[0].split(".")
        axis.faults.add_error(table.path(*where), error)
    except MemoryError:
        axis.faults.add(axis.key, "an axis too long for this machine's memory", remedy="take a larger step")
    return none


def _axis(table: Table, name: str, bounds: Bounds) -> tuple[float, ...]:
    """Temperatures or pressures in rising order; empty after a fault."""
    if name not in table:
        table.missing(name, _AXIS_EXPECTED, "or give nodes instead of temperature and pressure")
        return ()
    value = table.values[name]
    if isinstance(value, dict):
        return _spaced_axis(table, name, value, bounds)
    if isinstance(value, bool | str) or value == []:
        table.faults.add(table.path(name), "not an axis", expected=_AXIS_EXPECTED, found=shown(value))
        return ()
    if not isinstance(value, list):
        numbers = [checked_number(table.faults, table.path(name), value, bounds)]
    else:
        numbers = [checked_number(table.faults, table.path(name, i), v, bounds) for i, v in enumerate(value)]
    for index in range(1, len(numbers)):
        if numbers[index] <= numbers[index - 1]:
            table.faults.add(
                table.path(name, index),
                "not in rising order",
                expected=f"a value above {numbers[index - 1]:g} {bounds.unit}",
                found=f"{numbers[index]:g}",
            )
    return tuple(numbers)


def _spaced_axis(table: Table, name: str, values: dict[str, Any], bounds: Bounds) -> tuple[float, ...]:
    axis = Table(
        table.faults, table.path(name), values, ("start", "stop", "count", "spacing"), later=("interpolation_error",)
    )
    start, stop = axis.number("start", bounds), axis.number("stop", bounds)
    count = axis.count("count", 1, MAX_NODES)
    spacing = axis.choice("spacing", grids.SPACINGS, later=("eighth-root",))
    if not (start > 0.0 and stop > 0.0 and count and spacing):
        return ()
    try:
        points = grids.as_axis(name, bounds.unit, grids.spaced(start, stop, count, spacing))
    except InputError as error:
        where = str(error).partition(": ")[0]
        axis.faults.add_error(axis.path(where) if where in axis else axis.key, error)
        return ()
    return tuple(points.tolist())


def _nodes(table: Table) -> tuple[tuple[float, float], ...]:
    """The (T, P) pairs of a profile in the order given."""
    for name in ("temperature", "pressure"):
        if name in table:
            table.faults.add(table.path(name), "given beside nodes", expected="nodes, or temperature and pressure")
    values = table.values["nodes"]
    if not isinstance(values, list) or not values:
        table.faults.add(table.path("nodes"), "not a list of nodes", expected=_NODES_EXPECTED, found=shown(values))
        return ()
    if len(values) > MAX_NODES:
        table.faults.add(table.path("nodes"), "too many nodes", expected=f"at most {MAX_NODES}", found=len(values))
        return ()
    nodes: dict[tuple[float, float], int] = {}
    for index, value in enumerate(values):
        node = _node(table, index, value)
        if node in nodes:
            found = f"[{node[0]:g}, {node[1]:g}], already nodes[{nodes[node]}]"
            table.faults.add(table.path("nodes", index), "node given twice", expected="each node once", found=found)
        nodes.setdefault(node, index)
    return tuple(nodes)


def _node(table: Table, index: int, value: object) -> tuple[float, float]:
    key = table.path("nodes", index)
    if not isinstance(value, list) or len(value) != 2:
        table.faults.add(key, "not a node", expected="[temperature, pressure]", found=shown(value))
        return (float("nan"), float("nan"))
    return (
        checked_number(table.faults, (*key, 0), value[0], TEMPERATURE),
        checked_number(table.faults, (*key, 1), value[1], PRESSURE),
    )
