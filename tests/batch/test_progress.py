"""What a batch shows while it runs."""

from __future__ import annotations

import io
import sys

import pytest

from pyomo_latpath.batch import progress
from pyomo_latpath.batch.record import BatchRecord

RECORDS = [
    BatchRecord("a", "", "optimal", route="path"),
    BatchRecord("b", "", "optimal", route="path"),
    BatchRecord("c", "", "error", error="unreadable"),
    BatchRecord("d", "", "optimal", route="highs"),
]


class Stream(io.StringIO):
    """Stands in for stderr."""

    def __init__(self, terminal: bool) -> None:
        super().__init__()
        self.terminal = terminal

    def isatty(self) -> bool:
        return self.terminal


@pytest.fixture
def shown(monkeypatch):
    def show(terminal, total=4, **options):
        stream = Stream(terminal)
        monkeypatch.setattr(sys, "stderr", stream)
        with progress.Progress(total, **options) as bar:
            for k, record in enumerate(RECORDS):
                bar.add(record, kept=k == 0)
            bar.say("the end is near")
        return stream.getvalue()

    return show


def test_a_line_now_and_then_where_there_is_no_terminal(shown, monkeypatch):
    assert shown(False) == "latpath: the end is near\n"
    monkeypatch.setattr(progress, "PAUSE", 0)
    lines = shown(False).splitlines()
    assert len(lines) == 5
    assert lines[0].startswith("latpath: 1 done (path 1), 0 a second, 3 to go in about ?")
    assert lines[3].startswith("latpath: 4 done (path 2, error 1, highs 1), ")
    assert lines[3].endswith(", 0 to go in about 0 s")
    assert " to go" not in shown(False, total=None)


def test_a_bar_on_a_terminal(shown, monkeypatch):
    monkeypatch.setenv("COLUMNS", "100")
    text = shown(True)
    assert "0/4" in text
    assert "\r" in text
    assert "latpath: the end is near" in text


def test_quiet_shows_notes_only(shown):
    assert shown(True, shown=False) == shown(False, shown=False) == "latpath: the end is near\n"
