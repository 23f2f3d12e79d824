"""Invents two logs of a small dairy in which something goes wrong.

    python make_faults.py faults.csv             the ten days of the milk tank after tank.csv: time,celsius
    python make_faults.py --recipe recipe.csv    a morning of the bottling line with another recipe: time,state

What is in the first, for somebody who watches to find:

- From Tuesday, 13:00 on, the probe is stuck for five hours: the same reading, row after row.
- On Thursday the cooling valve fails: from 21:00 on it lets warm water in, so the milk warms slowly into the night,
  until the valve springs open at 02:00 with a rush of ice water.

And in the second: trays are filled, capped, labelled and packed; at 08:30 the line changes over to bigger bottles. They
take longer to fill and are labelled before they are capped.

Only the standard library, and of its random numbers only those that are the same in every version of Python.
"""

from __future__ import annotations

import argparse
from datetime import datetime, timedelta
from pathlib import Path

from make_line import HOUR, STEP, Line
from make_tank import EVERY, TANK_MINUTES, TANK_START, Tank

DAYS = 10
STUCK = (datetime(2026, 3, 24, 13), datetime(2026, 3, 24, 18))
FAILING = (datetime(2026, 3, 26, 21), datetime(2026, 3, 27, 2))
RUSH = timedelta(minutes=10)
WARMING, COOLING = 0.027, 0.12  # degrees a minute

SHIFT = datetime(2026, 3, 23, 6)
RECIPE_ROWS = 4 * HOUR
CHANGED = 5 * HOUR // 2  # row of 08:30


def faults(seed: int) -> str:
    """The log of the tank as CSV, from where tank.csv ends."""
    milk = Tank(seed)
    lines = ["time,celsius"]
    held = 0.0
    for minute in range(TANK_MINUTES + DAYS * 1440):
        now = TANK_START + timedelta(minutes=minute)
        if FAILING[0] <= now < FAILING[1]:
            milk.warmth += WARMING
        elif FAILING[1] <= now < FAILING[1] + RUSH:
            milk.warmth -= COOLING
        read = milk.step(now)
        if not STUCK[0] < now < STUCK[1]:
            held = read
        if minute >= TANK_MINUTES and minute % EVERY == 0:
            lines.append(f"{now:%Y-%m-%dT%H:%M:%S},{held:.1f}")
    return "\n".join(lines) + "\n"


class TwoRecipes(Line):
    """A line that changes over to bigger bottles."""

    def tray(self) -> None:
        if self.now < CHANGED:
            super().tray()
            return
        self.stay("fill", self.some(6, 8, 2))
        self.stay("label", self.some(2, 3, 3))
        self.stay("cap", self.some(3, 4, 2))
        self.stay("pack", self.some(2, 4, 2))


def recipe(seed: int) -> str:
    """The log of the line as CSV."""
    line = TwoRecipes(seed)
    while line.now < RECIPE_ROWS:
        line.tray()
    rows = (
        f"{SHIFT + timedelta(seconds=row * STEP):%Y-%m-%dT%H:%M:%S},{line.states[row]}" for row in range(RECIPE_ROWS)
    )
    return "\n".join(["time,state", *rows]) + "\n"


def main() -> None:
    parser = argparse.ArgumentParser(description="Invent the log of a failing tank, or of a line with two recipes.")
    parser.add_argument("--recipe", action="store_true", help="the line with two recipes, instead of the tank")
    parser.add_argument("--seed", type=int, default=7, help="another seed, another log (default: 7)")
    parser.add_argument("out", type=Path, metavar="OUT", help="file to write")
    asked = parser.parse_args()
    asked.out.write_bytes((recipe if asked.recipe else faults)(asked.seed).encode("ascii"))


if __name__ == "__main__":
    main()
