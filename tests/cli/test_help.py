"""Every command explains itself, at once, and the reference page says the same."""

from __future__ import annotations

import platform
import runpy
import sys
from pathlib import Path

import numpy
import pytest
from running import Ended, process

import seqmix
from seqmix.cli.group import NAMES

DOCS = Path(__file__).parents[2] / "docs"


@pytest.mark.parametrize("flag", ["-h", "--help"])
@pytest.mark.parametrize("name", NAMES)
def test_help_starts_with_an_example_of_the_command(run, name, flag):
    ended = run(name, flag)
    assert (ended.code, ended.err) == (0, "")
    first, example, blank, usage = ended.out.splitlines()[:4]
    assert (first, blank) == ("Example:", "")
    assert f"seqmix {name}" in example
    assert usage.startswith(f"Usage: seqmix {name} ")
    assert "\nOptions:\n" in ended.out


def test_help_lists_every_command(run):
    ended = run("-h")
    assert (ended.code, ended.err) == (0, "")
    assert ended.out == run("--help").out
    for name in NAMES:
        assert f"\n  {name} " in ended.out


def test_defaults_are_shown(run):
    assert "[default: 5; x>=1]" in run("forecast", "-h").out
    assert "[default: 20%]" in run("score", "-h").out


def test_reference_page_is_what_help_says():
    made = runpy.run_path(str(DOCS / "make_commands.py"))["reference"]()
    assert (DOCS / "commands.md").read_text(encoding="utf-8") == made, "run: python docs/make_commands.py"
    for name in NAMES:
        assert f"\n## seqmix {name}\n" in made


def test_version(run):
    from seqmix.kernels import MODE

    versions = f"kernels {MODE}, Python {platform.python_version()}, numpy {numpy.__version__}"
    assert run("--version") == Ended(0, f"seqmix {seqmix.__version__}, {versions}\n", "")


@pytest.mark.parametrize("arguments", [["--help"], ["score", "-h"], ["completion", "zsh"]])
def test_help_and_completion_import_nothing_heavy(arguments):
    code = (
        "import sys; sys.argv[0] = 'seqmix'; from seqmix.cli.run import main; code = main();"
        "print(code, sorted({'numpy', 'seqmix.series', 'seqmix.kernels'} & set(sys.modules)))"
    )
    child = process(command=[sys.executable, "-c", code, *arguments])
    out, err = child.communicate()
    assert out.decode().endswith("\n0 []\n")
    assert err == b""


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_completion_prints_the_script_of_the_shell(run, shell):
    ended = run("completion", shell)
    assert (ended.code, ended.err) == (0, "")
    assert "_SEQMIX_COMPLETE" in ended.out
    assert f"{shell}_complete" in ended.out


def test_completion_finds_commands_and_options(run):
    asked = {"_SEQMIX_COMPLETE": "bash_complete", "COMP_CWORD": "1"}
    assert run(COMP_WORDS="seqmix fo", **asked).out == "plain,forecast\nplain,follow\n"
    asked["COMP_CWORD"] = "2"
    assert run(COMP_WORDS="seqmix score --f", **asked).out == "plain,--from\nplain,--frozen\nplain,--format\n"
