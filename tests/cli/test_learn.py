"""`seqmix learn` and --state: what is kept, what goes on from it, and what is said when it cannot."""

from __future__ import annotations

import json
import os
import signal
import time
from itertools import pairwise
from pathlib import Path

import pytest
from running import BARE, Ended, process

from seqmix.kernels import MODE
from seqmix.state import lock

ANSWERS = {
    "forecast": ["--steps", "2", "--format", "jsonl", "--quiet"],
    "weights": ["--format", "table", "--quiet"],
}
NONE = "no state file of seqmix; 'seqmix learn LOG --into FILE' makes one"


@pytest.fixture
def pieces(line: Path) -> tuple[Path, Path]:
    """The log of a line in two files."""
    rows = line.read_bytes().splitlines(keepends=True)
    first, second = line.with_name("first.csv"), line.with_name("second.csv")
    first.write_bytes(b"".join(rows[:50]))
    second.write_bytes(b"".join(rows[50:]))
    return first, second


def test_what_learn_says(run, pieces, tmp_path):
    first, second = pieces
    state = tmp_path / "line.state"
    ended = run("learn", first, "--into", state, "--quiet", "--models", "memoryless,markov")
    head, answer = ended.out.splitlines()
    assert (ended.code, ended.err, head) == (0, "", "learned,rows,bits,bits_per_row,leading,weight")
    assert answer.split(",")[:2] == ["49", "49"]
    record = json.loads(run("learn", "--into", state, "--format", "jsonl", stdin=second).out)
    assert list(record) == head.split(",")
    assert (record["learned"], record["rows"], record["leading"]) == (41, 90, "markov")
    ended = run("learn", os.devnull, "--into", state, "--format", "table")
    assert (ended.code, ended.err) == (0, "")
    assert [text.rsplit("  ", 1)[0].strip() for text in ended.out.splitlines()] == [
        "rows learned now", "rows in all", "bits", "bits a row", "leading model", "its weight",
    ]  # fmt: skip
    assert sorted(os.listdir(tmp_path)) == ["first.csv", "line.csv", "line.state", "second.csv", "streams"]


def test_what_was_assumed_is_told_once(run, pieces, tmp_path):
    first, second = pieces
    notes = run("learn", first, "--into", tmp_path / "state").err
    assert notes == (
        "seqmix: the first line taken as a header; --no-header takes it as a row\n"
        "seqmix: column 1 'time' taken as the time; --time changes it\n"
        "seqmix: column 2 'state' taken as the value; --column changes it\n"
    )
    assert run("learn", second, "--into", tmp_path / "state").err == ""


@pytest.mark.parametrize("name", ANSWERS)
def test_pieces_answer_as_one_log(run, line, pieces, tmp_path, name):
    state = tmp_path / "state"
    whole = run(name, line, *ANSWERS[name])
    assert whole.code == 0
    run("learn", pieces[0], "--into", state)
    kept = state.read_bytes()
    assert run(name, pieces[1], "--state", state, *ANSWERS[name]) == whole
    assert run(name, "-", "--state", state, *ANSWERS[name], stdin=pieces[1]) == whole
    assert state.read_bytes() == kept
    run("learn", pieces[1], "--into", state)
    assert run(name, "--state", state, *ANSWERS[name], stdin=b"not read") == whole


def test_scored_rows_go_on(run, line, pieces, tmp_path):
    state = tmp_path / "state"
    run("learn", pieces[0], "--into", state)
    start = pieces[1].read_text().split(",")[0]
    whole = run("score", line, "--from", start, "--per-row", "--quiet")
    assert run("score", pieces[1], "--state", state, "--per-row") == whole
    last = run("score", pieces[1], "--state", state, "--per-row", "--last", "5").out
    assert last.splitlines()[1:] == whole.out.splitlines()[-5:]


@pytest.mark.parametrize("log", ["states", "numbers"])
def test_another_process_goes_on_to_the_last_bit(tmp_path, log):
    """Learned by the kernels under test, gone on with interpreted; once past the rows that are kept as they are."""
    if log == "states":
        rows = [f"{('fill', 'cap', 'label')[row * row // 7 % 3]}\n" for row in range(4160)]
        models = "memoryless,match"
    else:
        rows = [f"{4 + row * row // 7 % 5 / 10}\n" for row in range(4160)]
        models = "counts,rules"
    states = []
    for name, cuts in (("one", [0, 4160]), ("two", [0, 50, 4140, 4160])):
        state = tmp_path / name
        for start, stop in pairwise(cuts):
            way = "interpreted" if start > 4096 else MODE
            child = process(
                "learn", "-", "--into", state, "--models", models, "--quiet",
                env={**os.environ, **BARE, "SEQMIX_KERNELS": way},
            )  # fmt: skip
            _, err = child.communicate("".join(rows[start:stop]).encode(), timeout=120)
            assert (child.returncode, err) == (0, b""), err
        states.append(state.read_bytes())
    assert states[0] == states[1]


WRONG = [
    (["--state", "line.csv"], 1, f"line.csv: {NONE}"),
    (["--state", "nothing"], 1, "nothing: cannot be opened: No such file or directory"),
    (["--state", "cut"], 1, "cut: damaged or cut short; take a copy, or learn the log anew"),
    (
        ["--state", "newer"],
        1,
        "newer: a state of format 2, and this seqmix reads format 1; "
        "take the seqmix that wrote it, or learn the log anew",
    ),
    (["--state", "state", "--column", "speed"], 2, "state has as its column 'state', not 'speed'"),
    (["--state", "state", "--as", "numbers"], 2, "state has as its kind 'states', not 'numbers'"),
    (["--state", "state", "--models", "tree"], 2, "state mixes the models memoryless, markov; leave --models out"),
]


@pytest.fixture
def states(run, line, monkeypatch) -> None:
    """A state in the working directory, and damaged copies of it."""
    monkeypatch.chdir(line.parent)
    run("learn", "line.csv", "--into", "state", "--models", "memoryless,markov")
    data = Path("state").read_bytes()
    Path("cut").write_bytes(data[:-1])
    Path("newer").write_bytes(data[:8] + b"\2" + data[9:])


@pytest.mark.parametrize(("arguments", "code", "said"), WRONG)
@pytest.mark.parametrize("name", ["forecast", "weights", "score"])
def test_states_that_cannot_be_gone_on_from(run, states, name, arguments, code, said):
    assert run(name, "line.csv", *arguments) == Ended(code, "", f"seqmix: {said}\n")


@pytest.mark.parametrize(("arguments", "code", "said"), WRONG[:1] + WRONG[2:])
def test_states_that_cannot_be_learned_into(run, states, arguments, code, said):
    before = {path.name: path.read_bytes() for path in Path().iterdir() if path.is_file()}
    ended = run("learn", "line.csv", *(["--into", *arguments[1:]]))
    assert ended == Ended(code, "", f"seqmix: {said}\n")
    assert {path.name: path.read_bytes() for path in Path().iterdir() if path.is_file()} == before


def test_options_of_numbers_are_those_of_the_state(run, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert run("learn", "--into", "state", "--period", "7", "--quiet", stdin=b"1\n2\n4\n").code == 0
    said = "seqmix: state was learned with another period; leave --period out\n"
    assert run("learn", "--into", "state", "--period", "24", stdin=b"1\n") == Ended(2, "", said)
    assert run("forecast", "--state", "state", "--period", "24") == Ended(2, "", said)
    assert run("forecast", "--state", "state", "--period", "7").code == 0
    said = "seqmix: <stdin>:1:1: not a number: 'tea'; --as states takes every distinct value as a state\n"
    assert run("learn", "--into", "state", stdin=b"tea\n") == Ended(1, "", said)


def test_usage(run, line, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    said = "seqmix: missing option '--into'; see 'seqmix learn --help'\n"
    assert run("learn", line) == Ended(2, "", said)
    said = "seqmix: <stdin>: no rows in it, so there is nothing to keep\n"
    assert run("learn", "--into", "state") == Ended(1, "", said)
    said = "seqmix: cannot write none/state: No such file or directory\n"
    assert run("learn", line, "--into", "none/state") == Ended(74, "", said)
    leader, follower = os.openpty()
    try:
        ended = run("score", "--state", tmp_path / "state", stdin=Path(os.ttyname(follower)))
        assert ended.code == 1  # the state comes first
        ended = run("learn", "--into", "state", stdin=Path(os.ttyname(follower)))
    finally:
        os.close(leader)
        os.close(follower)
    hint = "seqmix: no log to read: name a file, or pipe rows in; see 'seqmix learn --help'\n"
    assert ended == Ended(2, "", hint)
    assert sorted(os.listdir()) == ["line.csv", "streams"]


def test_a_second_writer_is_told(run, states):
    with lock("state"):
        ended = run("learn", "line.csv", "--into", "state")
        assert run("forecast", "--state", "state").code == 0
    said = "seqmix: state: another seqmix is learning into it; wait until it ends\n"
    assert ended == Ended(1, "", said)


def test_a_signal_leaves_the_state_as_it_was(tmp_path, run, line):
    state = tmp_path / "state"
    run("learn", line, "--into", state)
    before = state.read_bytes()
    child = process("learn", "-", "--into", state)
    assert child.stdin is not None
    child.stdin.write(b"2026-01-05T07:30:00,fill\n")
    child.stdin.flush()
    side = tmp_path / ".state.lock"
    while not side.exists():
        time.sleep(0.01)
    child.send_signal(signal.SIGTERM)
    out, err = child.communicate(timeout=30)
    assert (child.returncode, out, err) == (143, b"", b"seqmix: stopped by SIGTERM\n")
    assert state.read_bytes() == before
    assert not side.exists()
