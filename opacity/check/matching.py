"""What two tables have in common: nodes, and points of the wavenumber axis."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from opacity.errors import TableError, problem
from opacity.grids import FloatArray
from opacity.tables.interpolate import same_number

ROUNDING = 1e-4
"""Points closer than this share of the smaller step are the same: they differ by rounding, as it is printed."""


class Nodes(Protocol):
    """What is asked of a table, or of a spectrum at one node, to find what it has in common with another."""

    @property
    def path(self) -> Path:
        """Its file."""

    @property
    def temperature(self) -> FloatArray:
        """Temperatures (K)."""

    @property
    def pressure(self) -> FloatArray:
        """Pressures (bar)."""

    @property
    def profile(self) -> bool:
        """Whether temperatures and pressures go in pairs."""


@dataclass(frozen=True)
class CommonNodes:
    """Temperatures (K) and pressures (bar) at which both have values, and what is to be said of them.

    `interpolated` names the table whose values are interpolated there.
    """

    nodes: tuple[tuple[float, float], ...]
    words: str
    interpolated: str | None = None


def nodes_of_table(table: Nodes) -> list[tuple[float, float]]:
    """All nodes (K, bar), temperature slowest."""
    t, p = table.temperature.tolist(), table.pressure.tolist()
    return list(zip(t, p, strict=True)) if table.profile else [(one, other) for one in t for other in p]


def common_nodes(a: Nodes, b: Nodes) -> CommonNodes:
    """The nodes that both have; where there is none, those of A at which B can be interpolated, or of B for A.

    Raises TableError where there is nothing to compare.
    """
    mine, theirs = nodes_of_table(a), nodes_of_table(b)
    shared = tuple(node for node in mine if _has(theirs, node))
    if shared:
        left = [(len(nodes) - len(shared), name) for name, nodes in (("A", mine), ("B", theirs))]
        without = " and ".join(f"{count} of {name}" for count, name in left if count > 0)
        words = f"{_counted(len(shared), 'common node')}, without {without}" if without else "all nodes of both"
        return CommonNodes(shared, words)
    for name, other, table, nodes in (("B", "A", b, mine), ("A", "B", a, theirs)):
        inside = tuple(node for node in nodes if not table.profile and _within(table, node))
        if inside:
            words = f"no common node: {name} interpolated at {_counted(len(inside), 'node')} of {other} in its range"
            return CommonNodes(inside, words, name)
    found = "; ".join(f"{name} {_span(one)}" for name, one in (("A", a), ("B", b)))
    what = "no node in common, and none of the one within the grid of the other"
    raise TableError(problem(f"{a.path}, {b.path}", what, found=found))


def _has(nodes: Sequence[tuple[float, float]], wanted: tuple[float, float]) -> bool:
    return any(same_number(wanted[0], t) and same_number(wanted[1], p) for t, p in nodes)


def _within(table: Nodes, node: tuple[float, float]) -> bool:
    axes = zip((table.temperature, table.pressure), node, strict=True)
    return all(axis[0] <= value <= axis[-1] or _near_end(axis, value) for axis, value in axes)


def _near_end(axis: FloatArray, value: float) -> bool:
    return same_number(value, float(axis[0])) or same_number(value, float(axis[-1]))


def _span(table: Nodes) -> str:
    t, p = table.temperature, table.pressure
    words = f"{t.min():.6g} to {t.max():.6g} K, {p.min():.6g} to {p.max():.6g} bar"
    return f"{words} along a profile" if table.profile else words


def _counted(number: int, word: str) -> str:
    return f"{number} {word}" if number == 1 else f"{number} {word}s"


@dataclass(frozen=True)
class CommonPoints:
    """Points at which two spectra are compared: `wavenumber` (n,), cm-1, and which of A's they are.

    `of_b` are the same points among B's, None where B, whose points are `b_wavenumber`, is interpolated.
    """

    wavenumber: FloatArray
    of_a: NDArray[np.intp]
    of_b: NDArray[np.intp] | None
    b_wavenumber: FloatArray
    words: str

    def pair(self, a: FloatArray, b: FloatArray) -> tuple[FloatArray, FloatArray]:
        """The values of two whole spectra at the common points, (n,) each."""
        if self.of_b is None:
            return a[self.of_a], np.interp(self.wavenumber, self.b_wavenumber, b)
        return a[self.of_a], b[self.of_b]


def common_points(path: str, a: FloatArray, b: FloatArray) -> CommonPoints:
    """Where to compare spectra on the rising axes `a` and `b` (cm-1).

    At the points of A that B has too; where these are less than half of what the one with fewer points has in the
    overlap, at all points of A there, with B interpolated linearly.  Raises TableError without two points to compare.
    """
    lower, upper = max(a[0], b[0]), min(a[-1], b[-1])
    slack = [ROUNDING * float(np.diff(axis).min(initial=np.inf)) for axis in (a, b) if axis.size > 1]
    margin = min(slack, default=0.0)
    mine = np.flatnonzero((a >= lower - margin) & (a <= upper + margin))
    theirs = np.flatnonzero((b >= lower - margin) & (b <= upper + margin))
    if mine.size < 2 or b.size < 2:
        raise _apart(path, a, b)
    nearest = _nearest(b, a[mine])
    step = np.minimum(_steps(a)[mine], _steps(b)[nearest])
    same = np.abs(a[mine] - b[nearest]) <= ROUNDING * step
    shared = int(np.count_nonzero(same))
    if shared >= 2 and 2 * shared >= min(mine.size, theirs.size):
        words = f"{shared} points that both have"
        if shared == a.size == b.size:
            words = f"the same {shared} points"
        elif shared < max(mine.size, theirs.size):
            words += f" (A has {mine.size} and B {theirs.size} in the overlap)"
        return CommonPoints(a[mine[same]], mine[same], nearest[same], b, words)
    inside = mine[(a[mine] >= b[0]) & (a[mine] <= b[-1])]
    if inside.size < 2:
        raise _apart(path, a, b)
    words = f"{inside.size} points of A; the grids differ, so that B is interpolated linearly between its own points"
    return CommonPoints(a[inside], inside, None, b, words)


def _nearest(axis: FloatArray, values: FloatArray) -> NDArray[np.intp]:
    right = np.clip(np.searchsorted(axis, values), 1, axis.size - 1)
    return np.asarray(np.where(values - axis[right - 1] <= axis[right] - values, right - 1, right), dtype=np.intp)


def _steps(axis: FloatArray) -> FloatArray:
    """The smaller distance of each point from its neighbours."""
    gaps = np.diff(axis)
    return np.asarray(np.minimum(np.append(gaps, np.inf), np.insert(gaps, 0, np.inf)), dtype=np.float64)


def _apart(path: str, a: FloatArray, b: FloatArray) -> TableError:
    found = f"A {_reach(a)}, B {_reach(b)}"
    return TableError(problem(path, "no overlap of the wavenumbers", expected="two points or more", found=found))


def _reach(axis: FloatArray) -> str:
    return f"{axis[0]:.10g} to {axis[-1]:.10g} cm-1"
