"""What `opacity check TABLE` prints."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from opacity.cli import text
from opacity.cli.build import print_results

if TYPE_CHECKING:
    from opacity.check.run import CheckReport


def tell_checks(found: Sequence[tuple[Path, CheckReport, str]], as_json: bool) -> None:
    """Each table with its results and what they rest on, for people, or as JSON for programs."""
    from opacity.recipe.unverified import accepted_in_words

    contents = []
    for table, report, basis in found:
        if as_json:
            contents.append(
                {
                    "table": str(table),
                    "passed": report.passed,
                    "basis": basis,
                    "results": [row.as_dict() for row in report.results],
                    "figures": {key: value for key, value in report.figures.items() if key != "results"},
                }
            )
            continue
        from_memory = accepted_in_words(report.figures.get("unverified", []))
        facts = [("table", str(table)), ("basis", basis)]
        print(text.facts([*facts, *([("accepted", f"from memory: {from_memory}")] if from_memory else [])]))
        print_results(report.results, report.figures)
    if as_json:
        passed = all(report.passed for _, report, _ in found)
        print(text.as_json(contents[0] if len(contents) == 1 else {"passed": passed, "tables": contents}))
