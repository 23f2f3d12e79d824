"""What only a process of its own can show: pipes, devices, signals, terminals, bare environments."""

from __future__ import annotations

import os
import pty
import signal
import subprocess
import sys
import threading

import pytest
from running import BARE, COMMAND, process

ROWS = b"fill\ncap\nlabel\n" * 20_000
PER_ROW = ["score", "--last", "all", "--per-row", "--models", "memoryless"]


def finish(child: subprocess.Popen[bytes], stdin: bytes | None = None) -> tuple[int, str, str]:
    out, err = child.communicate(stdin, timeout=60)
    return child.returncode, (out or b"").decode(), (err or b"").decode()


@pytest.mark.parametrize("arguments", [["--help"], PER_ROW])
def test_a_reader_that_goes_away_ends_it_quietly(arguments, tmp_path):
    log = tmp_path / "log.txt"
    log.write_bytes(ROWS)
    reader, writer = os.pipe()
    with log.open("rb") as rows:
        child = process(*arguments, stdin=rows, stdout=writer)
    os.close(writer)
    if arguments != ["--help"]:
        os.read(reader, 100)
    os.close(reader)
    assert finish(child) == (141, "", "")


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], ["completion", "bash"], ["models"]])
def test_a_full_disk_is_one_line(arguments):
    with open("/dev/full", "wb") as full:
        ended = finish(process(*arguments, stdout=full))
    assert ended == (74, "", "seqmix: cannot write stdout: No space left on device\n")


def test_a_full_disk_for_output(line):
    said = "seqmix: cannot write /dev/full: No space left on device\n"
    assert finish(process("describe", line, "-o", "/dev/full")) == (74, "", said)


def test_a_closed_stdout_is_one_line():
    command = ["sh", "-c", 'exec "$@" >&-', "sh", *COMMAND]
    said = "seqmix: cannot write stdout: it is closed\n"
    assert finish(process("models", command=command)) == (74, "", said)


def test_a_fifo_and_stdin_by_name_give_what_the_file_gives(line, tmp_path):
    expected = finish(process("forecast", "--quiet", line))
    assert expected[0] == 0
    fifo = tmp_path / "fifo"
    os.mkfifo(fifo)
    feeder = threading.Thread(target=lambda: fifo.write_bytes(line.read_bytes()))
    feeder.start()
    assert finish(process("forecast", "--quiet", fifo)) == expected
    feeder.join()
    assert finish(process("forecast", "--quiet", "/dev/stdin"), line.read_bytes()) == expected


@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_a_signal_ends_it_with_one_line_and_leaves_nothing(tmp_path, number, code):
    answer = tmp_path / "answer.csv"
    answer.write_text("old")
    child = process(*PER_ROW, "-o", answer)
    feed, child.stdin = child.stdin, None  # stays open: the log has no end
    assert feed is not None
    feed.write(ROWS)  # more than a pipe holds: once it is written, rows are being read
    feed.flush()
    child.send_signal(number)
    assert finish(child) == (code, "", f"seqmix: stopped by {number.name}\n")
    assert os.listdir(tmp_path) == ["answer.csv"]
    assert answer.read_text() == "old"


def test_a_bare_environment_and_a_directory_that_cannot_be_written(line, tmp_path):
    place = tmp_path / "locked"
    place.mkdir()
    place.chmod(0o555)
    line.write_text(line.read_text().replace("jam", "Spülen 洗浄"), encoding="utf-8")
    bare = {**BARE, "LANG": "C", "PYTHONIOENCODING": "ascii"}
    code, out, err = finish(process("forecast", "--quiet", line, cwd=place, env=bare))
    assert (code, err) == (0, "")
    assert "Spülen 洗浄" in out
    assert (code, out, err) == finish(process("forecast", "--quiet", line))


@pytest.mark.parametrize("environment", [{"TERM": "xterm"}, {"TERM": "xterm", "NO_COLOR": "1"}])
def test_on_a_terminal(line, environment):
    leader, follower = pty.openpty()
    settings = {**BARE, **environment}
    child = process("forecast", "--quiet", line, stdout=follower, stderr=follower, env=settings)
    code, _, _ = finish(child)
    os.close(follower)
    shown = os.read(leader, 100_000).decode()
    os.close(leader)
    assert code == 0
    heading = "step  time                 most likely"
    assert shown.startswith(heading if "NO_COLOR" in environment else f"\x1b[2m{heading}")


def test_module_and_entry_point_are_one_program(line):
    code = "import sys; from seqmix.cli.run import main; sys.exit(main())"
    outside = process("describe", line, command=[sys.executable, "-c", code])
    assert finish(outside) == finish(process("describe", line))
