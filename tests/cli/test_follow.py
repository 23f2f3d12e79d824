"""`seqmix follow`: pipes and growing files answered at once, signals and restarts, and what is said of bad rows."""

from __future__ import annotations

import csv
import io
import json
import os
import queue
import signal
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest
from running import COMMAND, Ended, process

PATIENCE = 20.0
"""Seconds that an answer may take on a busy machine."""

QUICK = ["--models", "markov,memoryless"]
SEQMIX = [*COMMAND, "follow", *QUICK]
KEYS = ["row", "time", "value", "bits", "p_value", "surprise", "forecast", "next", "leading", "weight"]
HINT = "see 'seqmix follow --help'\n"


class Live:
    """A `follow` that runs: what it answered, line by line, and how it ended."""

    def __init__(self, *arguments: str | Path, **settings: object) -> None:
        self.child = process("follow", *arguments, *QUICK, **settings)
        self._lines: queue.Queue[bytes] = queue.Queue()
        threading.Thread(target=self._listen, daemon=True).start()

    def _listen(self) -> None:
        assert self.child.stdout is not None
        for text in self.child.stdout:
            self._lines.put(text)

    def write(self, text: str) -> None:
        assert self.child.stdin is not None
        self.child.stdin.write(text.encode())
        self.child.stdin.flush()

    def answer(self) -> dict[str, Any]:
        """The next one; fails if none comes."""
        return json.loads(self._lines.get(timeout=PATIENCE))

    def silent(self, seconds: float = 0.2) -> bool:
        time.sleep(seconds)
        return self._lines.empty()

    def close(self) -> tuple[int, str]:
        """Ends the pipe; exit code and stderr."""
        assert self.child.stdin is not None
        self.child.stdin.close()
        return self.ended()

    def ended(self) -> tuple[int, str]:
        assert self.child.stderr is not None
        code = self.child.wait(PATIENCE)
        return code, self.child.stderr.read().decode()

    def stop(self, number: int = signal.SIGTERM) -> tuple[int, str]:
        self.child.send_signal(number)
        return self.ended()


@contextmanager
def following(*arguments: str | Path, **settings: object) -> Iterator[Live]:
    live = Live(*arguments, **settings)
    try:
        yield live
    finally:
        live.child.kill()
        live.child.wait()
        for stream in (live.child.stdin, live.child.stderr):
            if stream is not None:
                stream.close()


def clocked(*minutes: int) -> str:
    return "".join(f"2026-01-05T06:{minute:02d},{('fill', 'cap')[minute % 2]}\n" for minute in minutes)


HEAD = "time,state\n"


# ---- what it prints


def test_answers_of_states(run, line):
    ended = run("follow", *QUICK, stdin=line)
    assert (ended.code, ended.err) == (0, "")
    records = [json.loads(text) for text in ended.out.splitlines()]
    assert len(records) == 90
    assert [list(record) for record in records] == [KEYS] * 90
    assert records[0]["forecast"] is None
    assert (records[0]["time"], records[0]["value"], records[89]["row"]) == ("2026-01-05T06:00:00", "fill", 90)
    assert records[5]["forecast"] == records[4]["next"]
    assert list(records[4]["next"]) == ["top", "probability", "unseen"]
    steps = [json.loads(text) for text in run("follow", *QUICK, "--steps", "3", stdin=line).out.splitlines()]
    assert [record["next"][0] for record in steps] == [record["next"] for record in records]
    assert {len(record["next"]) for record in steps} == {3}


def test_csv_has_its_header(run, line):
    rows = list(csv.reader(io.StringIO(run("follow", *QUICK, "--format", "csv", stdin=line).out)))
    assert ",".join(rows[0]) == (
        "row,time,value,bits,p_value,surprise,forecast_top,forecast_probability,forecast_unseen,"
        "next_top,next_probability,next_unseen,leading,weight"
    )
    assert (len(rows), {len(row) for row in rows}) == (91, {14})
    assert rows[1][6:9] == ["", "", ""]
    assert rows[6][6:9] == rows[5][9:12]
    rows = list(csv.reader(io.StringIO(run("follow", "--format", "csv", "--models", "trend", stdin=b"4.5\n4.6\n").out)))
    assert rows[0][6:12] == ["forecast_median", "forecast_p10", "forecast_p90", "next_median", "next_p10", "next_p90"]
    assert len(rows) == 3
    assert rows[2][6:9] == rows[1][9:12]


def test_answers_are_those_of_surprise(run, line):
    """One row a line, as surprise --all tells them."""
    told = [json.loads(text) for text in run("follow", *QUICK, stdin=line).out.splitlines()]
    texts = run("surprise", line, *QUICK, "--all", "--format", "jsonl", "--quiet").out.splitlines()
    shared = KEYS[:6]
    assert [{name: record[name] for name in shared} for record in told] == [
        {name: record[name] for name in shared} for record in map(json.loads, texts)
    ]


def test_a_pipe_by_its_name(run, line):
    child = process("follow", "/dev/stdin", *QUICK)
    out, err = child.communicate(line.read_bytes(), timeout=PATIENCE)
    assert Ended(child.returncode, out.decode(), err.decode()) == run("follow", "-", *QUICK, stdin=line)


@pytest.mark.parametrize("rows", [b"", b"\n"])
def test_nothing_to_follow(run, rows):
    ended = run("follow", *QUICK, stdin=rows)
    assert (ended.code, ended.err) == (0, "")
    assert ended.out.count("\n") <= 1


# ---- rows that cannot be read


def test_a_row_that_cannot_be_read_is_told_and_left_out(run):
    log = (HEAD + clocked(0, 1) + "2026-01-05T06:02\n" + "2026-01-05T06:02,j\x1b\udce9m\n" + clocked(3)).encode(
        "utf-8", "surrogateescape"
    )
    ended = run("follow", *QUICK, stdin=log)
    assert [json.loads(text)["value"] for text in ended.out.splitlines()] == ["fill", "cap", "cap"]
    first, second, last = ended.err.splitlines()
    assert ended.code == 0
    assert first == "seqmix: <stdin>:4: 1 cells where 2 were expected; row left out"
    assert second.startswith("seqmix: <stdin>:5: ")
    assert second.endswith("; row left out")
    assert last == "seqmix: rows that could not be read, left out: 2"
    assert all(text.isprintable() for text in (first, second, last))


def test_strict_ends_at_it(run):
    log = (HEAD + clocked(0, 1) + "2026-01-05T06:02\n" + clocked(3)).encode()
    ended = run("follow", "--strict", *QUICK, stdin=log)
    assert (ended.code, ended.err) == (1, "seqmix: <stdin>:4: 1 cells where 2 were expected\n")


@pytest.mark.parametrize(
    ("arguments", "code", "said"),
    [
        (["--false-alarms", "often"], 2,
         "'often' is no rate of false alarms; say 1/10000rows, 1/hour, 1/day or 1/week\n"),
        (["--false-alarms", "1/day"], 2,
         "'1/day' needs a log with regular times; give the rate in rows, as 1/10000rows\n"),
        (["--as", "bytes"], 2, "follow reads rows that are lines; give bytes as lines, or --as states\n"),
        (["--save-every", "often"], 2,
         f"invalid value for '--save-every': 'often' is neither rows nor seconds; say 1000rows or 60s; {HINT}"),
        (["--save-every", "0s"], 2,
         f"invalid value for '--save-every': '0s' is neither rows nor seconds; say 1000rows or 60s; {HINT}"),
        (["--steps", "0"], 2, f"invalid value for '--steps': 0 is not in the range x>=1; {HINT}"),
        (["--format", "table"], 2, f"invalid value for '--format': 'table' is not one of 'csv', 'jsonl'; {HINT}"),
        (["--column", "speed"], 2, "<stdin> has no column 'speed'; its columns are 1 (like 'fill')\n"),
        (["."], 1, ".: cannot be opened: Is a directory\n"),
        (["nofile"], 1, "nofile: cannot be opened: No such file or directory\n"),
        (["--state", "none/state"], 74, "cannot write none/state: No such file or directory\n"),
        (["--state", "nostate"], 1,
         "nostate: no state file of seqmix; 'seqmix learn LOG --into FILE' makes one\n"),
    ],
)  # fmt: skip
def test_what_cannot_be_followed(run, tmp_path, monkeypatch, arguments, code, said):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "nostate").write_text("tea")
    assert run("follow", *arguments, stdin=b"fill\ncap\nfill\n") == Ended(code, "", f"seqmix: {said}")
    assert sorted(os.listdir(tmp_path)) == ["nostate", "streams"]


def test_a_terminal_is_no_log(run):
    leader, follower = os.openpty()
    try:
        ended = run("follow", stdin=Path(os.ttyname(follower)))
    finally:
        os.close(leader)
        os.close(follower)
    assert ended == Ended(2, "", f"seqmix: no log to read: name a file, or pipe rows in; {HINT}")


# ---- as rows arrive


def test_a_row_is_answered_before_the_next_one_comes():
    with following() as live:
        live.write(HEAD)
        for minute in range(5):
            live.write(clocked(minute))
            assert live.answer()["time"] == f"2026-01-05T06:{minute:02d}"
        row = clocked(5)
        live.write(row[:9])
        assert live.silent()
        live.write(row[9:-1])
        assert live.silent()
        live.write("\n")
        assert live.answer()["row"] == 6
        live.write(clocked(6)[:-1])  # the end of the pipe ends the line
        assert live.close() == (0, "")
        assert live.answer()["row"] == 7


def test_a_file_is_followed_through_growth_rotation_and_truncation(tmp_path):
    log = tmp_path / "line.csv"
    log.write_text(HEAD + clocked(0, 1))
    with following(log) as live, log.open("a") as first:
        assert [live.answer()["row"] for _ in range(2)] == [1, 2]
        first.write(clocked(2)[:-4])
        first.flush()
        assert live.silent()
        first.write(clocked(2)[-4:])
        first.flush()
        assert live.answer()["value"] == "fill"
        log.rename(tmp_path / "line.csv.1")
        first.write(clocked(3))
        first.flush()
        assert live.answer()["row"] == 4  # no other file has the name yet
        (tmp_path / "new").write_text(HEAD + clocked(4))
        (tmp_path / "new").rename(log)
        assert live.answer()["row"] == 5
        log.write_text(clocked(5))  # shorter, in place
        assert live.answer()["row"] == 6
        assert live.stop() == (143, "seqmix: stopped by SIGTERM\n")
        assert live.silent(0)


def test_a_reader_that_goes_away_ends_it_quietly():
    with following() as live:
        live.write(HEAD + clocked(0))
        live.answer()
    child = process("follow", *QUICK)
    assert child.stdin is not None and child.stdout is not None and child.stderr is not None
    child.stdout.close()
    child.stdin.write((HEAD + clocked(*range(20))).encode())
    child.stdin.close()
    assert child.wait(PATIENCE) == 141
    assert child.stderr.read() == b""
    child.stderr.close()


# ---- signals and restarts


@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_a_signal_saves_and_ends_it_within_a_second(run, tmp_path, number, code):
    state = tmp_path / "state"
    with following("--state", state) as live:
        live.write(HEAD + clocked(0, 1, 2))
        assert [live.answer()["row"] for _ in range(3)] == [1, 2, 3]
        start = time.monotonic()
        assert live.stop(number) == (code, f"seqmix: stopped by {number.name}\n")
        assert time.monotonic() - start < 2.0  # a tenth of that where the machine is free
    assert json.loads(run("learn", os.devnull, "--into", state, "--format", "jsonl").out)["rows"] == 3
    assert not (tmp_path / ".state.lock").exists()


def test_a_signal_ends_it_while_nobody_takes_the_answers(tmp_path):
    log = tmp_path / "states.txt"
    log.write_text("fill\ncap\n" * 3000)  # more answers than a pipe holds
    state = tmp_path / "state"
    child = process("follow", log, "--state", state, "--save-every", "1rows", *QUICK)
    saved(state, 1, more=True)
    time.sleep(1.0)
    start = time.monotonic()
    child.terminate()
    assert child.wait(PATIENCE) == 143
    assert time.monotonic() - start < 3.0
    _, err = child.communicate()
    assert err == b"seqmix: stopped by SIGTERM\n"


def test_a_signal_leaves_the_numbers_that_wait():
    child = process("follow", "--steps", "3")
    assert child.stdin is not None and child.stdout is not None
    child.stdin.write("".join(f"{4 + t % 7 / 10}\n" for t in range(64)).encode())
    child.stdin.flush()
    first = child.stdout.readline()
    child.terminate()
    out, err = child.communicate(timeout=PATIENCE)
    assert (child.returncode, err) == (143, b"seqmix: stopped by SIGTERM\n")
    assert first.endswith(b"}\n")
    assert out == b"" or out.endswith(b"}\n")
    assert out.count(b"\n") < 60


def test_it_goes_on_where_it_stopped(run, tmp_path):
    state, log = tmp_path / "state", tmp_path / "line.csv"
    log.write_text(HEAD + clocked(*range(12)))
    whole = run("follow", *QUICK, stdin=log).out.splitlines()
    first = run("follow", *QUICK, "--state", state, stdin=(HEAD + clocked(*range(7))).encode())
    assert (first.code, first.err) == (0, "")
    rest = run("follow", *QUICK, "--state", state, stdin=log)
    said = (
        f"seqmix: {state}: going on after row 7, 2026-01-05T06:06\n"
        "seqmix: rows known before, left out: 7\n"
    )  # fmt: skip
    assert (rest.code, rest.err) == (0, said)
    assert first.out.splitlines() + rest.out.splitlines() == whole
    again = run("follow", *QUICK, "--state", state, "--quiet", stdin=log)
    assert (again.code, again.out) == (0, "")


def test_killed_and_started_again(tmp_path):
    state, log = tmp_path / "state", tmp_path / "line.csv"
    log.write_text(HEAD + clocked(0, 1, 2))
    with following(log, "--state", state, "--save-every", "1rows") as live:
        assert [live.answer()["row"] for _ in range(3)] == [1, 2, 3]
        saved(state, 3)
        live.child.send_signal(signal.SIGKILL)
        assert live.child.wait(PATIENCE) == -signal.SIGKILL
    with log.open("a") as more:
        more.write(clocked(3, 4))
    with following(log, "--state", state) as live:
        assert [live.answer()["row"] for _ in range(2)] == [4, 5]
        code, said = live.stop()
    assert (code, said.splitlines()) == (
        143,
        [
            f"seqmix: {state}: going on after row 3, 2026-01-05T06:02",
            "seqmix: rows known before, left out: 3",
            "seqmix: stopped by SIGTERM",
        ],
    )


def saved(state: Path, rows: int, more: bool = False) -> None:
    """Waits until the state holds so many rows, or more."""
    from seqmix.learned import load

    deadline = time.monotonic() + PATIENCE
    while not state.exists() or (load(state).rows < rows if more else load(state).rows != rows):
        assert time.monotonic() < deadline, "not saved"
        time.sleep(0.02)


def test_a_file_without_times_is_followed_from_its_end(tmp_path, run):
    state, log = tmp_path / "state", tmp_path / "states.txt"
    log.write_text("fill\ncap\n" * 5)
    run("learn", log, "--into", state, *QUICK, "--quiet")
    with following(log, "--state", state) as live:
        deadline = time.monotonic() + PATIENCE
        while live.silent(0.3):  # until it is there, what comes belongs to what it leaves out
            assert time.monotonic() < deadline
            with log.open("a") as more:
                more.write("jam\n")
        answer = live.answer()
        assert (answer["row"], answer["value"]) == (11, "jam")
        assert live.stop() == (143, f"seqmix: {state}: going on after row 10\nseqmix: stopped by SIGTERM\n")


def test_saved_now_and_then(tmp_path):
    state = tmp_path / "state"
    with following("--state", state, "--save-every", "3rows") as live:
        live.write(HEAD)
        for minute in range(4):
            live.write(clocked(minute))
            live.answer()
            if minute == 1:
                assert live.silent()
                assert not state.exists()
        saved(state, 3)
        assert live.close() == (0, "")
    saved(state, 4)
    with following("--state", state, "--save-every", "1s") as live:
        live.write(clocked(4))
        live.answer()
        saved(state, 5)  # while no more rows come


def test_a_second_writer_is_told(tmp_path):
    state = tmp_path / "state"
    with following("--state", state) as live:
        live.write(HEAD + clocked(0))
        live.answer()
        other = process("follow", "--state", state)
        out, err = other.communicate(b"", timeout=PATIENCE)
    said = f"seqmix: {state}: another seqmix is learning into it; wait until it ends\n"
    assert (other.returncode, out, err.decode()) == (1, b"", said)


def test_a_closed_stdout_is_one_line():
    child = process("-c", 'exec "$@" >&-', "sh", *SEQMIX, command=["sh"])
    out, err = child.communicate((HEAD + clocked(0)).encode(), timeout=PATIENCE)
    assert (child.returncode, out, err) == (74, b"", b"seqmix: cannot write stdout: it is closed\n")
