"""Two tables on disk, or a table and columns of numbers, held against each other."""

from __future__ import annotations

import itertools
import math
import os
from collections.abc import Sequence
from contextlib import ExitStack
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.arguments import as_numbers, as_positive, shown
from opacity.check.compare import SpectrumPair, spectrum_pair
from opacity.check.compare_k import KPair, k_pair
from opacity.check.comparison import Comparison
from opacity.check.explain import Explanation
from opacity.check.number_columns import NumberColumns, read_number_columns
from opacity.errors import InputError, OpacityError, TableError, problem
from opacity.pipeline.explain import check_lines, explain_open, recipe_for
from opacity.recipe.model import Recipe
from opacity.tables.draw_pair import PairPicture, draw_pair
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.open import open_table
from opacity.tables.read import Table
from opacity.units import cross_section_factor

_HDF5 = b"\x89HDF\r\n\x1a\n"


def compare(
    a: str | Path,
    b: str | Path,
    *,
    at: tuple[float, float] | None = None,
    columns: tuple[int, int] = (1, 2),
    axis: str = "cm-1",
    unit: str = "cm2/molecule",
    mass: float | None = None,
    bands: float | Sequence[float] | NDArray[Any] | None = None,
    plot: str | Path | None = None,
    recipe: str | Path | Recipe | None = None,
    lines: int = 3,
    quiet: bool = True,
) -> Comparison:
    """How far two tables are apart: A over B, node by node and band by band.

    `a` is a table of cross-sections or k-coefficients, `b` another one, or a text file of columns of numbers.  For the
    latter `at` gives its temperature (K) and pressure (bar), `columns` (from 1) those of axis and cross-section, `axis`
    the unit of its axis ("cm-1", or "um" and "nm" for vacuum wavelengths), `unit` that of its cross-section
    ("cm2/molecule", "m2/molecule", or "cm2/g" with the `mass` in g/mol, by default that of A's molecule).

    Cross-sections are compared at the points that both have, or where these are few at A's, with B interpolated
    linearly; at common nodes, or where there is none at those of one within the grid of the other, interpolated there.
    `bands` is a width or rising edges (cm-1), by default ten bands.  Tables of k-coefficients are compared by the means
    of their bands and, with each other, by transmissions.  `plot` names a PNG of the worst node; `recipe` is A's, by
    default the one its log names, for the `lines` at the worst place (0 for none, which spares reading A's lists).

    Raises TableError for what can't be compared, InputError for an argument that cannot be right.
    """
    check_lines(lines, lowest=0)
    if os.path.isfile(a) and not _is_table(Path(a)):
        raise TableError(problem(a, "not a table", expected="a table first, then what it is compared with"))
    with ExitStack() as stack:
        first = _opened(stack, a)
        second = _other(stack, Path(b), first, at, columns, axis)
        notes = list(_notes(first, second))
        if isinstance(second, NumberColumns):
            factor, words = _factor(first, unit, mass)
            second, notes = second.scaled(factor), [*notes, *words]
        if isinstance(first, Table) and isinstance(second, Table | NumberColumns):
            found = _spectra(first, second, _bands(bands), plot)
            found, more = _with_lines(found, first, recipe, lines, quiet)
            notes += more
        else:
            if bands is not None:
                raise InputError(
                    problem("bands", "those of a table of k-coefficients are its own", remedy="leave it out")
                )
            found = _means(first, second, plot)
        return replace(found, notes=(*notes, *found.notes))


def _opened(stack: ExitStack, path: str | Path) -> Table | KCoefficientTable:
    table = open_table(path)
    stack.callback(table.close)
    return table


def _other(
    stack: ExitStack,
    path: Path,
    first: Table | KCoefficientTable,
    at: tuple[float, float] | None,
    columns: tuple[int, int],
    axis: str,
) -> Table | KCoefficientTable | NumberColumns:
    """What A is compared with."""
    if _is_table(path):
        if at is not None:
            raise InputError(problem("at", f"{path} is a table and has nodes of its own", remedy="leave it out"))
        return _opened(stack, path)
    if isinstance(first, KCoefficientTable):
        what = "columns of numbers are compared with a table of cross-sections"
        raise TableError(problem(path, what, found=f"{first.path}, a table of k-coefficients"))
    if at is None:
        expected = "the temperature (K) and pressure (bar) of the columns"
        raise InputError(problem("at", f"{path} is no table and does not say it", expected=expected, remedy="give T,P"))
    if as_numbers("at", at).shape != (2,):
        expected = "a temperature (K) and a pressure (bar)"
        raise InputError(problem("at", "not a node", expected=expected, found=shown(at)))
    node = as_positive("at[0]", at[0], "K"), as_positive("at[1]", at[1], "bar")
    whole = all(isinstance(one, (int, np.integer)) and not isinstance(one, bool) and one >= 1 for one in columns)
    if len(columns) != 2 or not whole or columns[0] == columns[1]:
        raise InputError(problem("columns", "impossible", expected="two numbers from 1", found=shown(columns)))
    return read_number_columns(path, node, columns, axis)


def _is_table(path: Path) -> bool:
    """Whether a file is to be opened as a table: by its name, or by how it begins."""
    if path.suffix.lower() in (".h5", ".hdf5"):
        return True
    if not os.path.isfile(path):
        return False
    try:
        with open(path, "rb") as file:
            return file.read(len(_HDF5)) == _HDF5
    except OSError:  # said when it is read
        return False


def _bands(bands: object) -> float | tuple[float, ...] | None:
    if bands is None:
        return None
    if isinstance(bands, (int, float, np.number)):
        return as_positive("bands", bands, "cm-1")
    return tuple(as_numbers("bands", bands, "a width, or rising edges in cm-1").tolist())


def _factor(table: Table | KCoefficientTable, unit: str, mass: float | None) -> tuple[float, list[str]]:
    """By what the columns' cross-section is multiplied, and what was assumed for that."""
    words = []
    if mass is not None:
        mass = as_positive("mass", mass, "g/mol")
    elif unit == "cm2/g":
        mass = _mean_mass(table)
        words = [] if mass is None else [f"cm2/g of B taken with a mass of {mass:.6g} g/mol, that of A's isotopologues"]
    return cross_section_factor(unit, mass), words


def _mean_mass(table: Table | KCoefficientTable) -> float | None:
    """The mass (g/mol) of a table's molecule by its isotopologues' abundances, None where it does not tell them."""
    try:
        found = [(float(one["abundance"]), float(one["mass"])) for one in table.provenance["isotopologues"]]
        return sum(share * mass for share, mass in found) / sum(share for share, _ in found)
    except (KeyError, TypeError, ValueError, ZeroDivisionError):
        return None


def _notes(a: Table | KCoefficientTable, b: Table | KCoefficientTable | NumberColumns) -> list[str]:
    """What differs in how the two were made."""
    if isinstance(b, NumberColumns):
        return []
    notes = [] if a.formula == b.formula else [f"different molecules: A is of {a.formula}, B of {b.formula}"]
    differing = [
        words
        for words, path in (
            ("cut-off", ("profile", "cutoff")),
            ("plinth removal", ("profile", "plinth")),
            ("chi factors", ("profile", "chi")),
            ("tolerance", ("profile", "tolerance")),
            ("broadening mixture", ("broadening", "mixture")),
            ("partition function", ("partition_function", "source")),
            ("abundance", ("abundance",)),
            ("line lists", ("line_lists",)),
        )
        # A mixture made of tables says nothing of these.
        if None not in (said := (_said(a.provenance, path), _said(b.provenance, path))) and said[0] != said[1]
    ]
    return [*notes, f"made with different {', '.join(differing)}"] if differing else notes


def _said(provenance: Any, path: tuple[str, ...]) -> Any:
    for key in path:
        provenance = provenance.get(key) if isinstance(provenance, dict) else None
    return provenance


def _spectra(
    a: Table, b: Table | NumberColumns, bands: float | tuple[float, ...] | None, plot: str | Path | None
) -> Comparison:
    pair = spectrum_pair(a, b, bands)
    nodes, worst = pair.compare()
    edges = pair.bands.edges.tolist()
    found = Comparison(
        a=str(a.path),
        b=str(b.path),
        quantity="cross-sections",
        nodes_compared=pair.common.words,
        points_compared=pair.points.words,
        notes=pair.notes,
        bands=tuple(itertools.pairwise(edges)),
        nodes=nodes,
        worst=worst,
    )
    if plot is not None:
        _draw(found, pair, pair.points.wavenumber, None, Path(plot))
    return found


def _means(a: Table | KCoefficientTable, b: Any, plot: str | Path | None) -> Comparison:
    pair = k_pair(a, b)
    nodes, worst = pair.compare()
    found = Comparison(
        a=str(a.path),
        b=str(b.path),
        quantity="band means",
        nodes_compared=pair.common.words,
        points_compared="",
        notes=pair.notes,
        bands=tuple((float(lower), float(upper)) for lower, upper in pair.bounds),
        nodes=nodes,
        worst_transmission=worst,
    )
    if plot is not None:
        _draw(found, pair, pair.bounds.mean(axis=1), pair.bounds, Path(plot))
    return found


def _draw(
    found: Comparison, pair: SpectrumPair | KPair, wavenumber: NDArray[Any], edges: NDArray[Any] | None, path: Path
) -> None:
    node = found.worst_node
    a, b = pair.values((node.temperature, node.pressure))
    where = f"{node.temperature:.6g} K, {node.pressure:.4g} bar"
    many = len(found.nodes) > 1
    heading = f"{where}, {'the worst of ' + str(len(found.nodes)) + ' nodes' if many else 'the one node compared'}"
    far = node.furthest
    ratios = "in a band only B is 0" if math.isinf(far) else f"ratios of bands within {far:.2g} of 1"
    said = [found.points_compared, ratios]
    names = Path(found.a).name, Path(found.b).name
    draw_pair(PairPicture(heading, names, wavenumber, a, b, edges, "; ".join(one for one in said if one)), path)


def _with_lines(
    found: Comparison, a: Table, recipe: str | Path | Recipe | None, lines: int, quiet: bool
) -> tuple[Comparison, list[str]]:
    """The comparison with the lines at its worst place, or a note on why they are not told."""
    if not found.worst or lines == 0:
        return found, []
    place = found.worst[0]
    try:
        explanation: Explanation = explain_open(
            a, recipe_for(a, recipe), place.wavenumber, place.temperature, place.pressure, lines, quiet
        )
    except OpacityError as error:
        if recipe is not None:
            raise
        reason = str(error).split("\n")[0].removeprefix(f"{a.path}: ").partition("; ")[0]
        return found, [f"no lines told for the worst place: {reason}"]
    return replace(found, explanation=explanation), []
