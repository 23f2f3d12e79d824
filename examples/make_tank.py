"""Invents two logs of numbers of a small dairy.

    python make_tank.py tank.csv               the chilled milk tank, every ten minutes for three weeks: time,celsius
    python make_tank.py --crates crates.csv    crates shipped a day, for a year and a half: date,crates

What is in the tank's, for a model to find:

- The compressor starts when the milk is too warm and stops when it is cold enough: a saw, of one to three hours.
- Warm milk comes in after each milking, at 05:30 and 16:30, with the lid open. The truck empties the tank on Monday,
  Wednesday and Friday at about 09:00; a nearly empty tank warms and cools faster.
- The room is warmer by day. One afternoon is hot, and the compressor cannot keep up.
- The probe drifts by half a degree in three weeks; the thermostat has another one.
- A few rows have no value (NA), and one night the logger was off for fifty minutes.

And in that of the crates: a week with a quiet Saturday and less on Sunday, slow growth, promotions of a week or so, and
days on which nothing is shipped.

Only the standard library, and of its random numbers only those that are the same in every version of Python.
"""

from __future__ import annotations

import argparse
from datetime import date, datetime, timedelta
from pathlib import Path
from random import Random

TANK_START = datetime(2026, 3, 2)  # a Monday
TANK_MINUTES = 20 * 1440 + 16 * 60 + 20  # up to the evening milking of the third Sunday
EVERY = 10  # minutes
LOGGER_OFF = (datetime(2026, 3, 11, 2, 20), datetime(2026, 3, 11, 3, 10))
HOT = (datetime(2026, 3, 18, 12), datetime(2026, 3, 18, 18))

CRATES_START = date(2024, 9, 23)  # a Monday
CRATES_DAYS = 545
WEEK = (1.0, 0.9, 0.95, 1.05, 1.3, 0.55, 0.2)  # from Monday on
CLOSED = ((1, 1), (5, 1), (12, 25), (12, 26))  # month and day


def even(chance: Random) -> float:
    """Noise of mean 0 and variance 1, nearly normal."""
    return sum(chance.random() for _ in range(12)) - 6.0


class Tank:
    """The milk, minute by minute."""

    def __init__(self, seed: int) -> None:
        self.chance = Random(seed)
        self.warmth = 3.6  # degrees
        self.litres = 900.0
        self.cooling = False
        self.open = self.pouring = 0  # minutes left

    def step(self, now: datetime) -> float:
        """What the probe reads, after one more minute."""
        minute = now.hour * 60 + now.minute
        if minute in (5 * 60 + 30, 16 * 60 + 30):
            self.pouring = 25 + int(10 * self.chance.random())
            self.open = self.pouring + int(8 * self.chance.random())
        if minute == 9 * 60 and now.weekday() in (0, 2, 4):
            self.litres = 150.0
            self.open = 10 + int(10 * self.chance.random())
        from_two = abs(minute - 14 * 60) / 720  # 0 at two in the afternoon, 1 at two in the morning
        room = 15.0 - 5.0 * from_two + (12.0 if HOT[0] <= now < HOT[1] else 0.0)
        hold = 0.2 + self.litres / 1000.0  # the tank itself counts for 200 litres
        if self.pouring:
            self.pouring -= 1
            self.warmth += 9.0 * (12.0 - self.warmth) / (1000.0 * hold)  # through a plate cooler, 9 litres a minute
            self.litres += 9.0
        leak = 0.0014 if self.open else 0.0009
        self.open = max(self.open - 1, 0)
        self.cooling = self.warmth > 4.2 or (self.cooling and self.warmth > 3.2)
        power = 0.0245 - 0.0007 * max(room - 18.0, 0.0)
        self.warmth += (leak * (room - self.warmth) - (power if self.cooling else 0.0)) / hold
        days = (now - TANK_START) / timedelta(days=1)
        return self.warmth + 0.025 * days + 0.04 * even(self.chance)


def tank(seed: int) -> str:
    """The log of the tank as CSV."""
    milk, chance = Tank(seed), Random(seed + 1)
    lines = ["time,celsius"]
    for minute in range(TANK_MINUTES):
        now = TANK_START + timedelta(minutes=minute)
        read = milk.step(now)
        if minute % EVERY == 0 and not LOGGER_OFF[0] <= now < LOGGER_OFF[1]:
            lines.append(f"{now:%Y-%m-%dT%H:%M:%S},{'NA' if chance.random() < 0.004 else f'{read:.1f}'}")
    return "\n".join(lines) + "\n"


def crates(seed: int) -> str:
    """The log of the crates as CSV."""
    chance = Random(seed)
    lines = ["date,crates"]
    promotion, pause = 0, 30  # days left
    for day in range(CRATES_DAYS):
        now = CRATES_START + timedelta(days=day)
        if promotion:
            promotion -= 1
        elif pause:
            pause -= 1
        else:
            promotion, pause = 5 + int(5 * chance.random()), 30 + int(30 * chance.random())
        wanted = (160.0 + 0.08 * day) * WEEK[now.weekday()] * (1.3 if promotion else 1.0)
        shipped = max(round(wanted * (1.0 + 0.06 * even(chance))), 0)
        lines.append(f"{now},{0 if (now.month, now.day) in CLOSED else shipped}")
    return "\n".join(lines) + "\n"


def main() -> None:
    parser = argparse.ArgumentParser(description="Invent the log of a milk tank, or of the crates shipped.")
    parser.add_argument("--crates", action="store_true", help="crates shipped a day, instead of the tank")
    parser.add_argument("--seed", type=int, default=7, help="another seed, another log (default: 7)")
    parser.add_argument("out", type=Path, metavar="OUT", help="file to write")
    asked = parser.parse_args()
    asked.out.write_bytes((crates if asked.crates else tank)(asked.seed).encode("ascii"))


if __name__ == "__main__":
    main()
