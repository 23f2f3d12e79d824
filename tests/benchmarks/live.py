"""Rows as they arrive: speed, delay and memory of `seqmix follow`, false alarms, and events of a real sensor.

Run by hand: python tests/benchmarks/live.py [speed] [delay] [memory] [alarms] [sensor], all but memory unless said.
"""

from __future__ import annotations

import argparse
import csv
import runpy
import subprocess
import threading
import time
from collections.abc import Callable
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
from logs import DATA, chain
from processes import SEQMIX, peak, table
from scipy.signal import lfilter

import seqmix

EXAMPLES = Path(__file__).parents[2] / "examples"
DAY = 8640  # rows of the line in a day


def of_line(rows: int) -> list[str]:
    """Rows of the bottling line, with times, and a head."""
    made = runpy.run_path(str(EXAMPLES / "make_line.py"))
    states, _ = made["simulate"](rows / DAY + 0.1, 7)
    return made["table"](states, 10, 7).splitlines(keepends=True)[: rows + 1]


def of_tank(rows: int) -> list[str]:
    """Rows of the milk tank, with times, and a head."""
    made = runpy.run_path(str(EXAMPLES / "make_tank.py"))
    made["tank"].__globals__["TANK_MINUTES"] = 10 * rows + 200
    return made["tank"](7).splitlines(keepends=True)[: rows + 1]


LOGS: dict[str, tuple[Callable[[int], list[str]], int]] = {
    "states, line": (of_line, 20_000),
    "numbers, tank": (of_tank, 3000),
}


def follow(*arguments: str) -> subprocess.Popen[bytes]:
    return subprocess.Popen([*SEQMIX, "follow", *arguments], stdin=subprocess.PIPE, stdout=subprocess.PIPE)


def fed(child: subprocess.Popen[bytes], text: bytes) -> threading.Thread:
    """Writes all of it, while others read."""

    def write() -> None:
        assert child.stdin is not None
        child.stdin.write(text)
        child.stdin.close()

    thread = threading.Thread(target=write)
    thread.start()
    return thread


def speed(share: float) -> None:
    lines = []
    for name, (make, rows) in LOGS.items():
        text = make(int(rows * share))
        child = follow()
        assert child.stdout is not None
        thread = fed(child, "".join(text).encode())
        child.stdout.readline()
        start, count = time.perf_counter(), 0
        for _ in child.stdout:
            count += 1
        seconds = time.perf_counter() - start
        thread.join()
        child.wait()
        lines.append([name, f"{count + 1:,}", f"{seconds:.1f}", f"{count / seconds:,.0f}"])
    table(["follow, pipe to pipe", "rows", "seconds after the first answer", "rows a second"], lines)


def delay(share: float) -> None:
    lines = []
    for name, (make, _) in LOGS.items():
        rows = int(1000 * share)
        text = make(rows)
        child = follow()
        assert child.stdin is not None and child.stdout is not None
        child.stdin.write("".join(text[:2]).encode())
        child.stdin.flush()
        child.stdout.readline()
        took = []
        for row in text[2:]:
            start = time.perf_counter()
            child.stdin.write(row.encode())
            child.stdin.flush()
            child.stdout.readline()
            took.append(1000 * (time.perf_counter() - start))
            time.sleep(0.002)
        child.stdin.close()
        child.wait()
        lines.append([name, f"{len(took):,}", *(f"{np.quantile(took, q):.2f}" for q in (0.5, 0.99, 1.0))])
    table(["from a row to its answer, ms", "rows", "median", "99 %", "worst"], lines)


def memory(sizes: list[int]) -> None:
    """Peak of a `learn`, and of a `follow` of as many rows through a pipe."""
    lines = []
    with TemporaryDirectory() as place:
        for rows in sizes:
            log, state = Path(place) / "line.csv", Path(place) / "line.state"
            log.write_text("".join(of_line(rows)), encoding="ascii")
            state.unlink(missing_ok=True)
            learned = peak(*SEQMIX, "learn", str(log), "--into", str(state), "--quiet")
            followed = peak(*SEQMIX, "follow", "--quiet", log=log)
            size = state.stat().st_size / 1e6
            lines.append(
                [f"{rows:,}", *(f"{one:.0f}" for one in learned), f"{size:.2f}", *(f"{one:.0f}" for one in followed)]
            )
    table(["rows of states", "learn, peak MB", "seconds", "state, MB", "follow, peak MB", "seconds"], lines)


def states_of(seed: int) -> list[str]:
    codes, _ = chain(8, 1, seed).draw(20_000, seed)
    return [f"s{code}" for code in codes.tolist()]


def autoregression(seed: int) -> list[float]:
    return np.round(lfilter([1], [1, -0.8], np.random.default_rng(seed).normal(size=2000)), 2).tolist()


def all_digits(seed: int) -> list[float]:
    return np.random.default_rng(seed).normal(size=2000).tolist()


def walk(seed: int) -> list[float]:
    return np.round(np.random.default_rng(seed).normal(size=2000).cumsum(), 1).tolist()


def counts(seed: int) -> list[float]:
    rng = np.random.default_rng(seed)
    return rng.poisson(np.tile(rng.gamma(2.0, 3.0, size=7), 286)[:2000]).astype(float).tolist()


def season(seed: int) -> list[float]:
    rng = np.random.default_rng(seed)
    return np.round(np.tile(4 * rng.normal(size=12), 200)[:2000] + rng.normal(size=2000), 1).tolist()


def alarms(share: float) -> None:
    lines = []
    makers: dict[str, tuple[Callable[[int], Any], int, dict[str, Any]]] = {
        "states, order 1": (states_of, 5, {}),
        "autoregression 0.8": (autoregression, 20, {}),
        "normal, written with all digits": (all_digits, 20, {}),
        "random walk": (walk, 20, {}),
        "season of 12 + noise": (season, 20, {"period": 12}),
        "counts, Poisson, a rate for each of 7": (counts, 20, {"period": 7}),
    }
    for name, (make, logs, options) in makers.items():
        surprising = rows = events = 0
        for seed in range(max(int(logs * share), 1)):
            values = make(seed)
            found = seqmix.surprise(values[: int(len(values) * min(share, 1.0))], false_alarms="1/1000rows", **options)
            surprising, rows, events = surprising + found.surprising, rows + found.rows, events + len(found.events)
        rate = 1000 * surprising / rows
        lines.append([name, f"{rows:,}", f"{rate:.2f}", f"{2000 * surprising**0.5 / rows:.2f}", f"{events}"])
    table(["asked: 1 a 1,000 rows; default models", "rows", "a 1,000 rows", "+- 2 sd", "events"], lines)


def sensor(share: float) -> None:
    with (DATA / "sensor_multihop_labelled.csv").open(encoding="utf-8", newline="") as file:
        every = list(csv.DictReader(file))
    lines = []
    for mote in ("1", "3"):
        rows = [row for row in every if row["mote_id"] == mote]
        rows = rows[: int(len(rows) * min(share, 1.0))]
        labelled = {at for at, row in enumerate(rows, 1) if row["label"] != "0"}
        first = min(labelled, default=len(rows) + 1)
        for column in ("humidity", "temperature"):
            found = seqmix.surprise([float(row[column]) for row in rows])
            inside = [event for event in found.events if event.start <= max(labelled, default=0) and event.end >= first]
            hit = sum(any(at in labelled for at in range(event.start, event.end + 1)) for event in found.events)
            before = sum(event.end < first for event in found.events)
            reached = f"{inside[0].start - first:+d}" if inside else "none"
            lines.append(
                [f"mote {mote}, {column}", f"{len(rows):,}", f"{first:,}", f"{len(labelled):,}", f"{len(inside)}",
                 f"{hit}", reached, f"{before}", f"{len(found.events) - len(inside) - before}"]
            )  # fmt: skip
    table(
        ["sensor, default rate", "rows", "first labelled", "labelled", "events from first to last labelled",
         "on labelled rows", "first event, rows later", "events before", "events after"],
        lines,
    )  # fmt: skip


TABLES = {"speed": speed, "delay": delay, "alarms": alarms, "sensor": sensor}


def main() -> None:
    parser = argparse.ArgumentParser(description="Speed, delay, memory, false alarms and a sensor.")
    parser.add_argument("tables", nargs="*", metavar="TABLE")
    parser.add_argument("--share", type=float, default=1.0, help="of the rows, for a quick look (default: 1)")
    parser.add_argument("--sizes", type=int, nargs="+", default=[100_000, 2_600_000], help="rows, for memory")
    asked = parser.parse_args()
    unknown = set(asked.tables) - {*TABLES, "memory"}
    if unknown:
        parser.error(f"no such table: {', '.join(sorted(unknown))}")
    for name in asked.tables or TABLES:
        if name == "memory":
            memory(asked.sizes)
        else:
            TABLES[name](asked.share)
        print()


if __name__ == "__main__":
    main()
