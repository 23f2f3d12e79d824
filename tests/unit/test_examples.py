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
import tempfile
from pathlib import Path

import pytest

import seqmix
from seqmix.kernels import MODE
from seqmix.models import registry

ROOT = Path(__file__).parents[2]
EXAMPLES = ROOT / "examples"
PYTHON_GUIDE = ROOT / "docs" / "python.md"
PAGES = (ROOT / "README.md", *sorted((ROOT / "docs").glob("*.md")))

SAMPLES = {
    "line.csv": ("make_line.py", "--days", "0.5"),
    "weeks.csv.gz": ("make_line.py", "--every", "60", "--days", "18.5"),
    "alarms.txt": ("make_line.py", "--codes"),
    "tank.csv": ("make_tank.py",),
    "crates.csv": ("make_tank.py", "--crates"),
    "belt.txt": ("make_belt.py",),
    "faults.csv": ("make_faults.py",),
    "recipe.csv": ("make_faults.py", "--recipe"),
    **{f"runs/day-{day}.txt": ("make_runs.py", "--day", str(day)) for day in range(1, 9)},
    "runs/today.txt": ("make_runs.py", "--day", "9"),
}

SESSION = re.compile(r"```console\n\$ (?P<command>.*)\n(?P<shown>(?:.*\n)*?)```\n")
SNIPPET = re.compile(r"```python\n(?P<code>(?:.*\n)*?)```\n(?:\n```text\n(?P<shown>(?:.*\n)*?)```\n)?")

compiled_only = pytest.mark.skipif(MODE == "interpreted", reason="takes minutes with interpreted kernels")


def shell(command: str, **environment: str) -> str:
    """What a command says; it must succeed. `seqmix` is the one under test, and examples/ lies in the directory."""
    inherited = {name: value for name, value in os.environ.items() if not name.startswith("SEQMIX_")}
    under_test = {"SEQMIX_KERNELS": MODE, "PYTHONPATH": str(Path(seqmix.__file__).parents[1])}
    # Not the repository itself: there Python would take its sources, whatever is installed.
    with tempfile.TemporaryDirectory() as place:
        Path(place, "examples").symlink_to(EXAMPLES)
        done = subprocess.run(
            ["sh", "-c", f'seqmix() {{ "{sys.executable}" -m seqmix "$@"; }}\n{command}'],
            cwd=place, env={**inherited, **under_test, **environment},
            stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, timeout=300,
        )  # fmt: skip
    assert done.returncode == 0, done.stdout
    return done.stdout


def session(command: str) -> str:
    """What a command says on a terminal: a table, unless the answer goes into a pipe."""
    return shell(command) if "|" in command else shell(command, SEQMIX_FORMAT="table")


def run_snippet(code: str, names: dict[str, object]) -> str:
    """What a snippet prints; `names` is what the ones before it have defined."""
    printed = io.StringIO()
    with contextlib.redirect_stdout(printed):
        exec(compile(code, PYTHON_GUIDE.name, "exec"), names)
    return printed.getvalue()


@pytest.mark.parametrize("name", SAMPLES)
def test_samples_are_what_the_scripts_write(name: str, tmp_path: Path) -> None:
    made, kept = tmp_path / name, EXAMPLES / name
    script, *options = SAMPLES[name]
    made.parent.mkdir(exist_ok=True)
    subprocess.run([sys.executable, EXAMPLES / script, *options, made], check=True)
    open_it = gzip.open if name.endswith(".gz") else open
    with open_it(made, "rb") as new, open_it(kept, "rb") as old:
        assert new.read() == old.read()


def test_all_samples_are_small() -> None:
    assert sum((EXAMPLES / name).stat().st_size for name in SAMPLES) <= 400_000


@compiled_only
def test_tour_runs_from_any_directory(tmp_path: Path) -> None:
    command = tmp_path / "bin" / "seqmix"
    command.parent.mkdir()
    command.write_text(f'#!/bin/sh\nexec "{sys.executable}" -m seqmix "$@"\n')
    command.chmod(0o755)
    before = sorted(EXAMPLES.iterdir())
    said = shell(f'cd "{tmp_path}"; "{EXAMPLES}/run.sh"', PATH=f"{command.parent}:{os.environ['PATH']}")
    assert said.count("\n== ") == (EXAMPLES / "run.sh").read_text().count("\nshow ")
    assert "seqmix:" not in said
    assert sorted(EXAMPLES.iterdir()) == before


@compiled_only
@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_sessions_are_real(page: Path) -> None:
    for found in SESSION.finditer(page.read_text(encoding="utf-8")):
        assert found["shown"] == session(found["command"]), found["command"]


@compiled_only
def test_snippets_print_what_they_are_said_to(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    names: dict[str, object] = {}
    found = list(SNIPPET.finditer(PYTHON_GUIDE.read_text(encoding="utf-8")))
    assert found
    for snippet in found:
        assert run_snippet(snippet["code"], names) == (snippet["shown"] or ""), snippet["code"]


@pytest.mark.parametrize("model", registry.entries(), ids=lambda model: model.name)
def test_methods_tell_of_every_model_and_its_cost(model: registry.Entry) -> None:
    methods = (ROOT / "docs" / "methods.md").read_text(encoding="utf-8")
    assert re.search(rf"^### {model.name} - cost {model.prior_cost_bits:g}\b", methods, re.MULTILINE)


@pytest.mark.parametrize("page", PAGES, ids=lambda page: page.name)
def test_links_lead_somewhere(page: Path) -> None:
    for link in re.findall(r"\]\(([^)#:]+)(?:#[^)]*)?\)", page.read_text(encoding="utf-8")):
        assert (page.parent / link).exists(), link


def write_anew() -> None:
    os.chdir(ROOT)
    for page in PAGES:
        text = page.read_text(encoding="utf-8")
        text = SESSION.sub(lambda found: f"```console\n$ {found[1]}\n{session(found[1])}```\n", text)
        if page == PYTHON_GUIDE:
            names: dict[str, object] = {}

            def snippet(found: re.Match[str], names: dict[str, object] = names) -> str:
                printed = run_snippet(found["code"], names)
                block = f"\n```text\n{printed}```\n" if printed else ""
                return f"```python\n{found['code']}```\n{block}"

            text = SNIPPET.sub(snippet, text)
        page.write_text(text, encoding="utf-8")


if __name__ == "__main__":
    write_anew()
