"""Progress of a download on stderr: bytes, rate and time left."""

from __future__ import annotations

import sys
import time

from tqdm import tqdm

from opacity.pipeline.progress import Bar

SECONDS_BETWEEN_LINES = 30.0


def in_bytes(count: float) -> str:
    """A number of bytes for people."""
    for unit in ("B", "kB", "MB", "GB"):
        if count < 999.5:
            return f"{count:.3g} {unit}"
        count /= 1000.0
    return f"{count:.3g} TB"


class ByteProgress(Bar):
    """Progress of one file; use it in a `with` statement.  With `quiet` nothing is printed.

    The rate counts what came over the line since the start, not what a former run had left.
    """

    def __init__(self, name: str, quiet: bool = False) -> None:
        super().__init__(quiet, desc=name, unit="B", unit_scale=True)
        self._name = name
        self._position = self._received = 0
        self._total: int | None = None

    def start(self, position: int, total: int | None) -> None:
        """The transfer begins, or begins anew, at a position (bytes) of a file of `total` bytes."""
        self._position, self._total = position, total
        if self._bar is not None:
            self._bar.total, self._bar.initial, self._bar.n = total, position - self._received, position
            self._bar.refresh()

    def received(self, count: int) -> None:
        """So many bytes more are there."""
        self._position += count
        self._received += count
        if self._bar is not None:
            self._bar.update(count)
        elif not self._quiet:
            self._print_line()

    def say(self, text: str) -> None:
        """One line that is not progress, such as why a transfer begins anew."""
        if not self._quiet:
            with tqdm.external_write_mode(file=sys.stderr):
                print(f"{self._name}: {text}", file=sys.stderr, flush=True)

    def _print_line(self) -> None:
        now = time.monotonic()
        if now - self._printed < SECONDS_BETWEEN_LINES or self._position == self._total:
            return
        self._printed = now
        rate = self._received / (now - self._started)
        line = f"{self._name}: {in_bytes(self._position)}"
        if self._total is not None:
            line += f" of {in_bytes(self._total)}"
        line += f", {in_bytes(rate)}/s"
        if self._total is not None and rate > 0.0:
            line += f", {(self._total - self._position) / rate:.0f} s left"
        print(line, file=sys.stderr, flush=True)
