"""How results look on a terminal."""

from __future__ import annotations

import json
import textwrap
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from opacity.check.result import CheckResult, finite

WIDTH = 100


def as_json(value: Mapping[str, Any]) -> str:
    """JSON for programs; infinities and NaN, which JSON does not know, as null."""
    return json.dumps(finite(value), indent=2)


def results_table(results: Iterable[CheckResult]) -> str:
    """Rows of results: check, verdict, difference and limit, then the detail below, indented."""
    rows = list(results)
    name_width = max([len("check"), *(len(row.check) for row in rows)])
    lines = [f"{'check':{name_width}}  {'verdict':12}  {'difference':>10}  {'limit':>8}"]
    for row in rows:
        value = "" if row.value is None else f"{row.value:+.2e}"
        limit = "" if row.limit is None else f"{row.limit:.1e}"
        lines.append(f"{row.check:{name_width}}  {row.verdict:12}  {value:>10}  {limit:>8}".rstrip())
        lines += [f"    {part}" for part in _folded(row.detail, WIDTH - 4)]
    return "\n".join(lines)


def _folded(text: str, width: int) -> list[str]:
    """Lines broken between words only: a file name must stay one that can be copied."""
    return textwrap.wrap(text, width, break_long_words=False, break_on_hyphens=False)


def facts(pairs: Sequence[tuple[str, str]]) -> str:
    """Two columns: what, and its value; long values are folded."""
    width = max(len(name) for name, _ in pairs)
    indent = " " * (width + 2)
    lines = []
    for name, value in pairs:
        folded = _folded(value, WIDTH - width) or [""]
        lines.append(f"{name:{width}}  {folded[0]}")
        lines += [indent + part for part in folded[1:]]
    return "\n".join(lines)


def size(n_bytes: float | None) -> str:
    """A number of bytes for people."""
    if n_bytes is None:
        return "unknown"
    for unit in ("B", "kB", "MB"):
        if n_bytes < 1000.0:
            return f"{n_bytes:.3g} {unit}"
        n_bytes /= 1000.0
    return f"{n_bytes:.3g} GB"


def duration(seconds: float) -> str:
    """A time for people."""
    if seconds < 100.0:
        return f"{seconds:.2g} s"
    if seconds < 6000.0:
        return f"{seconds / 60.0:.0f} min"
    return f"{seconds / 3600.0:.1f} h"
