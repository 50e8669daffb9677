"""k-coefficient tables made of others: with other points in g out of their fine cells, and of mixtures."""

from __future__ import annotations

import json
from collections.abc import Callable, Sequence
from contextlib import ExitStack
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from opacity.check.k_mixed import MixedErrors
from opacity.check.k_nodes import at_all_nodes, certificate_of, follows, place_of, points_of, within
from opacity.check.result import AGREES, CheckResult, finite
from opacity.check.spectra import nodes_of
from opacity.errors import InputError, TableError, problem
from opacity.grids import FloatArray
from opacity.k_coefficient.choose import Wanted
from opacity.k_coefficient.mix import mix
from opacity.k_coefficient.quadrature import INTERVALS, GPoints, g_points, k_from_cells
from opacity.pipeline.folders import make_folder
from opacity.pipeline.k_choose import MOST_ROUNDS, NodeCells, choose_certified
from opacity.pipeline.progress import Progress
from opacity.provenance import VERSION, file_sha256, package_versions
from opacity.tables.k_model import KTable
from opacity.tables.k_read import KCoefficientTable, open_k_table
from opacity.tables.k_write import KInProgress, write_k_table

OF_THE_CELLS = ("closure", "fine cells", "band means", "audit")
"""Results that are about the fine cells, which other points in g leave as they are."""
OF_THE_CHOICE = ("weights", "target", "trained_error", "trained_nodes")
"""What a certificate says about how the points were chosen, which new ones do not inherit."""
_ROUNDING = 1e-6


@dataclass(frozen=True)
class Values:
    """Values by node, made when they are asked for."""

    shape: tuple[int, ...]
    make: Callable[[tuple[int, ...]], FloatArray]

    def __getitem__(self, node: Any, /) -> FloatArray:
        return self.make(tuple(node))


def choose_again(
    tables: Sequence[Path], wanted: Wanted, folder: Path, seed: int = 0, quiet: bool = False
) -> list[tuple[Path, dict[str, Any]]]:
    """Tables with other points in g, the same for all of them, under their names in `folder`; each with its checks.

    The points are made of the fine cells, which the tables must hold; no line is read.  Raises TableError for tables
    without, or of different bands, InputError where a file would be written over its source or a target is not met.
    """
    _check_wanted(wanted)
    with ExitStack() as stack:
        opened = [stack.enter_context(open_k_table(path)) for path in tables]
        for table in opened:
            _refuse_over(table.path, folder / table.path.name)
            if table.cell_bounds is None:
                what, remedy = "holds no fine cells to choose points from", "build it from its recipe"
                raise TableError(problem(table.path, what, remedy=remedy))
            _same_bands(opened[0], table)
        if len({table.path.name for table in opened}) < len(opened):
            raise InputError(problem("tables", "two of one name", expected="names that differ"))
        with Progress("g points", MOST_ROUNDS, "rounds of fitting", quiet) as progress:
            cells = [_cells_by_number(table) for table in opened]
            points, how, trained = choose_certified(wanted, cells, seed, progress.step)
        make_folder(folder)
        found = []
        for table, one, rows in zip(opened, cells, trained, strict=True):
            nodes = {"trained_nodes": [list(one.nodes[row]) for row in rows]} if rows.size else {}
            found.append(_chosen(table, points, {**how, **nodes}, folder, quiet))
        return found


def _check_wanted(wanted: Wanted) -> None:
    """Before a table is opened: a number of points or an error that can be, of a quadrature that they go with."""
    if wanted.quadrature != "matched" and wanted.needs_cells:
        expected, found = "a number of points, and fixed weights", wanted.quadrature
        raise InputError(problem("quadrature", "only matched is made to fit", expected=expected, found=found))
    if wanted.count is not None:
        g_points(wanted.count, wanted.quadrature)
    elif not 0.0 < wanted.transmission_error < 1.0:
        expected, found = "a number between 0 and 1", f"{wanted.transmission_error:g}"
        raise InputError(problem("transmission_error", "impossible", expected=expected, found=found))


def _cells_by_number(table: KCoefficientTable) -> NodeCells:
    nodes = nodes_of(table)
    return NodeCells(lambda row: table.cells(*nodes[row][0]), tuple(node[1:] for node in nodes))


def _chosen(
    table: KCoefficientTable, points: GPoints, how: dict[str, Any], folder: Path, quiet: bool
) -> tuple[Path, dict[str, Any]]:
    nodes = nodes_of(table)
    made = replace(
        _table_of(table, points),
        k_coefficient=Values((*table.shape[:-1], points.count), lambda node: k_from_cells(table.cells(*node), points)),
    )

    def check(written: KInProgress) -> dict[str, Any]:
        with Progress("checks", len(nodes), "nodes", quiet) as progress:
            found = at_all_nodes(written, nodes, progress.step, None)
        rows = [follows(found, points.quadrature in INTERVALS), within(found.bands, nodes, written, how.get("target"))]
        before, old = table.checks, table.checks.get("certificate", {})
        kept = [row for row in before.get("results", []) if row.get("check") in OF_THE_CELLS]
        of_k = {"two_layers": None, "middle": None, "middle_mean": None}
        sampled = [{**one, **of_k} for one in old.get("sampled", [])]
        kept_of_old = {name: value for name, value in old.items() if name not in OF_THE_CHOICE}
        certificate = {**kept_of_old, **how, **certificate_of(found.bands), "sampled": sampled}
        results = [row.as_dict() for row in rows] + kept
        return dict(finite({**before, "results": results, "certificate": certificate}))

    path = folder / table.path.name
    return path, write_k_table(path, made, check)


def _table_of(table: KCoefficientTable, points: GPoints) -> KTable:
    """A table's axes, texts and cells, with other points in g and still without k."""
    return KTable(
        title=table.title,
        formula=table.formula,
        temperature=table.temperature,
        pressure=table.pressure,
        band_bounds=table.band_bounds,
        g=points.g if points.g.ndim == 1 else points.g.mean(axis=0),
        g_bounds=np.stack([points.bounds[..., :-1], points.bounds[..., 1:]], axis=-1),
        g_weight=points.weights,
        k_coefficient=Values((0,), lambda node: np.empty(0)),
        quadrature=points.quadrature,
        recipe=table.recipe,
        provenance=table.provenance,
        checks={},
        profile=table.profile,
        fine_cells=_cells_of(table),
        cell_bounds=table.cell_bounds,
        planck_mean=table.planck_mean,
        rosseland_mean=table.rosseland_mean,
    )


def _cells_of(table: KCoefficientTable) -> Values | None:
    if table.cell_bounds is None:
        return None
    return Values((*table.shape[:-1], len(table.cell_bounds)), lambda node: table.cells(*node))


def mix_tables(parts: Sequence[tuple[Path, float]], path: Path, quiet: bool = False) -> tuple[Path, dict[str, Any]]:
    """The table of a mixture by random overlap, per molecule of it, written to `path`; its checks.

    `parts` are tables and mole fractions (sum at most 1).  Where all of them hold fine cells, the error of rebinning
    is certified at every node, against the product of the species' transmissions.  Raises TableError for tables that
    do not share nodes, bands, quadrature and weights, InputError for impossible fractions.
    """
    total = sum(fraction for _, fraction in parts)
    if not parts or not all(0.0 < fraction <= 1.0 for _, fraction in parts) or total > 1.0 + _ROUNDING:
        expected = "fractions above 0 with a sum of at most 1"
        raise InputError(problem("fractions", "impossible", expected=expected, found=f"sum {total:g}"))
    with ExitStack() as stack:
        opened = [stack.enter_context(open_k_table(one)) for one, _ in parts]
        fractions = [fraction for _, fraction in parts]
        first = opened[0]
        for table in opened:
            _refuse_over(table.path, path)
            _same_bands(first, table)
            _same_nodes_and_points(first, table)
        points = points_of(first)

        def mixed(node: tuple[int, ...]) -> FloatArray:
            return mix([table.k(*node) for table in opened], fractions, points)

        shares = " + ".join(f"{fraction:g} {table.formula}" for table, fraction in zip(opened, fractions, strict=True))
        made = replace(
            _table_of(first, points),
            title=f"k-coefficients of a mixture ({shares})",
            formula=shares,
            k_coefficient=Values(first.shape, mixed),
            recipe="".join(
                f"[[mixed]]\ntable = {json.dumps(table.path.name)}\nfraction = {fraction!r}\n"
                for table, fraction in zip(opened, fractions, strict=True)
            ),
            provenance=_provenance(opened, fractions),
            fine_cells=None,
            cell_bounds=None,
            planck_mean=_mean(opened, fractions),
            rosseland_mean=None,
        )
        make_folder(path.parent)
        return path, write_k_table(path, made, lambda written: _mixture_checks(written, opened, fractions, quiet))


def _mean(opened: list[KCoefficientTable], fractions: list[float]) -> FloatArray | None:
    """Planck means add; Rosseland means do not."""
    means = [table.planck_mean for table in opened]
    found = [one * fraction for one, fraction in zip(means, fractions, strict=True) if one is not None]
    return np.sum(found, axis=0) if len(found) == len(means) else None


def _mixture_checks(
    written: KInProgress, opened: list[KCoefficientTable], fractions: list[float], quiet: bool
) -> dict[str, Any]:
    nodes = nodes_of(written)
    warnings = ["random overlap: lines of the species are taken to lie anywhere beside each other"]
    if any(table.cell_bounds is None for table in opened):
        return {"results": [], "warnings": [*warnings, "without fine cells the rebinning is not certified"]}
    errors = MixedErrors(fractions, len(written.band_bounds))
    with Progress("checks", len(nodes), "nodes", quiet) as progress:
        for number, (index, _, pressure) in enumerate(nodes):
            cells = [table.cells(*index) for table in opened]
            errors.add(number, written.k(*index), written.g_weight, cells, pressure)
            progress.step()
    bands = errors.found()
    worst = max(bands, key=lambda one: abs(one.largest))
    mean = max(abs(one.mean) for one in bands)
    detail = (
        f"every band within {abs(worst.largest):.1e} of the product of the species' transmissions at all"
        f" {len(nodes)} nodes, worst at {place_of(nodes[worst.node])}; means within {mean:.1e}"
    )
    row = CheckResult("transmission", AGREES, detail, worst.largest)
    certificate = {"of": "rebinning alone: what random overlap costs is not in it", **certificate_of(bands)}
    return dict(finite({"results": [row.as_dict()], "warnings": warnings, "certificate": certificate}))


def _provenance(opened: list[KCoefficientTable], fractions: list[float]) -> dict[str, Any]:
    origins = [table.provenance for table in opened]
    parts = zip(opened, fractions, origins, strict=True)
    return {
        "program": {"name": "opacity", "version": VERSION},
        "packages": package_versions(),
        "line_lists": [entry for one in origins for entry in one.get("line_lists", [])],
        "mixed": [
            {"table": table.path.name, "sha256": file_sha256(table.path), "fraction": x, "provenance": origin}
            for table, x, origin in parts
        ],
        "references": list(dict.fromkeys(words for one in origins for words in one.get("references", []))),
    }


def _refuse_over(source: Path, path: Path) -> None:
    if path.exists() and path.samefile(source):
        raise InputError(problem(path, "would be written over its source", remedy="choose another folder or name"))


def _same_bands(first: KCoefficientTable, other: KCoefficientTable) -> None:
    if first.band_bounds.shape != other.band_bounds.shape or not np.allclose(
        first.band_bounds, other.band_bounds, rtol=1e-12, atol=0.0
    ):
        expected, found = f"those of {first.path}: {_bands(first)}", _bands(other)
        raise TableError(problem(other.path, "has other bands", expected=expected, found=found))


def _bands(table: KCoefficientTable) -> str:
    bounds = table.band_bounds
    return f"{len(bounds)} bands, {bounds[0, 0]:.8g} to {bounds[-1, 1]:.8g} cm-1"


def _same_nodes_and_points(first: KCoefficientTable, other: KCoefficientTable) -> None:
    axes = [(first.temperature, other.temperature), (first.pressure, other.pressure)]
    if first.profile != other.profile or not all(np.array_equal(a, b) for a, b in axes):
        remedy = "build both on one grid"
        raise TableError(problem(other.path, f"has other temperatures or pressures than {first.path}", remedy=remedy))
    same = first.quadrature == other.quadrature and first.g_weight.shape == other.g_weight.shape
    if not same or not np.allclose(first.g_weight, other.g_weight, rtol=0.0, atol=1e-12):
        raise TableError(
            problem(
                other.path,
                f"has other points in g than {first.path}",
                remedy=f"choose points for both: `opacity g-points {first.path} {other.path} -o DIR`",
            )
        )
