"""Shifts found in simulated logs: false ones in logs without any, and the delay in rows where there is one.

Run by hand: python tests/benchmarks/shifts.py
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from processes import table
from scipy.signal import lfilter

import seqmix
from seqmix.shifting import Shift

ROWS, SEEDS = 2000, 10
START, AFTER = 500, 500  # of a shift, and rows after it
LATER = np.arange(START + AFTER) >= START
Rng = np.random.Generator


def chain(rng: Rng, transitions: np.ndarray, rows: int) -> list[str]:
    limits, state, states = transitions.cumsum(axis=1), 0, []
    for chance in rng.random(rows):
        state = min(int((chance > limits[state]).sum()), len(transitions) - 1)
        states.append("abcdefgh"[state])
    return states


def transitions(rng: Rng) -> np.ndarray:
    return rng.dirichlet(np.full(5, 0.5), 5)


def season(rng: Rng, rows: int) -> np.ndarray:
    return np.tile(4 * rng.normal(size=7), rows)[:rows]


STEADY: dict[str, Callable[[Rng], object]] = {
    "normal": lambda rng: rng.normal(size=ROWS),
    "autoregression 0.9": lambda rng: lfilter([1], [1, -0.9], rng.normal(size=ROWS)),
    "autoregression 0.6": lambda rng: lfilter([1], [1, -0.6], rng.normal(size=ROWS)),
    "random walk": lambda rng: rng.normal(size=ROWS).cumsum(),
    "wandering level + noise": lambda rng: 0.1 * rng.normal(size=ROWS).cumsum() + rng.normal(size=ROWS),
    "week + noise (--period 7)": lambda rng: season(rng, ROWS) + rng.normal(size=ROWS),
    "heavy tails, t with 3": lambda rng: rng.standard_t(3, size=ROWS),
    "lognormal": lambda rng: np.exp(rng.normal(size=ROWS)),
    "counts, Poisson 3": lambda rng: rng.poisson(3, size=ROWS).astype(float),
    "states, order 1": lambda rng: chain(rng, transitions(rng), ROWS),
    "bytes, even": lambda rng: rng.integers(0, 256, ROWS).astype(np.uint8).tobytes(),
}

SHIFTING: dict[str, Callable[[Rng], object]] = {
    "level by 2 spreads": lambda rng: rng.normal(size=START + AFTER) + 2.0 * LATER,
    "level by 1 spread": lambda rng: rng.normal(size=START + AFTER) + 1.0 * LATER,
    "variance times 3": lambda rng: rng.normal(size=START + AFTER) * np.where(LATER, 3**0.5, 1),
    "variance times 1/3": lambda rng: rng.normal(size=START + AFTER) / np.where(LATER, 3**0.5, 1),
    "level by 2, on a week (--period 7)": lambda rng: (
        season(rng, START + AFTER) + rng.normal(size=START + AFTER) + 2.0 * LATER
    ),
    "a week appears (--period 7)": lambda rng: (
        season(rng, START + AFTER) * LATER + rng.normal(size=START + AFTER)
    ),
    "new odds of states, order 1": lambda rng: (
        chain(rng, transitions(rng), START) + chain(rng, transitions(rng), AFTER)
    ),
}  # fmt: skip


def found(name: str, log: object) -> list[Shift]:
    period = 7 if "--period 7" in name else None
    return list(
        seqmix.shifts(log, period=period, models=["memoryless"] if isinstance(log, list | bytes) else ["trend"]).shifts
    )


def measure() -> None:
    lines = []
    for name, make in STEADY.items():
        counts = [len(found(name, make(np.random.default_rng(seed)))) for seed in range(SEEDS)]
        lines.append([name, str(sum(counts)), f"{np.count_nonzero(counts)} of {SEEDS}"])
    table([f"no shift, {ROWS:,} rows", "false shifts", "logs with any"], lines)
    print()
    lines = []
    for name, make in SHIFTING.items():
        delays, off, false = [], [], 0
        for seed in range(SEEDS):
            shifts = found(name, make(np.random.default_rng(seed)))
            early = [shift for shift in shifts if shift.known_row <= START]
            late = [shift for shift in shifts if shift.known_row > START]
            false += len(early) + max(len(late) - 1, 0)
            if late:
                delays.append(late[0].known_row - START)
                off.append(abs(late[0].row - START - 1))
        median = [f"{np.median(part):.0f}" if part else "" for part in (delays, off)]
        lines.append(
            [name, f"{len(delays)} of {SEEDS}", median[0], str(max(delays, default="")), median[1], str(false)]
        )
    table(
        [f"a shift after {START} rows", "found", "rows until known, median", "largest", "start off by, rows, median",
         "other shifts"],
        lines,
    )  # fmt: skip


if __name__ == "__main__":
    measure()
