"""Progress on stderr: a line now and then where there is no terminal, a bar where there is one."""

from __future__ import annotations

import io
import sys

import pytest

from opacity.pipeline import progress as progress_module
from opacity.pipeline.progress import Progress


@pytest.fixture
def clock(monkeypatch):
    now = [100.0]
    monkeypatch.setattr(progress_module.time, "monotonic", lambda: now[0])
    return now


def test_lines_come_every_half_minute_with_the_time_left(clock, capsys):
    with Progress("spectra", 8, "nodes") as progress:
        for seconds in (10.0, 19.9, 0.2, 5.0, 40.0, 29.0, 1.0, 60.0):
            clock[0] += seconds
            progress.step()
    out, err = capsys.readouterr()
    assert out == ""
    # 30.1 s for 3 of 8; 75.1 s for 5; 105.1 s for 7; nothing more at the end.
    assert err.splitlines() == [
        "spectra: 3 of 8 nodes, 50 s left",
        "spectra: 5 of 8 nodes, 45 s left",
        "spectra: 7 of 8 nodes, 15 s left",
    ]


def test_short_work_prints_nothing(clock, capsys):
    with Progress("checks", 2, "nodes") as progress:
        clock[0] += 1.0
        progress.step()
        clock[0] += 100.0
        progress.step()
    assert capsys.readouterr() == ("", "")


def test_quiet_prints_nothing_at_all(clock, capsys):
    with Progress("checks", 3, "nodes", quiet=True) as progress:
        for _ in range(3):
            clock[0] += 100.0
            progress.step()
    assert progress.done == 3
    assert capsys.readouterr() == ("", "")


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_on_a_terminal_there_is_a_bar_that_is_wiped_away(monkeypatch):
    terminal = Terminal()
    monkeypatch.setattr(sys, "stderr", terminal)
    with Progress("spectra", 4, "nodes") as progress:
        for _ in range(4):
            progress.step()
    text = terminal.getvalue()
    assert "spectra" in text
    assert "0/4" in text
    assert text.endswith("\r")
    assert "\n" not in text


def test_quiet_on_a_terminal_has_no_bar(monkeypatch):
    terminal = Terminal()
    monkeypatch.setattr(sys, "stderr", terminal)
    with Progress("spectra", 1, "nodes", quiet=True) as progress:
        progress.step()
    assert terminal.getvalue() == ""
