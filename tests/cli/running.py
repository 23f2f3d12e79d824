"""What the tests of the command line share besides fixtures: a command as a process, and how it ended."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import seqmix
from seqmix.kernels import MODE

# Enough for a process of its own; the kernels are named, so that interpreted ones do not announce themselves.
BARE = {"PYTHONPATH": str(Path(seqmix.__file__).parents[1]), "SEQMIX_KERNELS": MODE}
COMMAND = [sys.executable, "-m", "seqmix"]
READERS = ("forecast", "score", "weights", "shifts", "surprise", "describe")


@dataclass
class Ended:
    """How a command ended: exit code, stdout, stderr."""

    code: int
    out: str
    err: str


def process(*arguments: str | Path, command: Sequence[str] = COMMAND, **settings: object) -> subprocess.Popen[bytes]:
    """The command as a process of its own, its streams as pipes unless said otherwise."""
    streams = {name: subprocess.PIPE for name in ("stdin", "stdout", "stderr")}
    words = [*command, *map(str, arguments)]
    return subprocess.Popen(words, **{"env": {**os.environ, **BARE}, **streams, **settings})  # type: ignore[call-overload]
