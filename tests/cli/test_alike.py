"""Holding logs against each other: formats, the two ways of asking, and what is said when it cannot be done."""

from __future__ import annotations

import csv
import io
import json
import os
import pty

import pytest
from running import COMMAND, Ended, process

COLUMNS = ["log", "known_first", "bits_alone", "bits_after", "saved_bits", "saved_share", "distance"]
HINT = "see 'seqmix alike --help'\n"


@pytest.fixture
def runs(tmp_path, monkeypatch):
    """Three runs of two programs, a state a line, in the working directory."""
    monkeypatch.chdir(tmp_path)
    programs = {"a.txt": "water drain " * 20, "b.txt": "lye lye return " * 15, "c.txt": "drain water " * 18}
    for name, states in programs.items():
        (tmp_path / name).write_text(states.replace(" ", "\n"))
    return tmp_path


def table_of(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_each_log_has_its_others_nearest_first(run, runs):
    ended = run("alike", "a.txt", "b.txt", "c.txt")
    assert (ended.code, ended.err) == (0, "")
    rows = table_of(ended.out)
    assert list(rows[0]) == COLUMNS
    assert [row["log"] for row in rows] == ["a.txt", "a.txt", "b.txt", "b.txt", "c.txt", "c.txt"]
    assert (rows[0]["known_first"], rows[4]["known_first"]) == ("c.txt", "a.txt")
    for row in rows:
        saved = float(row["saved_bits"])
        assert saved == float(row["bits_alone"]) - float(row["bits_after"])
        assert float(row["saved_share"]) == saved / float(row["bits_alone"])


def test_jsonl_tells_the_same_and_each_compressor(run, runs):
    records = [json.loads(line) for line in run("alike", "a.txt", "b.txt", "--format", "jsonl").out.splitlines()]
    for record, row in zip(records, table_of(run("alike", "a.txt", "b.txt").out), strict=True):
        assert list(record) == ["log", "known_first", "rows", *COLUMNS[2:], "distances"]
        assert {name: str(record[name]) for name in COLUMNS} == row
        assert list(record["distances"]) == ["deflate", "bzip2", "zstd", "brotli"]
    assert [record["rows"] for record in records] == [40, 45]


def test_to_answers_for_one_log_and_leaves_out_its_own_name(run, runs):
    ended = run("alike", "a.txt", "b.txt", "--to", "c.txt")
    assert (ended.code, ended.err) == (0, "")
    assert [(row["log"], row["known_first"]) for row in table_of(ended.out)] == [("c.txt", "a.txt"), ("c.txt", "b.txt")]
    assert run("alike", "a.txt", "b.txt", "c.txt", "--to", "c.txt") == ended
    assert run("alike", "a.txt", "b.txt", SEQMIX_ALIKE_TO="c.txt") == ended


def test_table(run, runs):
    ended = run("alike", "a.txt", "b.txt", "--to", "c.txt", "--format", "table")
    assert (ended.code, ended.err) == (0, "")
    head, first, second = ended.out.splitlines()
    assert head == "log    known first  bits alone  bits after  saved bits  saved share  distance"
    assert first.startswith("c.txt  a.txt ")
    assert second.startswith("c.txt  b.txt ")
    assert first.count("%") == 1


def test_matrix_has_the_saved_shares(run, runs):
    logs = ["a.txt", "b.txt", "c.txt"]
    shares = {(row["log"], row["known_first"]): row["saved_share"] for row in table_of(run("alike", *logs).out)}
    ended = run("alike", *logs, "--matrix")
    assert (ended.code, ended.err) == (0, "")
    rows = list(csv.reader(io.StringIO(ended.out)))
    assert rows[0] == ["log", *logs]
    assert rows[1:] == [[log, *(shares.get((log, known), "") for known in logs)] for log in logs]
    records = [json.loads(line) for line in run("alike", *logs, "--matrix", "--format", "jsonl").out.splitlines()]
    assert records[1]["log"] == "b.txt"
    assert {name: str(share) for name, share in records[1]["saved_share"].items()} == {
        known: shares["b.txt", known] for known in ("a.txt", "c.txt")
    }
    table = run("alike", *logs, "--matrix", "--format", "table").out.splitlines()
    assert table[0].split() == ["log", *logs]
    assert [len(line.split()) for line in table[1:]] == [3, 3, 3]
    one = run("alike", *logs[:2], "--to", "c.txt", "--matrix").out.splitlines()
    assert one[0] == "log,a.txt,b.txt"
    assert len(one) == 2


def test_the_same_log_twice_and_standard_input(run, runs):
    ended = run("alike", "a.txt", "a.txt")
    assert (ended.code, ended.err) == (0, "")
    rows = table_of(ended.out)
    assert [row["log"] for row in rows] == ["a.txt", "a.txt (2)"]
    assert rows[0]["saved_bits"] == rows[1]["saved_bits"]
    piped = run("alike", "a.txt", "-", stdin=runs / "b.txt")
    assert (piped.code, piped.err) == (0, "")
    assert piped.out == run("alike", "a.txt", "b.txt").out.replace("b.txt", "<stdin>")
    to = run("alike", "a.txt", "--to", "-", stdin=runs / "b.txt")
    assert to.out == run("alike", "a.txt", "--to", "b.txt").out.replace("b.txt", "<stdin>")


def test_models_and_kind_are_those_asked_for(run, runs):
    alone = run("alike", "a.txt", "b.txt", "--models", "memoryless")
    assert alone.code == 0
    assert alone.out != run("alike", "a.txt", "b.txt").out
    assert run("alike", "a.txt", "b.txt", "--as", "bytes").out != run("alike", "a.txt", "b.txt").out


def test_notes_are_said_once_with_the_logs_they_are_of(run, runs, line):
    (runs / "other.csv").write_bytes(line.read_bytes())
    (runs / "plain.csv").write_text("time,phase\n" + "2026-01-06T06:00,jam\n2026-01-06T06:01,fill\n" * 3)
    taken = "taken as the value; --column changes it"
    ended = run("alike", "line.csv", "other.csv", "--to", "plain.csv")
    assert ended.code == 0
    assert ended.err == (
        "seqmix: line.csv and 2 more: the first line taken as a header; --no-header takes it as a row\n"
        "seqmix: line.csv and 2 more: column 1 'time' taken as the time; --time changes it\n"
        f"seqmix: line.csv and 1 more: column 2 'state' {taken}\n"
        f"seqmix: plain.csv: column 2 'phase' {taken}\n"
        "seqmix: plain.csv: rows not later than the row before, kept as they are: 2\n"
    )
    assert run("alike", "line.csv", "other.csv", "--to", "plain.csv", "--quiet") == Ended(0, ended.out, "")


@pytest.mark.parametrize(
    ("arguments", "code", "said"),
    [
        ([], 2, f"no two logs to hold against each other; {HINT}"),
        (["a.txt"], 2, f"no two logs to hold against each other; {HINT}"),
        (["a.txt", "--to", "a.txt"], 2, f"no two logs to hold against each other; {HINT}"),
        (["-", "-"], 2, f"standard input can be read only once; {HINT}"),
        (["a.txt", "nofile"], 1, "nofile: cannot be opened: No such file or directory\n"),
        (["a.txt", "--to", "no\x1bfile"], 1, "no\\x1bfile: cannot be opened: No such file or directory\n"),
        (["a.txt", "b.txt", "--models", "tre"], 2, "no model is called 'tre'; did you mean tree?\n"),
        (
            ["a.txt", "b.txt", "num\x1bbers"], 2,
            "num\\x1bbers is read as numbers, but a.txt as states; logs that are compared are of one kind\n",
        ),
        (
            ["num\x1bbers", "a.txt", "--as", "numbers"], 1,
            "a.txt:1:1: not a number: 'water'; --as states takes every distinct value as a state\n",
        ),
        (["a.txt", "b.txt", "--tu", "c.txt"], 2, f"no such option '--tu', the nearest is '--to'; {HINT}"),
    ],
)  # fmt: skip
def test_what_cannot_be_compared(run, runs, arguments, code, said):
    (runs / "num\x1bbers").write_text("1\n2\n")
    before = sorted(os.listdir(runs))
    assert run("alike", *arguments, "-o", "answer") == Ended(code, "", f"seqmix: {said}")
    assert sorted(set(os.listdir(runs)) - {"streams"}) == before


def test_names_are_safe_on_a_terminal(run, runs):
    (runs / "a.txt").rename(runs / "re\x1b[31md.txt")
    for more in ([], ["--matrix"]):
        ended = run("alike", "re\x1b[31md.txt", "b.txt", "--format", "table", *more)
        assert (ended.code, ended.err) == (0, "")
        assert "re\\x1b[31md.txt" in ended.out
        assert ended.out.replace("\n", "").isprintable()


def test_output_is_what_stdout_gets(run, runs):
    out = run("alike", "a.txt", "b.txt").out
    assert run("alike", "a.txt", "b.txt", "-o", "answer") == Ended(0, "", "")
    assert (runs / "answer").read_text() == out


def test_progress_is_shown_on_a_terminal_and_erased(runs):
    # Time goes fast in this process, so that progress is due.
    code = (
        "import itertools, sys; from seqmix.cli import notes; ticks = itertools.count();"
        "notes.time.monotonic = lambda: next(ticks);"
        "from seqmix.cli.run import main; sys.argv[0] = 'seqmix'; sys.exit(main())"
    )
    terminal, other_end = pty.openpty()
    for quiet in ([], ["--quiet"]):
        arguments = ["alike", "a.txt", "b.txt", *quiet]
        child = process(command=[COMMAND[0], "-c", code, *arguments], cwd=runs, stderr=other_end)
        out, _ = child.communicate()
        assert child.returncode == 0
        assert out.startswith(b"log,known_first,")
        os.write(other_end, b"end")
        said = b""
        while not said.endswith(b"end"):  # a terminal hands over what fits into its buffer
            said += os.read(terminal, 10_000)
        assert (b"rows read" in said) == (not quiet)
        assert said.endswith(b"end" if quiet else b" \rend")
    os.close(terminal)
    os.close(other_end)
