"""Whole processes, timed; and tables."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass

SEQMIX = (sys.executable, "-m", "seqmix")


@dataclass(frozen=True)
class Run:
    """seconds: from start to end; work: seconds of all cores; peak: MB of memory (never less than this process has)."""

    seconds: float
    work: float
    peak: float
    output: bytes


def run(*command: str) -> Run:
    """Run a command to its end; it must succeed."""
    begun = time.perf_counter()
    with subprocess.Popen(command, stdout=subprocess.PIPE, stdin=subprocess.DEVNULL) as process:
        assert process.stdout is not None
        output = process.stdout.read()
        _, status, usage = os.wait4(process.pid, 0)
        seconds = time.perf_counter() - begun
        process.returncode = os.waitstatus_to_exitcode(status)
    if process.returncode:
        raise SystemExit(f"{' '.join(command)} ended with {process.returncode}")
    return Run(seconds, usage.ru_utime + usage.ru_stime, usage.ru_maxrss / 1024, output)


def table(head: Sequence[str], lines: Sequence[Sequence[str]]) -> None:
    """Print a markdown table."""
    for cells in (head, ["---"] * len(head), *lines):
        print(f"| {' | '.join(cells)} |")
