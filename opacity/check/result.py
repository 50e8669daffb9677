"""What a check says: agrees, differs, or cannot judge, with the number, the limit and the reason."""

from __future__ import annotations

from collections.abc import Mapping
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


def finite(value: Any) -> Any:
    """Plain values with infinities and NaN, which JSON does not know, as None."""
    if isinstance(value, Mapping):
        return {key: finite(one) for key, one in value.items()}
    if isinstance(value, (list, tuple)):
        return [finite(one) for one in value]
    if isinstance(value, float) and not abs(value) < float("inf"):
        return None
    return value


def judge(check: str, value: float, limit: float, detail: str) -> CheckResult:
    """Agrees where |value| <= limit; a value that is not a number differs."""
    verdict = AGREES if abs(value) <= limit else DIFFERS
    return CheckResult(check, verdict, detail, float(value), float(limit))
