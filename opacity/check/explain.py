"""Which lines make a value of a cross-section table: the exact sum at one point, line by line."""

from __future__ import annotations

import heapq
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from typing import Any, Protocol

import numpy as np

from opacity.check.audit import PLINTH_ROUNDING, STORAGE_ROUNDING, relative_errors
from opacity.check.result import finite
from opacity.constants import REFERENCE_TEMPERATURE
from opacity.cross_sections.exact import exact_parts
from opacity.cross_sections.prepare import NodeLines, PreparedLines
from opacity.cross_sections.source import LINES_AT_ONCE
from opacity.errors import MoleculeError, TableError, problem
from opacity.grids import FloatArray
from opacity.line_list.model import LineList
from opacity.recipe.model import Profile
from opacity.tables.interpolate import same_number
from opacity.tables.read import Table

TEN = 10
"""The largest parts whose share of the sum is told."""


@dataclass(frozen=True)
class Width:
    """What broadens a line by one gas: `gamma` (HWHM) and `shift` in cm-1/bar at 296 K, `exponent` of temperature.

    `fraction` is the gas's mole fraction, `source` where the width comes from (`file:line`, or a default), `notes`
    what was assumed.
    """

    broadener: str
    fraction: float
    gamma: float
    exponent: float
    shift: float
    source: str
    notes: tuple[str, ...]


@dataclass(frozen=True)
class LinePart:
    """One line's part in a value of cross-section.

    `value` cm2/molecule and `share` of the exact sum; `wavenumber` as listed and `shift` by pressure, cm-1; `distance`
    from the shifted centre to the point, cm-1; `strength` at the temperature and `strength_296` at 296 K, cm/molecule
    with the abundances chosen, the latter None where the partition function does not reach it; `lower_energy`,
    `lorentz` and `doppler` (HWHM at the temperature and pressure), cm-1.  `file` and `record` (its line number) say
    where the line stands; `upper_state` and `lower_state` are ids of the states file of a list in ExoMol format.
    """

    value: float
    share: float
    wavenumber: float
    distance: float
    shift: float
    isotopologue: str
    strength: float
    strength_296: float | None
    lower_energy: float
    lorentz: float
    doppler: float
    file: str = ""
    record: int = 0
    upper_state: int | None = None
    lower_state: int | None = None
    widths: tuple[Width, ...] = ()


@dataclass(frozen=True)
class Explanation:
    """Why a value of a table is what it is.

    `wavenumber` (cm-1) is the grid point nearest the one `asked` for; `value` the table's and `exact` the sum of all
    lines' parts there, cm2/molecule; `at_node` whether temperature (K) and pressure (bar) are a node, where the value
    is stored; else it is interpolated, and the exact sum is made at this very temperature and pressure.
    `difference` is value / exact - 1 (None where the exact sum is 0 and the value is not); `within` whether the value
    is within the table's `tolerance` of the exact sum, None where it is interpolated.  `lines` are in reach, that is
    within `cutoff` (cm-1); `share_of_ten` is what the ten largest parts make of the sum; `parts` are the largest.
    """

    table: str
    recipe: str
    asked: float
    wavenumber: float
    temperature: float
    pressure: float
    at_node: bool
    value: float
    exact: float
    difference: float | None
    tolerance: float
    within: bool | None
    cutoff: float
    lines: int
    share_of_ten: float
    parts: tuple[LinePart, ...]

    def as_dict(self) -> dict[str, Any]:
        """The explanation as plain values for JSON."""
        return dict(finite(asdict(self)))


@dataclass(frozen=True)
class Point:
    """A wavenumber (cm-1), temperature (K) and pressure (bar) of a table, and the value there (cm2/molecule)."""

    wavenumber: float
    temperature: float
    pressure: float
    value: float
    at_node: bool


class TraceableLines(Protocol):
    """The lines of a table by window, as listed and as prepared."""

    def count(self, lower: float, upper: float) -> int:
        """How many lines lie between two wavenumbers (cm-1), ends included."""

    def window(self, lower: float, upper: float) -> LineList:
        """Those lines, less those of isotopologues that the mixture has none of."""

    def prepare(self, lines: LineList) -> PreparedLines:
        """The lines made ready, all of them and in their order."""


@dataclass(frozen=True)
class Weighed:
    """The exact sum at a point: its `total` (cm2/molecule), the same before plinth removal, how many lines are in
    reach, and the largest parts, each with its row as a list of one line.
    """

    total: float
    whole: float
    lines: int
    share_of_ten: float
    largest: tuple[tuple[LinePart, LineList], ...]


def point_of(table: Table, wavenumber: float, temperature: float, pressure: float) -> Point:
    """The point of a table nearest a wavenumber (cm-1), and its value at a temperature (K) and pressure (bar).

    Raises TableError for what lies outside of the table.
    """
    nu = table.wavenumber
    ends = [float(nu[0]), float(nu[-1])]
    # Half a step beyond an end still has the end for its nearest point, as everywhere.
    margin = [0.5 * float(gap) for gap in (np.diff(nu[:2]).sum(), np.diff(nu[-2:]).sum())]
    if not ends[0] - margin[0] <= wavenumber <= ends[1] + margin[1]:
        _refuse(table, "wavenumber", "cm-1", ends, wavenumber)
    if not table.profile:
        for name, unit, axis, asked in (
            ("temperature", "K", table.temperature, temperature),
            ("pressure", "bar", table.pressure, pressure),
        ):
            inside = axis[0] <= asked <= axis[-1] or any(same_number(asked, end) for end in (axis[0], axis[-1]))
            if not inside:
                _refuse(table, name, unit, [float(axis[0]), float(axis[-1])], asked)
    values = table.at(temperature, pressure)
    place = int(np.argmin(np.abs(nu - wavenumber)))
    t, p = _own(table.temperature, temperature), _own(table.pressure, pressure)
    at_node = table.profile or (t is not None and p is not None)
    return Point(float(nu[place]), t or temperature, p or pressure, float(values[place]), at_node)


def _refuse(table: Table, name: str, unit: str, ends: list[float], asked: float) -> None:
    expected, found = f"{ends[0]:.10g} to {ends[1]:.10g} {unit}", f"{asked:.10g} {unit}"
    raise TableError(problem(table.path, f"{name} outside the table", expected=expected, found=found))


def _own(axis: FloatArray, value: float) -> float | None:
    """An axis's own value that differs from another by rounding only, None where there is none."""
    nearest = float(axis[np.argmin(np.abs(axis - value))])
    return nearest if same_number(value, nearest) else None


def weigh(lines: TraceableLines, point: Point, profile: Profile, most: int) -> Weighed:
    """The exact sum at a point line by line, with its `most` largest parts, largest first.

    The lines in reach are gone through some at a time, so that any number of them may be.
    """
    cutoff = profile.cutoff.at(point.pressure)
    choice = cutoff, profile.plinth, profile.chi_table
    total, whole, count = 0.0, 0.0, 0
    best: list[tuple[float, int, LinePart, LineList]] = []
    keep = max(most, TEN)
    for listed in _pieces(lines, point.wavenumber - cutoff - 1e-6, point.wavenumber + cutoff + 1e-6):
        prepared = lines.prepare(listed)
        node = prepared.at(point.temperature, point.pressure)
        index, values = exact_parts(node, point.wavenumber, *choice)
        total += float(values.sum())
        if profile.plinth:
            whole += float(exact_parts(node, point.wavenumber, cutoff, False, profile.chi_table)[1].sum())
        largest = np.argsort(-values, kind="stable")[:keep]
        largest = largest[values[largest] > 0.0]
        reference = _at_reference(prepared)
        for place in largest.tolist():
            row = int(index[place])
            part = _part(float(values[place]), row, prepared, node, reference, point.wavenumber)
            # The number in between keeps the order of equal parts, which do not compare.
            best.append((part.value, -(count + place), part, listed.select(np.array([row]))))
        count += index.size
        best = heapq.nlargest(keep, best, key=lambda one: one[:2])
    share = sum(one[0] for one in best[:TEN]) / total if total > 0.0 else 0.0
    return Weighed(total, whole, count, share, tuple((one[2], one[3]) for one in best[:most]))


def _pieces(lines: TraceableLines, lower: float, upper: float) -> Iterator[LineList]:
    """The lines between two wavenumbers in parts that can be held at once, those without a line left out."""
    middle = 0.5 * (lower + upper)
    if lines.count(lower, upper) <= LINES_AT_ONCE or not lower < middle < upper:
        found = lines.window(lower, upper)
        if len(found):
            yield found
        return
    yield from _pieces(lines, lower, middle)
    yield from _pieces(lines, float(np.nextafter(middle, np.inf)), upper)


def _at_reference(prepared: PreparedLines) -> FloatArray | None:
    """S(296 K) of all lines, None where a partition function does not reach that temperature."""
    try:
        return prepared.strengths(REFERENCE_TEMPERATURE)
    except MoleculeError:
        return None


def _part(
    value: float, row: int, prepared: PreparedLines, node: NodeLines, reference: FloatArray | None, point: float
) -> LinePart:
    return LinePart(
        value=value,
        share=0.0,
        wavenumber=float(node.wavenumber[row]),
        distance=point - float(node.centre[row]),
        shift=float(node.centre[row] - node.wavenumber[row]),
        isotopologue=prepared.isotopologues[int(prepared.isotopologue[row])].formula,
        strength=float(node.strength[row]),
        strength_296=None if reference is None else float(reference[row]),
        lower_energy=float(prepared.lower_energy[row]),
        lorentz=float(node.lorentz[row]),
        doppler=float(node.doppler[row]),
    )


def judge_value(point: Point, found: Weighed, profile: Profile) -> tuple[float | None, bool | None]:
    """value / exact - 1, None where only the exact sum is 0; and whether it is within the tolerance, at nodes."""
    difference: float | None = None
    if found.total > 0.0:
        difference = point.value / found.total - 1.0
    elif point.value == 0.0:
        difference = 0.0
    if not point.at_node:
        return difference, None
    rounding = PLINTH_ROUNDING * found.whole if profile.plinth else 0.0
    error = relative_errors(np.array([point.value]), np.array([found.total]), rounding)
    return difference, bool(error[0] <= profile.tolerance + STORAGE_ROUNDING)
