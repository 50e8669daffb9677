"""`opacity fetch RECIPE`: get the files that a recipe's line lists need."""

from __future__ import annotations

import shlex
import sys
from argparse import Namespace
from typing import TYPE_CHECKING, Any

from opacity.cli import text

if TYPE_CHECKING:
    from opacity.pipeline.fetch.plan import FetchPlan, Item

DONE, FAILED, INTERRUPTED = 0, 1, 130
_STOPPED = "interrupted: what came so far is kept as .part, and the same command goes on from there"


def fetch(arguments: Namespace) -> int:
    """List what is there and what is to come; fetch with --yes, or after a y on a terminal."""
    from opacity.pipeline.fetch.plan import plan_fetch
    from opacity.pipeline.fetch.run import fetch_files

    plan = plan_fetch(arguments.recipe, quiet=arguments.quiet)
    if not arguments.json and not arguments.quiet:
        _print_plan(plan)
    plan.refuse_wrong()
    if plan.to_fetch and not arguments.yes and not _wanted(plan, arguments):
        if arguments.json:
            print(text.as_json({**plan.as_dict(), "started": False}))
        else:
            print(f"nothing fetched: `opacity fetch {shlex.quote(str(arguments.recipe))} --yes` starts it")
        return DONE
    try:
        fetched = fetch_files(plan, quiet=arguments.quiet)
    except KeyboardInterrupt as stop:
        print(_STOPPED, file=sys.stderr)
        if arguments.json:
            print(text.as_json({"error": [_STOPPED]}))
        return int(getattr(stop, "exit_code", INTERRUPTED))
    passed = not fetched.failures and not plan.missing
    if arguments.json:
        content: dict[str, Any] = {
            **plan.as_dict(),
            "started": True,
            "fetched": [{"file": file, "sha256": digest} for file, digest in fetched.files],
            "failures": list(fetched.failures),
            "passed": passed,
        }
        print(text.as_json(content))
    elif passed:
        count = len(fetched.files)
        print(f"all files are there ({count} fetched)" if count else "all files are there")
    for failure in fetched.failures:
        print(failure, file=sys.stderr)
    if plan.missing:
        print("some files have no urls in the recipe: get them by hand", file=sys.stderr)
    return DONE if passed else FAILED


def _print_plan(plan: FetchPlan) -> None:
    rows = [(item.state, _words(item)) for item in plan.items]
    rows += [("missing", f"{name}: the recipe has no urls for it") for name in plan.missing]
    rows += [("note", note) for note in plan.notes]
    if plan.to_fetch:
        unknown = f", and {plan.of_unknown_size} of unknown size" if plan.of_unknown_size else ""
        rows.append(("total", f"{text.size(plan.total)} to fetch{unknown}; {text.size(plan.disk_free)} free on disk"))
    width = max((len(state) for state, _ in rows), default=0)
    for state, words in rows:
        print(f"{state:{width}}  {words}")
    sys.stdout.flush()


def _words(item: Item) -> str:
    unknown = "size unknown" if item.state == "to fetch" else ""
    size = unknown if item.size is None else text.size(item.size)
    here = f"{text.size(item.here)} of it here" if item.here else ""
    details = ", ".join(part for part in (size, here, item.detail) if part)
    origin = f" from {item.origin}" if item.state == "to fetch" else ""
    return f"{item.download.path}{origin} ({details})"


def _wanted(plan: FetchPlan, arguments: Namespace) -> bool:
    """Whether somebody at a terminal says y."""
    if arguments.json or arguments.quiet or sys.stdin is None or not (sys.stdin.isatty() and sys.stderr.isatty()):
        return False
    print(f"fetch {len(plan.to_fetch)} file(s)? [y/N] ", end="", file=sys.stderr, flush=True)
    return sys.stdin.readline().strip().lower() in ("y", "yes")
