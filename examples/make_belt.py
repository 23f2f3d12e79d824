"""Invents the belt of a packing hall in a small dairy: one cup of yoghurt a row, by sort.

    python make_belt.py belt.txt

The robot fills mixed trays for shops from a packing list of 600 cups, and starts again at its end. What is in it, for
models to find:

- The list itself follows no rule: `plain`, `berry` and `nut` as the shops ordered them. It comes four times.
- Now and then a cup is thrown out before the sensor, or one turns back and is counted twice: the place in the list
  slips by one, and with three sorts many places look like the right one for a while.

Only the standard library, and of its random numbers only those that are the same in every version of Python.
"""

from __future__ import annotations

import argparse
from pathlib import Path
from random import Random

SORTS = ("plain", "berry", "nut")
LIST = 600  # cups
ROUNDS = 4
LOST = 0.02  # of the cups
TWICE = 0.02


def cups(seed: int) -> list[str]:
    """The sort of each cup."""
    chance = Random(seed).random
    ordered = [SORTS[int(3 * chance())] for _ in range(LIST)]
    rows: list[str] = []
    for sort in ordered * ROUNDS:
        luck = chance()
        rows += [] if luck < LOST else [sort, sort] if luck < LOST + TWICE else [sort]
    return rows


def main() -> None:
    parser = argparse.ArgumentParser(description="Invent the cups on a belt.")
    parser.add_argument("--seed", type=int, default=7, help="another seed, another list (default: 7)")
    parser.add_argument("out", type=Path, metavar="OUT", help="file to write")
    asked = parser.parse_args()
    asked.out.write_bytes("".join(f"{sort}\n" for sort in cups(asked.seed)).encode("ascii"))


if __name__ == "__main__":
    main()
