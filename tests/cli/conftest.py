"""Fixtures for the command line: a command run inside this process, and a log to run it on."""

from __future__ import annotations

import io
import os
import signal
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from running import Ended

from seqmix.cli.run import main


@pytest.fixture(autouse=True)
def plain_environment(monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """No SEQMIX_ variable from outside; the signal handlers that a command sets are taken back."""
    for name in [name for name in os.environ if name.startswith("SEQMIX_") and name != "SEQMIX_KERNELS"]:
        monkeypatch.delenv(name)
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    yield
    for number, handler in before.items():
        signal.signal(number, handler)


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[..., Ended]:
    """run("forecast", "line.csv", stdin=b"...", SEQMIX_FORMAT="jsonl"): the command, in this process."""

    def run_inside(*arguments: str | Path, stdin: bytes | Path = b"", **environment: str) -> Ended:
        streams = tmp_path / "streams"
        streams.mkdir(exist_ok=True)
        if isinstance(stdin, bytes):
            (streams / "stdin").write_bytes(stdin)
            stdin = streams / "stdin"
        with (
            monkeypatch.context() as patch,
            open(stdin, encoding="utf-8") as stdin_file,
            open(streams / "stdout", "w", encoding="utf-8") as stdout_file,
            open(streams / "stderr", "w", encoding="utf-8") as stderr_file,
        ):
            for name, value in environment.items():
                patch.setenv(name, value)
            patch.setattr(sys, "argv", ["seqmix", *map(str, arguments)])
            patch.setattr(sys, "stdin", stdin_file)
            patch.setattr(sys, "stdout", stdout_file)
            patch.setattr(sys, "stderr", stderr_file)
            code = main()
        out, err = ((streams / name).read_bytes().decode() for name in ("stdout", "stderr"))
        return Ended(code, out, err)

    return run_inside


@pytest.fixture
def line(tmp_path: Path) -> Path:
    """An hour and a half of a bottling line, a row a minute: time and state."""
    text = io.StringIO()
    text.write("time,state\n")
    for minute in range(90):
        state = "jam" if minute % 17 == 16 else ("fill", "cap", "label")[minute % 3]
        text.write(f"2026-01-05T{6 + minute // 60:02d}:{minute % 60:02d}:00,{state}\n")
    path = tmp_path / "line.csv"
    path.write_text(text.getvalue())
    return path
