"""Whole processes, timed; and tables."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

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


_SMALL = """
import os, sys, time
begun = time.perf_counter()
child = os.posix_spawnp(sys.argv[1], sys.argv[1:], os.environ)
_, status, usage = os.wait4(child, 0)
print(usage.ru_maxrss / 1024, time.perf_counter() - begun, file=sys.stderr)
sys.exit(os.waitstatus_to_exitcode(status))
"""


def peak(*command: str, log: Path | None = None) -> tuple[float, float]:
    """Peak in MB and seconds of a command, with the log as its standard input.

    Run by a process that is small: on Linux a child is charged what its parent held when it was made.
    """
    with open(log or os.devnull, "rb") as stdin:
        done = subprocess.run(
            [sys.executable, "-S", "-c", _SMALL, *command],
            stdin=stdin, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, check=True, text=True,
        )  # fmt: skip
    megabytes, seconds = done.stderr.split()[-2:]
    return float(megabytes), float(seconds)


def table(head: Sequence[str], lines: Sequence[Sequence[str]]) -> None:
    """Print a markdown table."""
    for cells in (head, ["---"] * len(head), *lines):
        print(f"| {' | '.join(cells)} |")
