"""Progress in bytes on stderr: rate and time left, and nothing where nothing is wanted."""

from __future__ import annotations

import io
import sys

import pytest

from opacity.pipeline.fetch import progress as module
from opacity.pipeline.fetch.progress import ByteProgress, in_bytes


@pytest.fixture
def clock(monkeypatch):
    now = [100.0]
    monkeypatch.setattr(module.time, "monotonic", lambda: now[0])
    return now


def test_lines_come_every_half_minute_with_rate_and_time_left(clock, capsys):
    with ByteProgress("x (1 of 2)") as progress:
        progress.start(500_000_000, 1_000_000_000)
        for seconds in (20.0, 20.0, 1.0, 39.0):
            clock[0] += seconds
            progress.received(100_000_000)
        clock[0] += 60.0
        progress.received(100_000_000)  # the last byte: no line any more
    out, err = capsys.readouterr()
    assert out == ""
    # After 40 s 200 MB have come over the line, after 80 s 400 MB.
    assert err.splitlines() == [
        "x (1 of 2): 700 MB of 1 GB, 5 MB/s, 60 s left",
        "x (1 of 2): 900 MB of 1 GB, 5 MB/s, 20 s left",
    ]


def test_without_a_size_no_time_is_told(clock, capsys):
    with ByteProgress("x") as progress:
        progress.start(0, None)
        clock[0] += 50.0
        progress.received(1_000_000)
    assert capsys.readouterr().err == "x: 1 MB, 20 kB/s\n"


def test_quiet_prints_nothing_at_all(clock, capsys):
    with ByteProgress("x", quiet=True) as progress:
        progress.start(0, 10)
        clock[0] += 50.0
        progress.received(5)
        progress.say("begins anew")
    assert capsys.readouterr() == ("", "")


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_on_a_terminal_there_is_a_bar_that_is_wiped_away(monkeypatch):
    terminal = Terminal()
    monkeypatch.setattr(sys, "stderr", terminal)
    with ByteProgress("x.trans.bz2") as progress:
        progress.start(2_000_000, 8_000_000)
        progress.received(2_000_000)
        progress.say("begins anew")
    text = terminal.getvalue()
    assert "2.00M/8.00M" in text
    assert "x.trans.bz2: begins anew\n" in text
    assert text.endswith("\r")


@pytest.mark.parametrize(
    "count, words",
    [
        (0, "0 B"),
        (999, "999 B"),
        (1000, "1 kB"),
        (999_600, "1 MB"),
        (1.5e9, "1.5 GB"),
        (2e12, "2 TB"),
        (3e15, "3e+03 TB"),
    ],
)
def test_bytes_for_people(count, words):
    assert in_bytes(count) == words
