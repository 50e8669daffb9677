"""What callers hand over, checked at the door: numbers, fractions by name, widths.  All faults are InputErrors."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.errors import InputError, problem

_LONGEST_SHOWN = 60


@dataclass(frozen=True)
class DefaultWidth:
    """Pressure broadening by one gas for the lines for which the list gives no half-width.

    `gamma` is the half-width at half maximum in cm-1/bar at 296 K (a value of HITRAN, in cm-1/atm, divided by
    1.01325); it falls with temperature as (296 K / T) to the power `exponent`; `source` says where both come from,
    and goes into what is reported about the lines they served.
    """

    gamma: float
    exponent: float
    source: str


def shown(value: object) -> str:
    """A value as an error line shows it: short and on one line."""
    text = " ".join(repr(value).split())
    return text if len(text) <= _LONGEST_SHOWN else f"{text[:_LONGEST_SHOWN]}..."


def as_number(name: str, value: object, expected: str = "a number") -> float:
    """A finite number as float.  Raises InputError for anything else, text and booleans among it."""
    if isinstance(value, np.ndarray) and value.ndim == 0:
        value = value[()]
    if isinstance(value, (int, float, np.integer, np.floating)) and not isinstance(value, bool):
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if math.isfinite(number):
            return number
        raise InputError(problem(name, "impossible", expected=expected, found=shown(value)))
    raise InputError(problem(name, "not a number", expected=expected, found=shown(value)))


def as_positive(name: str, value: object, unit: str) -> float:
    """A finite number above 0 as float.  Raises InputError for anything else."""
    expected = f"a number above 0 {unit}"
    number = as_number(name, value, expected)
    if number <= 0.0:
        raise InputError(problem(name, "impossible", expected=expected, found=shown(value)))
    return number


def as_numbers(name: str, values: object, expected: str = "numbers") -> NDArray[np.float64]:
    """Numbers as an array of f8 of one or more dimensions.  Raises InputError for text, booleans and anything else."""
    try:
        array = np.asarray(values)
    except (TypeError, ValueError):  # lists of unequal length
        array = np.asarray(None)
    if array.dtype.kind not in "iuf":
        raise InputError(problem(name, "not numbers", expected=expected, found=shown(values)))
    return np.atleast_1d(array.astype(np.float64))


def as_mapping(name: str, value: object, expected: str) -> dict[str, Any]:
    """A mapping with text for keys as a dict.  Raises InputError for anything else."""
    if not isinstance(value, Mapping) or not all(isinstance(key, str) for key in value):
        raise InputError(problem(name, "not a dict with names as keys", expected=expected, found=shown(value)))
    return dict(value)


def as_fractions(name: str, value: object, expected: str) -> dict[str, float]:
    """Numbers by name, such as mole fractions.  Raises InputError for anything else."""
    return {key: as_number(f"{name}[{key!r}]", one) for key, one in as_mapping(name, value, expected).items()}


def as_default_widths(name: str, value: object) -> dict[str, DefaultWidth]:
    """Default widths by broadener, empty for None.  Raises InputError for what cannot be one."""
    expected = 'a dict such as {"H2": DefaultWidth(0.07, 0.5, "source")}'
    widths = {} if value is None else as_mapping(name, value, expected)
    for key, one in widths.items():
        if not isinstance(one, DefaultWidth):
            raise InputError(problem(f"{name}[{key!r}]", "not a DefaultWidth", expected=expected, found=shown(one)))
        if as_number(f"{name}[{key!r}].gamma", one.gamma) <= 0.0:
            place = f"{name}[{key!r}].gamma"
            raise InputError(problem(place, "impossible", expected="a width above 0 cm-1/bar", found=shown(one.gamma)))
        as_number(f"{name}[{key!r}].exponent", one.exponent)
    return widths


def check_workers(workers: object) -> None:
    """Raise InputError for a number of threads or processes that is not whole and 1 or more."""
    if not isinstance(workers, (int, np.integer)) or isinstance(workers, bool) or workers < 1:
        expected = "a whole number of threads, 1 or more"
        raise InputError(problem("workers", "impossible", expected=expected, found=shown(workers)))
