"""What a check says: agrees, differs, or cannot judge, with the number, the limit and the reason."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

AGREES = "agrees"
DIFFERS = "differs"
CANNOT_JUDGE = "cannot judge"


@dataclass(frozen=True)
class CheckResult:
    """One row of the table of results.  `value` and `limit` are relative differences; None where not judged."""

    check: str
    verdict: str
    detail: str
    value: float | None = None
    limit: float | None = None

    def as_dict(self) -> dict[str, Any]:
        """The row as plain values for JSON."""
        return asdict(self)


def judge(check: str, value: float, limit: float, detail: str) -> CheckResult:
    """Agrees where |value| <= limit; a value that is not a number differs."""
    verdict = AGREES if abs(value) <= limit else DIFFERS
    return CheckResult(check, verdict, detail, float(value), float(limit))
