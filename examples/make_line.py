"""Invents the log of a bottling line in a small dairy.

    python make_line.py line.csv                   three weeks, a row every 10 seconds: time,state
    python make_line.py --every 60 weeks.csv.gz    the same weeks, looked at once a minute
    python make_line.py --codes alarms.txt         the codes of the same weeks, one a line

What is in it, for a model to find:

- Bottles go through fill, cap, label and pack, a tray at a time; each state lasts some rows, and a tray sometimes
  waits for the next one (idle).
- A jam at the capper or the labeller is followed by stop (somebody clears it) and restart, and more jams are likely
  right after one. Jams get more frequent over the weeks, until a new belt in the third one.
- Two shifts from Monday to Friday, 06:00 to 22:00: warm, work, lunch (idle) from 12:00, a change of shifts (idle) at
  14:00, off at night and over the weekend.
- After six hours of work, and at the end of a day, a wash: rinse, wash, acid, rinse, each of fixed length.
- A change of product (change) every few hours.
- A few rows have no value (NA), and on the first morning the logger was off for seven minutes.

Only the standard library, and of its random numbers only those that are the same in every version of Python.
"""

from __future__ import annotations

import argparse
import gzip
import io
from datetime import datetime, timedelta
from pathlib import Path
from random import Random

STEP = 10  # seconds a row
START = datetime(2026, 3, 2, 5, 30)  # a Monday
MINUTE = 60 // STEP  # rows
HOUR = 60 * MINUTE
DAY = 24 * HOUR

WASH = (("rinse", 5), ("wash", 12), ("rinse", 4), ("acid", 8), ("rinse", 6))  # minutes
NEW_BELT = 16  # the day it is put in
LOGGER_OFF = (datetime(2026, 3, 2, 11, 3), datetime(2026, 3, 2, 11, 10))


class Line:
    """The line while it runs: the state of every row so far, and the codes with the row they came at."""

    def __init__(self, seed: int) -> None:
        self.chance = Random(seed).random
        self.states: list[str] = []
        self.codes: list[tuple[int, str]] = []
        self.worked = 0  # rows since the last wash
        self.unsteady = 0  # trays after a jam in which the next one is likely
        self.roll = 0  # trays left on the roll of labels
        self.next_change = 2 * HOUR

    @property
    def now(self) -> int:
        return len(self.states)

    @property
    def day(self) -> int:
        return (self.now + 11 * HOUR // 2) // DAY  # the log starts at 05:30

    @property
    def of_day(self) -> int:
        """Rows since midnight."""
        return (self.now + 11 * HOUR // 2) % DAY

    def stay(self, state: str, rows: int) -> None:
        self.states += [state] * rows

    def until(self, state: str, of_day: int) -> None:
        self.stay(state, max(of_day - self.of_day, 0))

    def code(self, text: str) -> None:
        self.codes.append((self.now, text))

    def some(self, least: int, most: int, skew: int = 1) -> int:
        """Between least and most rows, the more often near `least` the larger `skew` is."""
        return least + int((most + 1 - least) * self.chance() ** skew)

    def work_until(self, of_day: int) -> None:
        while self.of_day < of_day:
            if self.worked > 6 * HOUR:
                self.wash()
            elif self.now > self.next_change:
                self.code("C60")
                self.stay("change", self.some(6 * MINUTE, 20 * MINUTE, 2))
                self.next_change = self.now + self.some(2 * HOUR, 4 * HOUR)
            else:
                self.tray()

    def tray(self) -> None:
        begun = self.now
        self.stay("fill", self.some(3, 4, 3))
        jams = 0.008 + 0.0012 * (self.day if self.day < NEW_BELT else 0)
        if self.unsteady:
            self.unsteady -= 1
            jams += 0.09
        self.stay("cap", self.some(2, 3, 4))
        if self.chance() < 0.4 * jams:
            self.jam("J31")
        if self.roll == 0:
            self.code("L80")
            self.roll = self.some(300, 340)
        self.roll -= 1
        self.stay("label", self.some(2, 3, 3))
        if self.chance() < (0.6 if self.roll > 5 else 4.0) * jams:
            self.jam("J32")
        self.stay("pack", self.some(2, 4, 2))
        if self.chance() < 0.06:  # no empty crates
            self.stay("idle", self.some(1, 24, 3))
        self.worked += self.now - begun

    def jam(self, code: str) -> None:
        self.code(code)
        self.stay("jam", self.some(1, 3, 2))
        self.code("S40")  # guard open
        self.stay("stop", self.some(4, 60, 3))
        self.code("S41")  # guard closed
        if self.day > NEW_BELT and self.chance() < 0.4:
            self.code("B77")  # the new belt has a sensor of its own
        while True:
            self.code("R50")
            self.stay("restart", 2)
            if self.chance() > 0.1:
                break
            self.code("R51")  # it did not start
            self.stay("stop", self.some(2, 9))
        self.unsteady = 4

    def wash(self) -> None:
        self.code("W20")
        for state, minutes in WASH:
            self.stay(state, minutes * MINUTE)
            if self.chance() < 0.01:
                self.code("T71")  # the water was not hot enough
        self.code("W21")
        self.worked = 0

    def live_a_day(self) -> None:
        """From wherever the day stands to midnight."""
        if self.day % 7 < 5:
            self.until("off", 6 * HOUR + self.some(-3, 3) * MINUTE)
            self.code("P10")
            self.stay("warm", self.some(9 * MINUTE, 12 * MINUTE))
            self.next_change = self.now + self.some(2 * HOUR, 4 * HOUR)
            self.work_until(12 * HOUR)
            self.until("idle", 12 * HOUR + 30 * MINUTE + self.some(-2, 4) * MINUTE)
            self.work_until(14 * HOUR - 5 * MINUTE)
            self.until("idle", 14 * HOUR + self.some(4, 10) * MINUTE)
            self.work_until(21 * HOUR)
            self.wash()
            self.until("idle", 22 * HOUR - 10 * MINUTE)
            self.code("P11")
        self.until("off", DAY)


def simulate(days: float, seed: int) -> tuple[list[str], list[str]]:
    """The state of each row, and the codes, of so many days from Monday 05:30 on."""
    line = Line(seed)
    rows = round(days * DAY)
    while line.now < rows:
        line.live_a_day()
    return line.states[:rows], [code for row, code in line.codes if row < rows]


def table(states: list[str], every: int, seed: int) -> str:
    """The log as CSV, a row every so many seconds, with rows missing here and there."""
    chance = Random(seed + 1).random
    out = io.StringIO()
    out.write("time,state\n")
    lost = 0
    for row, state in enumerate(states):
        lost = lost - 1 if lost else int(1 + 4 * chance()) if chance() < 0.001 else 0
        time = START + timedelta(seconds=row * STEP)
        if row * STEP % every == 0 and not LOGGER_OFF[0] <= time < LOGGER_OFF[1]:
            out.write(f"{time:%Y-%m-%dT%H:%M:%S},{'NA' if lost else state}\n")
    return out.getvalue()


def main() -> None:
    parser = argparse.ArgumentParser(description="Invent the log of a bottling line.")
    parser.add_argument("--days", type=float, default=21, help="from Monday 05:30 on (default: 21)")
    parser.add_argument("--every", type=int, default=STEP, help="seconds a row, a multiple of 10 (default: 10)")
    parser.add_argument("--codes", action="store_true", help="write the alarm codes, one a line, instead of states")
    parser.add_argument("--seed", type=int, default=7, help="another seed, another line (default: 7)")
    parser.add_argument("out", type=Path, metavar="OUT", help="file to write; compressed if it ends in .gz")
    asked = parser.parse_args()
    states, codes = simulate(asked.days, asked.seed)
    text = "".join(f"{code}\n" for code in codes) if asked.codes else table(states, asked.every, asked.seed)
    data = text.encode("ascii")
    asked.out.write_bytes(gzip.compress(data, mtime=0) if asked.out.suffix == ".gz" else data)


if __name__ == "__main__":
    main()
