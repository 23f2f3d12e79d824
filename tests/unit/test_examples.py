"""What the examples and the documents show is what the program says.

    python tests/unit/test_examples.py

writes the sessions of README.md and docs/*.md, and what the snippets of docs/python.md print, anew.
"""

from __future__ import annotations

import contextlib
import gzip
import io
import os
import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from seqmix.kernels import MODE

ROOT = Path(__file__).parents[2]
EXAMPLES = ROOT / "examples"
PYTHON_GUIDE = ROOT / "docs" / "python.md"
WITH_SESSIONS = (ROOT / "README.md", *sorted((ROOT / "docs").glob("*.md")))

SAMPLES = {
    "line.csv": ("--days", "0.5"),
    "weeks.csv.gz": ("--every", "60", "--days", "18.5"),
    "alarms.txt": ("--codes",),
}

_SESSION = re.compile(r"(?<=^```console\n)\$ (.*)\n((?:.*\n)*?)(?=^```$)", re.MULTILINE)
_SNIPPET = re.compile(r"(?<=^```python\n)((?:.*\n)*?)```\n(?:\n```text\n((?:.*\n)*?)(?=^```$))?", re.MULTILINE)

compiled_only = pytest.mark.skipif(MODE == "interpreted", reason="takes minutes with interpreted kernels")


def shell(command: str, format: str | None = None) -> str:
    """What a command says in a terminal at the top of the repository; it must succeed. `seqmix` is this one."""
    environment = {name: value for name, value in os.environ.items() if not name.startswith("SEQMIX_")}
    environment["SEQMIX_KERNELS"] = MODE
    environment["PYTHONPATH"] = str(ROOT)
    if format:
        environment["SEQMIX_FORMAT"] = format
    done = subprocess.run(
        ["sh", "-c", f'seqmix() {{ "{sys.executable}" -m seqmix "$@"; }}\n{command}'],
        cwd=ROOT, env=environment, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, timeout=300,
    )  # fmt: skip
    assert done.returncode == 0, done.stdout
    return done.stdout


def session(command: str) -> str:
    """What a reader sees: a table, unless the answer goes into a pipe."""
    return shell(command, None if "|" in command else "table")


def snippets(page: str) -> list[tuple[str, str]]:
    """The Python blocks of a page, and what each printed; they run one after the other, like one program."""
    names: dict[str, object] = {}
    out = []
    for found in _SNIPPET.finditer(page):
        printed = io.StringIO()
        with contextlib.redirect_stdout(printed), contextlib.chdir_to(ROOT):
            exec(compile(found[1], PYTHON_GUIDE.name, "exec"), names)
        out.append((found[2] or "", printed.getvalue()))
    return out
