"""Sequences that follow a rule: the mass that the law of the next row gives to the value that comes.

Run by hand: python tests/benchmarks/sequences.py
"""

from __future__ import annotations

from processes import table

import seqmix

SEQUENCES = {
    "squares": ([1, 4, 9, 16, 25, 36], 49),
    "sums of two": ([1, 1, 2, 3, 5, 8, 13], 21),
    "doubling": ([2, 4, 8, 16, 32], 64),
    "halves": ([0.5, 1.0, 1.5, 2.0, 2.5, 3.0], 3.5),
    "cycle of three": ([3, 1, 4, 3, 1, 4, 3, 1, 4], 3),
    "cubes": ([1, 8, 27, 64, 125, 216, 343], 512),
}


def measure() -> None:
    lines = []
    for name, (values, came) in SEQUENCES.items():
        forecast = seqmix.forecast(values, steps=1)
        mass = 2 ** -forecast.laws[0].bits(float(came), forecast.resolution)
        model, weight = next(iter(forecast.weights.items()))
        lines.append([
            name, ", ".join(map(str, values)), f"{came}", f"{mass:.4f}", f"{forecast.median[0]:g}",
            f"{model} {weight:.3f}",
        ])  # fmt: skip
    table(["rule", "rows", "next", "mass of it", "median", "heaviest model"], lines)


if __name__ == "__main__":
    measure()
