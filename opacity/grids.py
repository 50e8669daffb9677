"""Axes: wavenumbers evenly spaced or evenly spaced in log, temperatures and pressures."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.arguments import as_numbers
from opacity.errors import InputError, problem

FloatArray = NDArray[np.float64]

SPACINGS = ("linear", "log")
MAX_POINTS = 200_000_000

LOWEST_PRESSURE = 1e-12
HIGHEST_PRESSURE = 1e5
"""Pressures (bar) that can be asked for, in a recipe as in a call."""


def uniform_wavenumbers(start: float, stop: float, step: float) -> FloatArray:
    """Points from `start` to `stop` (cm-1), both included, `step` apart, (n_nu,).

    Raises InputError unless 0 <= start <= stop, step > 0 and the span is a whole number of steps.
    """
    if not (math.isfinite(start) and math.isfinite(stop) and 0.0 <= start <= stop):
        raise InputError(
            problem("wavenumber", "impossible range", expected="0 <= start <= stop", found=f"{start} to {stop}")
        )
    if not (math.isfinite(step) and step > 0.0):
        raise InputError(problem("wavenumber.step", "impossible step", expected="a number above 0", found=step))
    steps = (stop - start) / step
    _check_count(steps)
    whole = round(steps)
    if abs(steps - whole) > 1e-6 * max(1.0, min(steps, 1e3)):
        nearest = start + whole * step
        raise InputError(
            problem(
                "wavenumber.stop",
                "the range is not a whole number of steps",
                expected=f"stop = {nearest:.10g} or {start + (math.floor(steps) + (whole <= steps)) * step:.10g}",
                found=stop,
            )
        )
    return np.linspace(start, stop, whole + 1)


def log_wavenumbers(start: float, stop: float, resolving_power: float) -> FloatArray:
    """Points from `start` to `stop` (cm-1), both included, evenly spaced in log, (n_nu,).

    The spacing is the largest that fits the range a whole number of times with
    nu / delta nu at least `resolving_power`.  Raises InputError for an impossible range.
    """
    if not (math.isfinite(start) and math.isfinite(stop) and 0.0 < start <= stop):
        raise InputError(
            problem("wavenumber", "impossible range", expected="0 < start <= stop", found=f"{start} to {stop}")
        )
    if not (math.isfinite(resolving_power) and resolving_power > 0.0):
        raise InputError(
            problem("wavenumber.resolving_power", "impossible", expected="a number above 0", found=resolving_power)
        )
    intervals = math.log(stop / start) * resolving_power
    _check_count(intervals)
    count = max(math.ceil(intervals * (1.0 - 1e-12)), 1 if stop > start else 0) + 1
    points = np.exp(np.linspace(math.log(start), math.log(stop), count))
    points[0], points[-1] = start, stop
    return np.asarray(points, dtype=np.float64)


def _check_count(intervals: float) -> None:
    if not intervals < MAX_POINTS:
        raise InputError(
            problem(
                "wavenumber",
                "too many points",
                expected=f"at most {MAX_POINTS}",
                found=f"{intervals + 1:.0f}" if intervals < 1e15 else f"{intervals:.3g}",
            )
        )


def spaced(start: float, stop: float, count: int, spacing: str) -> FloatArray:
    """`count` values from `start` to `stop`, both included, "linear" or "log" spaced."""
    if spacing not in SPACINGS:
        raise InputError(problem("spacing", "unknown", expected=" or ".join(SPACINGS), found=spacing))
    if not (math.isfinite(start) and math.isfinite(stop) and 0.0 < start <= stop):
        raise InputError(problem("axis", "impossible range", expected="0 < start <= stop", found=f"{start} to {stop}"))
    if count < 1 or (count == 1 and start != stop) or (count > 1 and start == stop):
        raise InputError(problem("count", "does not fit the range", expected="2 or more values", found=count))
    if spacing == "linear":
        values = np.linspace(start, stop, count)
    else:
        values = np.exp(np.linspace(math.log(start), math.log(stop), count))
    # Users ask for nodes by the number they would write, 1e-4 and not 9.999999999999991e-05.
    values = np.array([float(f"{value:.12g}") for value in values])
    values[0], values[-1] = start, stop
    return values


def as_axis(name: str, unit: str, values: Sequence[float] | NDArray[Any] | float) -> FloatArray:
    """A strictly rising axis of positive finite numbers as f8, (n,).

    Raises InputError naming the axis where a value is not finite, not positive or out of order.
    """
    axis = as_numbers(name, values, f"numbers in {unit}")
    if axis.ndim != 1 or axis.size == 0:
        raise InputError(problem(name, "not an axis", expected="one or more numbers", found=f"shape {axis.shape}"))
    bad = np.flatnonzero(~np.isfinite(axis) | (axis <= 0.0))
    if bad.size:
        raise InputError(
            problem(name, "impossible value", expected=f"finite and above 0 {unit}", found=axis[bad[0]].item())
        )
    falls = np.flatnonzero(np.diff(axis) <= 0.0)
    if falls.size:
        raise InputError(
            problem(
                name,
                "not in rising order",
                expected=f"a value above {axis[falls[0]]:g}",
                found=f"{axis[falls[0] + 1]:g}",
            )
        )
    return axis


def as_wavenumbers(values: Sequence[float] | NDArray[Any]) -> FloatArray:
    """A strictly rising wavenumber axis (cm-1) as contiguous f8, (n_nu,); 0 is allowed as the first point."""
    axis = np.ascontiguousarray(as_numbers("wavenumber", values, "numbers in cm-1"))
    if axis.ndim == 1 and axis.size and axis[0] == 0.0:
        if axis.size > 1:
            as_axis("wavenumber", "cm-1", axis[1:])
        return axis
    return as_axis("wavenumber", "cm-1", axis)


def cell_widths(wavenumber: FloatArray) -> FloatArray:
    """Trapezoid weights of the points of an axis (cm-1), (n_nu,); their sum is the axis's span."""
    if wavenumber.size < 2:
        return np.zeros_like(wavenumber)
    widths = np.zeros_like(wavenumber)
    gaps = np.diff(wavenumber)
    widths[:-1] += 0.5 * gaps
    widths[1:] += 0.5 * gaps
    return widths
