"""Progress of long work on stderr: a bar on a terminal, otherwise a line now and then."""

from __future__ import annotations

import sys
import time
from types import TracebackType
from typing import Any, Self

from tqdm import tqdm

SECONDS_BETWEEN_LINES = 30.0


class Bar:
    """A bar on a terminal, where there is one and it is wanted; use it in a `with` statement."""

    def __init__(self, quiet: bool, **look: Any) -> None:
        self._quiet = quiet
        self._started = self._printed = time.monotonic()
        self._bar: Any = None
        if not quiet and sys.stderr.isatty():
            self._bar = tqdm(leave=False, file=sys.stderr, **look)

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._bar is not None:
            self._bar.close()


class Progress(Bar):
    """Counts steps of one stage; use it in a `with` statement.  With `quiet` nothing is printed."""

    def __init__(self, stage: str, total: int, unit: str, quiet: bool = False) -> None:
        super().__init__(quiet, total=total, desc=stage, unit=f" {unit}")
        self.stage, self.total, self.unit = stage, total, unit
        self.done = 0

    def step(self, steps: int = 1) -> None:
        """One step is done, or several."""
        self.done += steps
        if self._bar is not None:
            self._bar.update(steps)
        elif not self._quiet:
            self._print_line()

    def _print_line(self) -> None:
        now = time.monotonic()
        if now - self._printed < SECONDS_BETWEEN_LINES or self.done == self.total:
            return
        self._printed = now
        left = (now - self._started) / self.done * (self.total - self.done)
        print(f"{self.stage}: {self.done} of {self.total} {self.unit}, {left:.0f} s left", file=sys.stderr, flush=True)


class RecordProgress(Bar):
    """Counts records while files of known size are read; use it in a `with` statement.  Rate and time left by bytes."""

    def __init__(self, stage: str, total_bytes: int, quiet: bool = False) -> None:
        super().__init__(quiet, total=total_bytes, desc=stage, unit="B", unit_scale=True)
        self.stage, self.total = stage, total_bytes
        self.records = self.position = 0

    def add(self, records: int, n_bytes: int) -> None:
        """So many records more, and so many bytes of their file."""
        self.records += records
        self.position += n_bytes
        if self._bar is not None:
            self._bar.update(n_bytes)
            self._bar.set_postfix_str(f"{self.records:.3g} records")
        elif not self._quiet:
            self._print_line()

    def _print_line(self) -> None:
        now = time.monotonic()
        if now - self._printed < SECONDS_BETWEEN_LINES:
            return
        self._printed = now
        took = now - self._started
        left = took / max(self.position, 1) * max(self.total - self.position, 0)
        rate = self.records / took / 1e6
        print(
            f"{self.stage}: {self.records} records, {rate:.2f} million a second, {left:.0f} s left",
            file=sys.stderr,
            flush=True,
        )
