"""Invents the cleaning of the milk tank in a small dairy: a run a file, the state of its valves and pump a row.

    python make_runs.py --day 3 runs/day-3.txt
    python make_runs.py --day 9 runs/today.txt

Every five seconds the controller writes which valve is open and whether the pump runs: `water+pump`, `lye`, `drain`.
What is in it, for a comparison to find:

- Three programs: `rinse` after each emptying, short; `lye` every other day, with hot lye going round; `acid` once a
  week, against milk stone, with lye before and acid after it.
- Steps last about as long each time, not exactly; while something goes round, the pump pulses, and how it does so
  belongs to the program.
- The controller waits now and then, for a tank to fill or a hand to turn a key.
- Today (day 9) is a run of the lye program, in which the drain is slow.

Only the standard library, and of its random numbers only those that are the same in every version of Python.
"""

from __future__ import annotations

import argparse
from pathlib import Path
from random import Random

# What is open, how many rows, and how the pump goes meanwhile: rows on, rows off.
Step = tuple[str, int, tuple[int, int]]

RINSE: tuple[Step, ...] = (
    ("water", 24, (8, 1)), ("drain", 10, (1, 3)), ("water", 18, (8, 1)), ("drain", 12, (1, 3)),
)  # fmt: skip
LYE: tuple[Step, ...] = (
    ("water", 20, (6, 2)), ("drain", 8, (1, 2)), ("lye", 90, (5, 1)), ("return", 14, (2, 1)), ("drain", 6, (1, 2)),
    ("water", 30, (6, 2)), ("drain", 10, (1, 2)),
)  # fmt: skip
ACID: tuple[Step, ...] = (
    ("water", 16, (4, 4)), ("lye", 50, (3, 2)), ("return", 12, (1, 1)), ("water", 20, (4, 4)), ("drain", 8, (2, 2)),
    ("acid", 60, (7, 3)), ("return", 12, (1, 1)), ("water", 36, (4, 4)), ("drain", 10, (2, 2)),
)  # fmt: skip

DAYS = {1: RINSE, 2: LYE, 3: RINSE, 4: LYE, 5: ACID, 6: RINSE, 7: LYE, 8: ACID, 9: LYE}
TODAY = 9


def run(day: int, seed: int) -> list[str]:
    """The state of each row."""
    chance = Random(100 * seed + day).random
    rows: list[str] = []
    for what, length, (on, off) in DAYS[day]:
        if what == "drain" and day == TODAY:
            length *= 2
        if chance() < 0.3:
            rows += ["wait"] * int(2 + 12 * chance() ** 2)
        for row in range(round(length * (0.9 + 0.2 * chance()))):
            pumps = row % (on + off) < on
            if chance() < 0.02:  # a bubble
                pumps = not pumps
            rows.append(f"{what}+pump" if pumps else what)
    return [*rows, *["closed"] * 6]


def main() -> None:
    parser = argparse.ArgumentParser(description="Invent the cleaning of a milk tank.")
    parser.add_argument("--day", type=int, choices=sorted(DAYS), required=True, help=f"today is {TODAY}")
    parser.add_argument("--seed", type=int, default=7, help="another seed, another tank (default: 7)")
    parser.add_argument("out", type=Path, metavar="OUT", help="file to write")
    asked = parser.parse_args()
    asked.out.write_bytes("".join(f"{state}\n" for state in run(asked.day, asked.seed)).encode("ascii"))


if __name__ == "__main__":
    main()
