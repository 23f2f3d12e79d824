"""Usage errors: exit 2 and one line that says what was wrong and what is near."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from running import READERS, Ended

NO_FORMAT = "'xml' is not one of 'table', 'csv', 'jsonl'"

WRONG = [
    ([], "missing command", ""),
    (["forcast"], "no such command 'forcast', the nearest is 'forecast'", ""),
    (["xyzzy"], "no such command 'xyzzy'", ""),
    (["\x1b[31m"], "no such command '\\x1b[31m'", ""),
    (["--versio"], "no such option '--versio', the nearest is '--version'", ""),
    (["score", "--froze"], "no such option '--froze', the nearest is '--frozen'", "score"),
    (["score", "-z"], "no such option '-z'", "score"),
    (["score", "--last=3", "--from=2026"], "--last, --from and --against exclude each other", "score"),
    (["forecast", "a", "b"], "got unexpected extra argument (b)", "forecast"),
    (
        ["forecast", "--steps", "0"],
        "invalid value for '--steps': 0 is not in the range x>=1",
        "forecast",
    ),
    (
        ["weights", "--every=x"],
        "invalid value for '--every': 'x' is not a valid integer range",
        "weights",
    ),
    (["models", "--format", "xml"], f"invalid value for '--format': {NO_FORMAT}", "models"),
    (["completion"], "missing argument 'SHELL'. Choose from: bash, zsh, fish", "completion"),
]


@pytest.mark.parametrize(("arguments", "problem", "name"), WRONG)
def test_wrong_words(run, arguments, problem, name):
    help_of = f"seqmix {name}".strip()
    assert run(*arguments) == Ended(2, "", f"seqmix: {problem}; see '{help_of} --help'\n")


@pytest.mark.parametrize("name", READERS)
def test_a_terminal_is_no_log(run, name):
    leader, follower = os.openpty()
    try:
        ended = run(name, stdin=Path(os.ttyname(follower)))
    finally:
        os.close(leader)
        os.close(follower)
    hint = f"seqmix: no log to read: name a file, or pipe rows in; see 'seqmix {name} --help'\n"
    assert ended == Ended(2, "", hint)


def test_a_wrong_value_of_the_environment_is_named(run):
    line = f"invalid value for '--format' (from SEQMIX_FORMAT): {NO_FORMAT}; see 'seqmix models --help'"
    assert run("models", SEQMIX_FORMAT="xml") == Ended(2, "", f"seqmix: {line}\n")
