"""The account of a line list: every record read is kept or left out for a reason, and the sums must agree."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from typing import Any

from opacity.errors import LineListError, problem


@dataclass
class Ledger:
    """Counts of records: `read`, `kept`, `left_out` by reason; `notes` are about records that were kept."""

    read: int = 0
    kept: int = 0
    left_out: Counter[str] = field(default_factory=Counter)
    notes: Counter[str] = field(default_factory=Counter)

    def adds_up(self) -> bool:
        """Whether read = kept + left out."""
        return self.read == self.kept + sum(self.left_out.values())

    def add(self, other: Ledger) -> None:
        """Add another file's account to this one."""
        self.read += other.read
        self.kept += other.kept
        self.left_out.update(other.left_out)
        self.notes.update(other.notes)

    def refuse_nothing_kept(self, where: object, remedy: str = "mend the list") -> None:
        """Raise LineListError where every record was left out."""
        if not self.kept:
            reasons = ", ".join(f"{count} {reason}" for reason, count in sorted(self.left_out.items()))
            raise LineListError(problem(where, "every record was left out", found=reasons, remedy=remedy))

    def leave_out(self, reason: str, count: int) -> None:
        """Move records that had been kept to those left out."""
        if count:
            self.kept -= count
            self.left_out[reason] += count

    @staticmethod
    def from_dict(values: dict[str, Any]) -> Ledger:
        """The account that `as_dict` described."""
        return Ledger(int(values["read"]), int(values["kept"]), Counter(values["left_out"]), Counter(values["notes"]))

    def as_dict(self) -> dict[str, Any]:
        """The account as plain values for JSON, reasons in alphabetical order."""
        return {
            "read": self.read,
            "kept": self.kept,
            "left_out": dict(sorted(self.left_out.items())),
            "notes": dict(sorted(self.notes.items())),
        }
