"""Commands about line lists: `ingest`, and `check` of a list."""

from __future__ import annotations

from argparse import Namespace
from pathlib import Path
from typing import Any

from opacity.cli import text

LIST_ENDINGS = (".par", ".data", ".par.gz", ".par.bz2", ".data.gz", ".data.bz2")


def is_list(target: Path) -> bool:
    """Whether a file's name is that of a line list that can be read by itself."""
    return target.name.lower().endswith(LIST_ENDINGS)


def ingest(arguments: Namespace) -> int:
    """`opacity ingest RECIPE`: the line stores of a recipe, and the account of every record."""
    from opacity.pipeline.sources import ensure_store
    from opacity.recipe.load import load_recipe

    recipe = load_recipe(arguments.recipe)
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
                }
            )
    if arguments.json:
        print(text.as_json({"stores": stores}))
    else:
        print("\n".join(text.facts(_store_facts(one)) for one in stores))
    return 0


def _store_facts(one: dict[str, Any]) -> list[tuple[str, str]]:
    if one["store"] is None:
        return [("list", ", ".join(one["files"])), ("store", "none: catalogues are read for each build")]
    ledger = one["ledger"]
    lines = [
        ("list", ", ".join(one["files"])),
        ("store", f"{one['store']} ({'made now' if one['made_now'] else 'up to date: no text was read'})"),
        ("read", f"{ledger['read']} records"),
        ("kept", f"{ledger['kept']} lines, {one['bytes'] / max(one['lines'], 1):.1f} bytes each"),
    ]
    lines += [("left out", f"{count}: {reason}") for reason, count in ledger["left_out"].items()]
    lines += [("note", f"{count}: {note}") for note, count in ledger["notes"].items()]
    return lines


def check_list(target: Path, as_json: bool) -> int:
    """`opacity check LIST`: what is worth knowing of a list before it is used."""
    from opacity.line_list.examine import examine
    from opacity.line_list.read import read_lines

    lines = read_lines(target, bad_records="leave-out")
    found = examine(lines)
    if as_json:
        content = {
            "list": str(target),
            "lines": len(lines),
            "ledger": lines.ledger.as_dict(),
            "findings": [one.as_dict() for one in found],
        }
        print(text.as_json(content))
        return 0
    reach = f"{lines.wavenumber[0]:.6f} to {lines.wavenumber[-1]:.6f} cm-1"
    names = ", ".join(one.formula for one in lines.isotopologues)
    facts = [("list", str(target)), ("lines", f"{len(lines)} of {lines.molecule_formula}, {reach}"), ("of", names)]
    facts += [("left out", f"{count}: {reason}") for reason, count in sorted(lines.ledger.left_out.items())]
    facts += [("note", f"{count}: {note}") for note, count in sorted(lines.ledger.notes.items())]
    for one in found:
        detail = f"; {one.detail}" if one.detail else ""
        facts.append(("found", f"{one.lines} lines ({100.0 * one.share:.2g} % of the strength): {one.what}{detail}"))
    print(text.facts(facts))
    return 0
