"""Progress: one line, rewritten, only after a while, erased at the end."""

from __future__ import annotations

import pytest

from seqmix.cli import notes
from seqmix.cli.notes import Progress


@pytest.fixture
def clock(monkeypatch):
    now = [100.0]
    monkeypatch.setattr(notes.time, "monotonic", lambda: now[0])
    return now


def test_short_work_shows_nothing(clock, capsys):
    progress = Progress()
    for rows in progress.count(["abcd"] * 5):
        assert rows == "abcd"
        clock[0] += 0.1
    progress.erase()
    assert capsys.readouterr().err == ""


def test_long_work_shows_rows_and_speed(clock, capsys):
    progress = Progress()
    chunks = progress.count(["abcd"] * 5)
    next(chunks)
    clock[0] += 2
    next(chunks)
    assert capsys.readouterr().err == "\r4 rows read, 2 rows a second"
    clock[0] += 0.1
    next(chunks)
    assert capsys.readouterr().err == ""
    clock[0] += 0.4
    next(chunks)
    assert capsys.readouterr().err == "\r12 rows read, 5 rows a second"
    progress.erase()
    assert capsys.readouterr().err == "\r" + " " * 29 + "\r"
    progress.erase()
    assert capsys.readouterr().err == ""
