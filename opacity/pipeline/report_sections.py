"""The sections of a report on one table, in the order in which they are read."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from opacity.check.list_uncertainty import ListUncertainty
from opacity.check.table_report import AnyTable, TableReport
from opacity.pipeline import report_html as html
from opacity.pipeline import report_pictures as pictures
from opacity.tables import picture_table
from opacity.tables.k_read import KCoefficientTable
from opacity.tables.svg import Picture

CAUTION = (
    "A table is as good as its line list: a missing isotopologue, hot lines that a list lacks, or a wrong broadening"
    " gas are not seen by any check of arithmetic. This report is no substitute for independent checks: without them,"
    " do not use the table for gas detection, combustion safety, climate decisions or anything else where a wrong"
    " number could harm someone."
)


_MOST_BANDS = 12
"""Rows of a table that somebody is to read; the picture shows all."""


def sections(report: TableReport, table: AnyTable, name: str) -> Iterator[str]:
    """Markup of all sections; `name` starts every id.  The table must be open; TableError for damage."""
    yield from _head(report, table)
    yield from _checks(report)
    yield from _audit(report, name)
    yield from _uncertainty(report.uncertainty, name)
    yield from _spectra(table, name)
    yield from _errors(report, table, name)
    yield from _published(report, name)
    yield from _lost(report, name)
    yield from _assumed(report)
    yield from _provenance(report)
    yield from _references(report)


def _head(report: TableReport, table: AnyTable) -> Iterator[str]:
    kind = "k-coefficients" if isinstance(table, KCoefficientTable) else "cross-sections"
    yield html.paragraph(f"Report on a table of {kind}", "soft")
    yield html.heading(1, report.title if report.formula in report.title else f"{report.title} ({report.formula})")
    yield html.verdict_line(report.outcome, report.verdict)
    yield html.paragraph(f"{report.table}. Checks: {report.basis}.", "soft")
    yield html.paragraph(CAUTION)
    yield html.pairs(report.facts)


def _checks(report: TableReport) -> Iterator[str]:
    yield html.heading(2, "Checks")
    yield html.results(report.rows, "Difference and limit are relative, or absolute for a transmission.")
    if report.other_rows:
        yield html.heading(3, "Other published bands in the table's range")
        yield html.results(report.other_rows, "Not named by the recipe, and not counted in the verdict above.")


def _audit(report: TableReport, name: str) -> Iterator[str]:
    if report.audit or report.middles:
        yield html.heading(2, "The numerical audit")
        yield html.paragraph(
            "How well the numbers follow from the lines: values computed again in another way, at places drawn from a"
            " seed. It is a sample, and says nothing of whether the lines are right.",
            "soft",
        )
        yield html.pairs(report.audit)


def _uncertainty(found: ListUncertainty | None, name: str) -> Iterator[str]:
    if found is None:
        return
    yield html.heading(2, "The list's own uncertainty")
    yield html.paragraph("What the line list says of itself; no arithmetic makes it smaller.", "soft")
    yield from _figures([pictures.uncertainty_picture(f"{name}-uncertainty", found)])
    largest = np.nan_to_num(np.fmax(found.correlated, found.uncorrelated), nan=-1.0).max(axis=0)
    shown = np.sort(np.argsort(-largest, kind="stable")[:_MOST_BANDS])
    rows = []
    for place in shown:
        low, high = found.bands[place]
        spans = [_span(values[:, place]) for values in (found.correlated, found.uncorrelated)]
        rows.append((f"{low:.7g} to {high:.7g}", *spans))
    heads = ("band (cm-1)", "lines off together", "each by itself")
    most = f"; the {len(rows)} of {len(found.bands)} bands with the largest" if len(rows) < len(found.bands) else ""
    of_what = "Strength of the band, relative uncertainty by the upper ends of the classes stated"
    said = f"{of_what}, over {len(found.nodes)} nodes{most}."
    yield html.columns(heads, rows, said)
    yield html.pairs(found.facts)


def _span(values: np.ndarray) -> str:
    known = 100.0 * values[np.isfinite(values)]
    if not known.size:
        return "unknown"
    low, high = float(known.min()), float(known.max())
    return f"{low:.3g} %" if high <= low * 1.005 else f"{low:.3g} to {high:.3g} %"


def _spectra(table: AnyTable, name: str) -> Iterator[str]:
    if isinstance(table, KCoefficientTable):
        yield html.heading(2, "k-distributions")
        yield from _figures([picture_table.k_distributions(table, f"{name}-k")])
        yield from _figures([picture_table.certificate(table, f"{name}-certificate")])
        return
    yield html.heading(2, "Spectra")
    yield from _figures(picture_table.spectra(table, f"{name}-spectra"))


def _errors(report: TableReport, table: AnyTable, name: str) -> Iterator[str]:
    found: list[Picture | None] = []
    if report.closure is not None:
        found.append(pictures.closure_picture(f"{name}-closure", report.closure, table.profile))
        found.append(pictures.resolution_picture(f"{name}-resolution", report.closure, table.profile))
    if report.middles:
        found.append(pictures.middles_picture(f"{name}-middles", report.middles))
    if any(found):
        yield html.heading(2, "Errors over temperature and pressure")
        yield from _figures(found)


def _published(report: TableReport, name: str) -> Iterator[str]:
    found: list[Picture | None] = [*pictures.band_pictures(f"{name}-bands", report.bands)]
    found += pictures.partition_pictures(f"{name}-partition", report.partition)
    if found:
        yield html.heading(2, "Against independent values")
        yield from _figures(found)


def _lost(report: TableReport, name: str) -> Iterator[str]:
    if not (report.losses or report.left_out):
        return
    yield html.heading(2, "What the table does not hold")
    if report.losses:
        picture = pictures.loss_picture(f"{name}-lost", report.losses)
        yield from _figures([picture])
        if picture is None:
            yield html.paragraph("No strength is lost beyond cut-off and grid at the nodes looked at.")
    if report.left_out:
        yield html.heading(3, "Left out of the list")
        yield html.pairs([(_counted(count, "line"), what) for what, count in report.left_out])


def _assumed(report: TableReport) -> Iterator[str]:
    said = [("assumed", what, _counted(count, "line")) for what, count in report.assumed]
    said += [("note", what, _counted(count, "record")) for what, count in report.noted]
    said += [("from memory, accepted", key, words) for key, words in report.from_memory]
    if not (said or report.warnings):
        return
    yield html.heading(2, "Assumed, and accepted from memory")
    if said:
        yield html.columns(("kind", "what", "for"), said)
    if report.warnings:
        yield html.heading(3, "Warnings of the build")
        yield html.listed(report.warnings)


def _provenance(report: TableReport) -> Iterator[str]:
    yield html.heading(2, "What it was made from")
    if report.files:
        rows = [(one.name, one.sha256, one.reference) for one in report.files]
        yield html.columns(("file", "sha256", "reference"), rows)
    if report.packages:
        yield html.heading(3, "Packages")
        yield html.paragraph(", ".join(f"{name} {version}".strip() for name, version in report.packages))
    yield html.heading(3, "The recipe")
    yield html.block(report.recipe)


def _references(report: TableReport) -> Iterator[str]:
    if report.references:
        yield html.heading(2, "To cite")
        yield html.listed(one.text for one in report.references)
        yield html.heading(3, "As BibTeX")
        yield html.paragraph("Made of what the references above say, and of nothing else.", "soft")
        yield html.block("\n\n".join(one.bibtex for one in report.references))


def _counted(count: int, word: str) -> str:
    return f"{count} {word}" if count == 1 else f"{count} {word}s"


def _figures(found: list[Picture | None] | list[Picture]) -> Iterator[str]:
    yield from (html.figure(one) for one in found if one is not None)
