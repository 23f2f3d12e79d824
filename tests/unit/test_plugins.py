"""Plug-ins: the example, as an installer would leave it, and broken ones, which never do harm."""

from __future__ import annotations

import configparser
import importlib.util
import json
import os
import shutil
import subprocess
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import pytest

import seqmix
from seqmix import testing
from seqmix.kernels import MODE
from seqmix.models import compressed, compressed_bins, registry

EXAMPLE = Path(__file__).parents[2] / "examples" / "plugin"

BASE = """
import numpy as np
from seqmix.models.memoryless import Memoryless

class Sound(Memoryless):
    name = "NAME"
    prior_cost = 4.0
    summary = "a test"
    source = "a test"
"""

COMPRESSOR = """
class Broken:
    name, summary, source, cost, reach, informed = "NAME", "a test", "a test", 1.0, 100, False
    def code_length(self, history, candidates):
"""


def install(place: Path, package: str, version: str, source: str, points: Mapping[str, Mapping[str, str]]) -> None:
    """What an installer does: the module, and beside it what it is called and which entry points it has."""
    module = package.replace("-", "_")
    (place / f"{module}.py").write_text(source)
    info = place / f"{module}-{version}.dist-info"
    info.mkdir()
    (info / "METADATA").write_text(f"Metadata-Version: 2.1\nName: {package}\nVersion: {version}\n")
    written = configparser.ConfigParser()
    written.read_dict(points)
    with open(info / "entry_points.txt", "w") as file:
        written.write(file)


def install_broken(place: Path, name: str, body: str, group: str = "seqmix.models") -> None:
    base = BASE if group == "seqmix.models" else COMPRESSOR
    source = (base + body).replace("NAME", name)
    install(place, f"bad-{name}", "0.1", source, {group: {name: f"bad_{name}:Broken"}})


@dataclass
class Ended:
    code: int
    out: str
    err: str


def run(place: Path, *arguments: str | Path, stdin: str = "") -> Ended:
    """A command in a process of its own, with the plug-ins that lie in `place`."""
    environment = {name: value for name, value in os.environ.items() if not name.startswith("SEQMIX_")}
    path = f"{Path(seqmix.__file__).parents[1]}{os.pathsep}{place}"
    done = subprocess.run(
        [sys.executable, "-m", "seqmix", *map(str, arguments)],
        env={**environment, "PYTHONPATH": path, "SEQMIX_KERNELS": MODE},
        input=stdin, capture_output=True, text=True, timeout=120,
    )  # fmt: skip
    return Ended(done.returncode, done.stdout, done.stderr)


@pytest.fixture
def place(tmp_path: Path) -> Path:
    (tmp_path / "installed").mkdir()
    return tmp_path / "installed"


@pytest.fixture
def line(tmp_path: Path) -> Path:
    """Fill, cap and label, a row a minute for four hours."""
    rows = [f"2026-01-05T{6 + t // 60:02d}:{t % 60:02d},{('fill', 'cap', 'label')[t % 3]}\n" for t in range(240)]
    (tmp_path / "line.csv").write_text("time,state\n" + "".join(rows))
    return tmp_path / "line.csv"


# ---- the example ---------------------------------------------------------------------------------------------------


def example_points() -> dict[str, dict[str, str]]:
    """The entry points in the example's pyproject.toml; of TOML it uses what this parser understands, too."""
    project = configparser.ConfigParser()
    project.read(EXAMPLE / "pyproject.toml")
    found = {}
    for section in project.sections():
        if section.startswith("project.entry-points."):
            group = section.removeprefix("project.entry-points.").strip('"')
            found[group] = {name: value.strip('"') for name, value in project[section].items()}
    return found


@pytest.fixture
def example(place: Path) -> Path:
    points = example_points()
    assert set(points) == {"seqmix.models", "seqmix.compressors"}
    install(place, "dairy-shift", "1.0", (EXAMPLE / "dairy_shift.py").read_text(), points)
    return place


def test_the_example_is_listed_with_its_package(example):
    listed = run(example, "models", "--format", "jsonl")
    assert (listed.code, listed.err) == (0, "")
    entries = [json.loads(text) for text in listed.out.splitlines()]
    assert [entry["name"] for entry in entries] == [*(entry.name for entry in registry.entries()), "shift", "pieces"]
    for entry, kinds in zip(entries[-2:], (["states"], ["states", "bytes", "numbers"]), strict=True):
        assert (entry["package"], entry["version"], entry["kinds"]) == ("dairy-shift", "1.0", kinds)
    assert "dairy-shift 1.0" in run(example, "models", "--format", "table").out


def test_the_example_is_mixed_where_it_is_named(example, line):
    mixed = run(example, "forecast", line, "--models", "default,shift,pieces", "--format", "jsonl", "--quiet")
    assert (mixed.code, mixed.err) == (0, "")
    for text in mixed.out.splitlines():
        record = json.loads(text)
        assert {"shift", "pieces", "tree", "deflate"} <= set(record["weights"])
        assert sum(record["probabilities"].values()) + record["unseen"] == pytest.approx(1, abs=1e-9)
    plain = run(example, "forecast", line, "--format", "jsonl", "--quiet")
    assert "shift" not in plain.out
    alone = run(example, "score", line, "--models", "shift", "--format", "jsonl", "--quiet")
    assert [model["name"] for model in json.loads(alone.out)["models"]] == ["shift"]


def test_the_example_does_for_numbers_and_bytes_what_it_can(example, line):
    numbers = "".join(f"{t * t % 17}\n" for t in range(200))
    ended = run(example, "weights", "--models", "trend,pieces", "--format", "jsonl", "--quiet", stdin=numbers)
    assert (ended.code, ended.err) == (0, "")
    assert set(json.loads(ended.out.splitlines()[-1])["weights"]) == {"trend", "pieces"}
    ended = run(example, "forecast", line, "--as", "bytes", "--models", "tree,shift", "--format", "jsonl", "--quiet")
    assert (ended.code, ended.err) == (
        0, "seqmix: plug-in shift of dairy-shift 1.0 left out: it is for states, not bytes\n",
    )  # fmt: skip
    ended = run(example, "forecast", "--models", "tree,shift", "--format", "jsonl", stdin="fill\ncap\n" * 20)
    assert (ended.code, ended.err) == (
        0, "seqmix: plug-in shift of dairy-shift 1.0 left out: it is for a log with times\n",
    )  # fmt: skip
    assert set(json.loads(ended.out.splitlines()[0])["weights"]) == {"tree"}


def test_the_example_keeps_the_contract(monkeypatch):
    monkeypatch.syspath_prepend(str(EXAMPLE))
    module = importlib.import_module("dairy_shift")
    testing.check_model(module.Shift)
    testing.check_model(compressed.model_of(module.Pieces), rows=300)
    testing.check_model(compressed_bins.model_of(module.Pieces), rows=300)


@pytest.mark.skipif(
    not (importlib.util.find_spec("pip") and importlib.util.find_spec("setuptools")), reason="nothing to build it with"
)
def test_the_example_can_be_installed(tmp_path, place):
    copy = shutil.copytree(EXAMPLE, tmp_path / "copy", ignore=shutil.ignore_patterns("__pycache__"))
    subprocess.run(
        [sys.executable, "-m", "pip", "install", "--quiet", "--no-build-isolation", "--no-deps", "--no-index",
         "--disable-pip-version-check", "--target", place, copy],
        check=True, timeout=120,
    )  # fmt: skip
    assert "dairy-shift 1.0" in run(place, "models", "--format", "table").out


# ---- broken ones ---------------------------------------------------------------------------------------------------

UNSOUND = [
    ("imports", "import no_such_module_of_dairies", "ModuleNotFoundError: No module named 'no_such_module_of_dairies'"),
    ("raises", "raise RuntimeError('\\x1b[31mred\\nink')", "RuntimeError: \\x1b[31mred\\nink"),
    ("nothing", "", "AttributeError: module 'bad_nothing' has no attribute 'Broken'"),
    ("other", "class Broken(Sound):\n    name = 'else'", "ValueError: the model calls itself 'else'"),
    (
        "partly",
        "class Broken:\n    name, kinds, prior_cost, summary, source = 'partly', ('states',), 1.0, '', ''\n"
        "    absorb = predict = walk = setting = state = restore = print",
        "TypeError: a model has 'sample'",
    ),
    ("kind", "class Broken(Sound):\n    kinds = ('milk',)", "ValueError: kinds are some of states, bytes, numbers"),
    (
        "dear",
        "class Broken(Sound):\n    prior_cost = float('nan')",
        "ValueError: a prior cost lies between 0 and 1,000 bits",
    ),
]


@pytest.mark.parametrize(("name", "body", "why"), UNSOUND, ids=[name for name, _, _ in UNSOUND])
def test_one_that_cannot_be_loaded_is_named_and_left_out(place, line, name, body, why):
    install_broken(place, name, body)
    said = f"seqmix: plug-in {name} of bad-{name} 0.1 left out: {why}\n"
    listed = run(place, "models")
    assert (listed.code, listed.err) == (0, said)
    mixed = run(place, "forecast", line, "--models", f"default,{name}", "--quiet")
    assert (mixed.code, mixed.err) == (0, said)
    assert mixed.out == run(place, "forecast", line, "--quiet").out
    alone = run(place, "forecast", line, "--models", name, "--quiet")
    left = "seqmix: no model is left; name others, or default for all of the library\n"
    assert alone == Ended(2, "", said + left)


def test_one_named_like_a_model_of_the_library_is_never_used(place, line):
    install_broken(place, "tree", "class Broken(Sound):\n    pass")
    listed = run(place, "models")
    why = "ValueError: a model of the library has this name"
    assert (listed.code, listed.err) == (0, f"seqmix: plug-in tree of bad-tree 0.1 left out: {why}\n")
    assert run(place, "score", line, "--models", "tree") == run(place / "nowhere", "score", line, "--models", "tree")


def test_a_name_that_nothing_has_is_no_plugin(place, line):
    install_broken(place, "late", "class Broken(Sound):\n    pass")
    ended = run(place, "forecast", line, "--models", "default,pasteuriser")
    assert (ended.code, ended.out) == (2, "")
    assert ended.err.startswith("seqmix: no model is called 'pasteuriser'; there are memoryless, ")


IMPOSSIBLE = "ValueError: losses are bits, one a row, finite and not below 0"
NO_LAW = "ValueError: masses are not below 0 and add up to 1"

FAILING = [
    (
        "hundred",
        "class Broken(Sound):\n"
        "    def absorb(self, rows, ask=None, frozen=False):\n"
        "        if rows.first + len(rows) > 100:\n"
        "            raise RuntimeError('row 100\\x1b[2J')\n"
        "        return super().absorb(rows, ask, frozen)",
        "RuntimeError: row 100\\x1b[2J",
    ),
    ("below", "class Broken(Sound):\n    absorb = lambda self, rows, *_, **__: np.full(len(rows), -1.0)", IMPOSSIBLE),
    ("high", "class Broken(Sound):\n    absorb = lambda self, rows, *_, **__: np.full(len(rows), np.inf)", IMPOSSIBLE),
    ("short", "class Broken(Sound):\n    absorb = lambda self, rows, *_, **__: np.zeros(3)", IMPOSSIBLE),
    (
        "much",
        "class Broken(Sound):\n"
        "    def predict(self, time=None):\n"
        "        law = super().predict(time)\n"
        "        return type(law)(law.masses * 2, law.unseen)",
        NO_LAW,
    ),
    (
        "long",
        "class Broken(Sound):\n"
        "    def predict(self, time=None):\n"
        "        law = super().predict(time)\n"
        "        return type(law)(np.append(law.masses, 0.0), law.unseen)",
        "ValueError: a law has a mass for each state seen",
    ),
    ("word", "class Broken(Sound):\n    predict = lambda self, time=None: 'cap'",
     "TypeError: a law is a StatesLaw, a NumberLaw or None"),
    ("stands", "class Broken(Sound):\n    walk = lambda self, *_: 1 / 0", "ZeroDivisionError: division by zero"),
]  # fmt: skip


@pytest.mark.parametrize(("name", "body", "why"), FAILING, ids=[name for name, _, _ in FAILING])
def test_one_that_fails_on_the_way_is_left_out_from_there(place, line, name, body, why):
    install_broken(place, name, body)
    mixed = run(place, "forecast", line, "--models", f"memoryless,{name}", "--quiet", "--format", "jsonl")
    said = f"seqmix: plug-in {name} of bad-{name} 0.1 left out from here on: {why}\n"
    assert (mixed.code, mixed.err) == (0, said)
    records = [json.loads(text) for text in mixed.out.splitlines()]
    assert len(records) == 5
    for record in records:
        assert sum(record["probabilities"].values()) + record["unseen"] == pytest.approx(1, abs=1e-9)
        assert sum(record["weights"].values()) == pytest.approx(1, abs=1e-9)
        assert min(record["probabilities"].values()) >= 0


def test_until_it_fails_it_counts_and_then_sleeps(place, line):
    install_broken(place, "hundred", FAILING[0][1])
    ended = run(place, "score", line, "--last", "180", "--models", "markov,hundred", "--quiet", "--format", "jsonl")
    assert (ended.code, ended.err) == (0, f"seqmix: plug-in hundred of bad-hundred 0.1 left out from here on: "
                                          f"{FAILING[0][2]}\n")  # fmt: skip
    markov, hundred = json.loads(ended.out)["models"]
    assert (markov["rows_awake"], hundred["rows_awake"]) == (180, 0)
    assert json.loads(ended.out)["accuracy"] > 0.9


def test_one_that_cannot_be_made_is_left_out(place, line):
    install_broken(place, "made", "class Broken(Sound):\n    def __init__(self, alphabet=0):\n        self.seen[0]")
    said = "seqmix: plug-in made of bad-made 0.1 left out: AttributeError: 'Broken' object has no attribute 'seen'\n"
    mixed = run(place, "forecast", line, "--models", "default,made", "--quiet")
    assert (mixed.code, mixed.err) == (0, said)
    alone = run(place, "forecast", line, "--models", "made", "--quiet")
    assert alone == Ended(2, "", said + "seqmix: no model is left; name others, or default for all of the library\n")


def test_one_that_cannot_hand_out_its_state_is_left_out(place, line):
    install_broken(place, "shut", "class Broken(Sound):\n    state = lambda self: 1 / 0")
    ended = run(place, "alike", line, line, "--models", "tree,shut", "--quiet")
    # a new one for each of two logs; two more go on from the state of one that has failed
    said = "seqmix: plug-in shut of bad-shut 0.1 left out from here on: ZeroDivisionError: division by zero\n"
    assert (ended.code, ended.err) == (0, 2 * said)


def test_one_that_cannot_draw_paths_ends_the_command(place, line):
    install_broken(place, "draws", "class Broken(Sound):\n    sample = lambda self, *_: 1 / 0")
    ended = run(place, "forecast", line, "--models", "draws", "--paths", "3", "--quiet")
    why = "cannot draw paths: ZeroDivisionError: division by zero; leave it out"
    assert ended == Ended(1, "", f"seqmix: plug-in draws of bad-draws 0.1 {why}\n")


@pytest.mark.parametrize(
    ("name", "body", "why"),
    [
        ("raising", "        raise OSError('no such coder\\x07')", "OSError: no such coder\\x07"),
        ("unclear", "        return [float('nan') for _ in candidates]",
         "ValueError: code lengths are finite, one a candidate"),
        ("few", "        return [8.0]", "ValueError: code lengths are finite, one a candidate"),
    ],
)  # fmt: skip
@pytest.mark.parametrize("kind", ["states", "numbers"])
def test_a_broken_compressor_is_left_out(place, kind, name, body, why):
    install_broken(place, name, body, "seqmix.compressors")
    rows = "".join(f"{t * t % 17}\n" for t in range(400))
    few = "markov" if kind == "states" else "trend"
    arguments = ("--as", kind, "--models", f"{few},{name}", "--compressor-share", "1", "--quiet", "--format", "jsonl")
    ended = run(place, "score", *arguments, stdin=rows)
    said = f"seqmix: plug-in {name} of bad-{name} 0.1 left out from here on: {why}\n"
    assert (ended.code, ended.err) == (0, said)
    assert json.loads(ended.out)["models"][1]["rows_awake"] == 0
    assert json.loads(ended.out)["crps" if kind == "numbers" else "brier"] > 0


@pytest.mark.parametrize("missing", ["cost", "reach", "informed", "code_length"])
def test_a_compressor_without_all_it_takes_is_left_out(place, missing):
    body = "        return []\nBroken = type('Broken', (), {k: v for k, v in vars(Broken).items() if k != 'MISSING'})"
    install_broken(place, "less", body.replace("MISSING", missing), "seqmix.compressors")
    listed = run(place, "models")
    why = f"TypeError: a compressor has '{missing}'"
    assert (listed.code, listed.err) == (0, f"seqmix: plug-in less of bad-less 0.1 left out: {why}\n")
