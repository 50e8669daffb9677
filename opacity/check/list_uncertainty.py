"""The line list's own uncertainty, as a table's checks state it, made fit to be shown."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from opacity.grids import FloatArray


@dataclass(frozen=True)
class ListUncertainty:
    """Relative uncertainties of the bands' strengths that follow from what a list states of its lines.

    `bands` (n_band, 2), cm-1; `nodes` (n_node, 2), K and bar; `correlated` (all lines off together) and `uncorrelated`
    (each line by itself), (n_node, n_band), NaN where unknown; `facts` what else is said, as words and values.
    """

    bands: FloatArray
    nodes: FloatArray
    correlated: FloatArray
    uncorrelated: FloatArray
    facts: tuple[tuple[str, str], ...]


_WORDS = (
    ("width", "half-widths (relative, times Lorentz's share)"),
    ("position", "positions (in half-widths)"),
    ("not_stated", "share without a stated strength"),
    ("width_not_stated", "share without a stated half-width"),
    ("position_not_stated", "share without a stated position"),
    ("source", "source"),
)


def list_uncertainty(stored: Any) -> ListUncertainty | None:
    """What is stored under "uncertainty"; None where nothing is, or where it has another form."""
    if not isinstance(stored, Mapping):
        return None
    try:
        bands = np.array(stored["bands"], dtype=np.float64).reshape(-1, 2)
        nodes = np.array(stored["nodes"], dtype=np.float64).reshape(-1, 2)
        shape = len(nodes), len(bands)
        # Stored by band, then by node.
        correlated = np.array(stored["strength_correlated"], dtype=np.float64).T
        uncorrelated = np.array(stored["strength_uncorrelated"], dtype=np.float64).T
    except (KeyError, TypeError, ValueError):
        return None
    if 0 in shape or correlated.shape != shape or uncorrelated.shape != shape:
        return None
    facts = [(words, _range_of(stored[key])) for key, words in _WORDS if stored.get(key) not in (None, {}, [], "")]
    return ListUncertainty(bands, nodes, correlated, uncorrelated, tuple(facts))


def _range_of(value: Any) -> str:
    """The least and the largest of stored figures, by band and node; any other value as it is."""
    try:
        numbers = np.array(value, dtype=np.float64)
    except (TypeError, ValueError):
        return plain(value)
    known = numbers[np.isfinite(numbers)]
    if not known.size:
        return "unknown"
    low, high = f"{known.min():.2g}", f"{known.max():.2g}"
    return low if low == high else f"{low} to {high}"


def plain(value: Any) -> str:
    """Plain values from JSON as a phrase: numbers in four figures, pairs of a name and its value, lists by commas."""
    if isinstance(value, Mapping):
        return ", ".join(f"{str(name).replace('_', ' ')} {plain(one)}" for name, one in value.items())
    if isinstance(value, (list, tuple)):
        return ", ".join(f"({plain(one)})" if isinstance(one, (list, Mapping)) else plain(one) for one in value)
    if isinstance(value, float):
        return f"{value:.4g}"
    return "unknown" if value is None else str(value)
