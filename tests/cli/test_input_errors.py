"""Logs that cannot be read: exit 1 (2 for a wrong option), one line that says what to do, no answer."""

from __future__ import annotations

import os

import pytest
from running import READERS, Ended

WRONG = [
    (["nofile.csv"], 1, "nofile.csv: cannot be opened: No such file or directory"),
    (["."], 1, ".: cannot be opened: Is a directory"),
    ([""], 1, ": cannot be opened: No such file or directory"),
    (["no\x1b[2Jfile"], 1, "no\\x1b[2Jfile: cannot be opened: No such file or directory"),
    (
        ["line.csv", "--column", "stat"],
        2,
        "line.csv has no column 'stat'; its columns are 1 'time', 2 'state'",
    ),
]


@pytest.mark.parametrize(("arguments", "code", "said"), WRONG)
@pytest.mark.parametrize("name", READERS)
def test_what_cannot_be_opened(run, line, monkeypatch, name, arguments, code, said):
    monkeypatch.chdir(line.parent)
    assert run(name, *arguments) == Ended(code, "", f"seqmix: {said}\n")


@pytest.mark.parametrize("name", READERS)
def test_a_bad_row_leaves_no_answer(run, line, tmp_path, monkeypatch, name):
    monkeypatch.chdir(tmp_path)
    line.write_bytes(line.read_bytes() + b"2026-01-05T07:30:00,j\x1b\xe9m\n")
    before = sorted(os.listdir(tmp_path))
    ended = run(name, "line.csv", "--as", "states", "--format", "jsonl", "-o", "answer")
    assert (ended.code, ended.out) == (1, "")
    assert ended.err.startswith("seqmix: line.csv:92:")
    assert ended.err.count("\n") == 1
    assert ended.err[:-1].isprintable()
    assert sorted(set(os.listdir(tmp_path)) - {"streams"}) == before


@pytest.mark.parametrize("name", READERS)
def test_text_in_a_log_of_numbers(run, name):
    ended = run(name, "--as", "numbers", stdin=b"1.5\n2.5\nj\x1bm\n")
    hint = "not a number: 'j\\x1bm'; --as states takes every distinct value as a state"
    assert ended == Ended(1, "", f"seqmix: <stdin>:3:1: {hint}\n")


@pytest.mark.parametrize("name", ["forecast", "score", "weights"])
def test_a_model_that_is_not_there(run, line, name):
    ended = run(name, line, "--models", "memoryles")
    assert (ended.code, ended.out) == (2, "")
    assert ended.err.startswith("seqmix: ")
    assert "memoryles" in ended.err
    assert ended.err.count("\n") == 1


def test_rows_printed_before_a_bad_one_are_whole(run, tmp_path):
    log = tmp_path / "log.txt"
    long = b"x" * 60  # the bad byte is out of sight when the first rows are printed
    log.write_bytes((b"fill" + long + b"\ncap" + long + b"\n") * 10_000 + b"j\xe9m\n")
    ended = run("score", log, "--as", "states", "--last", "all", "--per-row", "--models", "memoryless")
    assert ended.code == 1
    assert ended.err.startswith(f"seqmix: {log}:20001:2: ")
    header, *rows = ended.out.splitlines(keepends=True)
    assert header == "row,time,value,bits\n"
    assert 0 < len(rows) < 20_000
    assert all(row.endswith("\n") and row.count(",") == 3 for row in rows)
