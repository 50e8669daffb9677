"""Commands about line lists: `ingest`, and `check` of a list."""

from __future__ import annotations

from argparse import Namespace
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING, Any

from opacity.cli import text
from opacity.errors import InputError, problem
from opacity.recipe.formats import plain_name

if TYPE_CHECKING:
    from opacity.check.list_bands import ListBand
    from opacity.pipeline.list_check import ListReport

RECORDS = (".par", ".data", ".cat")
DATA_SET = (".def", ".def.json", ".states", ".trans")


def is_list(target: Path) -> bool:
    """Whether a file's name is that of a line list, or of a file that leads to one."""
    return plain_name(target.name).lower().endswith((*RECORDS, *DATA_SET))


def ingest(arguments: Namespace) -> int:
    """`opacity ingest RECIPE`: the line stores of a recipe, and the account of every record."""
    from opacity.pipeline.list_check import store_bands
    from opacity.pipeline.sources import ensure_store
    from opacity.recipe.load import load_recipe
    from opacity.recipe.unverified import refuse_unverified

    recipe = load_recipe(arguments.recipe)
    if recipe.species:
        raise InputError(problem(recipe.path, "has no lists of its own", remedy="ingest the recipes of its species"))
    refuse_unverified(recipe)
    stores: list[dict[str, Any]] = []
    for source in recipe.line_lists:
        if source.format == "catalogue":
            stores.append({"files": list(source.files), "store": None})
            continue
        store, made = ensure_store(recipe, source, Path(arguments.output), arguments.memory, arguments.quiet)
        with store:
            index = store.index
            stores.append(
                {
                    "files": list(source.files),
                    "store": str(store.folder),
                    "made_now": made,
                    "lines": index.lines,
                    "bytes": index.bytes,
                    "ledger": index.ledger.as_dict(),
                    "facts": {key: value for key, value in index.facts.items() if key != "states"},
                    "bands": store_bands(store, recipe),
                }
            )
    if arguments.json:
        plain = [{**one, "bands": [band.as_dict() for band in one.get("bands", ())]} for one in stores]
        print(text.as_json({"stores": plain}))
    else:
        print("\n".join(text.facts(_store_facts(one)) for one in stores))
    return 0


def _store_facts(one: dict[str, Any]) -> list[tuple[str, str]]:
    if one["store"] is None:
        return [("list", ", ".join(one["files"])), ("store", "none: catalogues are read for each build")]
    ledger, size = one["ledger"], one["bytes"] / max(one["lines"], 1)
    lines = [
        ("list", ", ".join(one["files"])),
        ("store", f"{one['store']} ({'made now' if one['made_now'] else 'up to date: no text was read'})"),
        ("read", f"{ledger['read']} records"),
        ("kept", f"{ledger['kept']} lines, {size:.1f} bytes each, widths included"),
    ]
    lines += [("left out", f"{count}: {reason}") for reason, count in ledger["left_out"].items()]
    lines += [("note", f"{count}: {note}") for note, count in ledger["notes"].items()]
    return lines + _band_facts(one["bands"])


def check_list(target: Path, recipe: str | None, as_json: bool) -> int:
    """`opacity check LIST`: what is worth knowing of a list before it is used."""
    from opacity.pipeline.data_set_check import check_data_set
    from opacity.pipeline.list_check import check_records
    from opacity.recipe.load import load_recipe

    look = check_data_set if plain_name(target.name).lower().endswith(DATA_SET) else check_records
    report = look(target, load_recipe(recipe) if recipe else None)
    print(text.as_json(report.as_dict()) if as_json else text.facts(_report_facts(report)))
    return 0


def _report_facts(report: ListReport) -> list[tuple[str, str]]:
    facts = [("list", str(report.target))]
    if report.ledger.read:
        reach = f", {report.reach[0]:.6f} to {report.reach[1]:.6f} cm-1" if report.reach is not None else ""
        facts.append(("lines", f"{report.lines} of {report.molecule}{reach}"))
    facts.append(("of", ", ".join(report.isotopologues)))
    facts += report.rows
    facts += [("left out", f"{count}: {reason}") for reason, count in sorted(report.ledger.left_out.items())]
    facts += [("problem", one) for one in report.problems]
    facts += [("note", f"{count}: {note}") for note, count in sorted(report.ledger.notes.items())]
    facts += [("note", remark) for remark in report.remarks]
    for one in report.findings:
        detail = f"; {one.detail}" if one.detail else ""
        facts.append(("found", f"{one.lines} lines ({text.percent(one.share)} of the strength): {one.what}{detail}"))
    return facts + _band_facts(report.bands)


def _band_facts(bands: Iterable[ListBand]) -> list[tuple[str, str]]:
    return [("band", f"{one.name}: {one.words}; {one.detail}") for one in bands]
