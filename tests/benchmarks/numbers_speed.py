"""Logs of numbers as whole processes: many rows, a short question, and the births of twenty years.

Run by hand: python tests/benchmarks/numbers_speed.py [ROUNDS]
"""

from __future__ import annotations

import csv
import json
import sys
from datetime import date
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory

import numpy as np
from logs import DATA
from processes import SEQMIX, run, table

HOURS = 100_000


def hourly(path: Path, rows: int) -> None:
    """A load every hour, with a day and a week in it and noise that remembers."""
    rng = np.random.default_rng(5)
    t = np.arange(rows)
    noise = np.convolve(rng.normal(size=rows + 50), 0.9 ** np.arange(50))[:rows] + rng.normal(size=rows)
    load = 50 + 10 * np.sin(2 * np.pi * t / 24) + 6 * ((t // 24) % 7 < 5) + noise
    times = np.datetime64("2015-01-01T00", "s") + t * np.timedelta64(3600, "s")
    lines = (f"{time},{value:.1f}\n" for time, value in zip(times.astype(str).tolist(), load.tolist(), strict=True))
    path.write_text("time,load\n" + "".join(lines), encoding="ascii")


def births(path: Path) -> None:
    """Births a day, with the date in one column."""
    lines = []
    with (DATA / "us_births_1969_1988.csv").open(encoding="utf-8", newline="") as file:
        for row in csv.DictReader(file):
            day = date(int(row["year"]), int(row["month"]), int(row["date_of_month"]))
            lines.append(f"{day},{row['births']}\n")
    path.write_text("date,births\n" + "".join(lines), encoding="ascii")


def scored(log: Path, rounds: int) -> None:
    command = (*SEQMIX, "score", str(log), "--last", "20%", "--format", "jsonl", "--quiet")
    runs = [run(*command) for _ in range(rounds)]
    score = json.loads(runs[0].output)
    lines = [
        ["seconds", f"{median(one.seconds for one in runs):.2f}"],
        ["seconds of all cores", f"{median(one.work for one in runs):.2f}"],
        ["peak MB", f"{max(one.peak for one in runs):.0f}"],
        ["bits a row", f"{score['bits_per_row']:.4f}"],
        ["MAE, CRPS", f"{score['mae']:.4g}, {score['crps']:.4g}"],
        ["inside 50, 80, 90 %", ", ".join(f"{100 * share:.1f} %" for share in score["coverage"].values())],
        *([f"model {model['name']}", f"{model['bits_per_row']:.4f}"] for model in score["models"]),
        *([f"baseline {line['name']}", f"{line['bits_per_row']:.4f}"] for line in score["baselines"]),
    ]
    table([f"score {log.name} --last 20%, {score['rows']:,} rows scored", ""], lines)
    print()


def short_question(log: Path, rounds: int) -> None:
    """In turns, so that whatever else the machine does falls on all of them."""
    commands = {
        'python -c "import numpy, click"': (sys.executable, "-c", "import numpy, click"),
        "seqmix forecast, 1,000 rows, 24 steps": (*SEQMIX, "forecast", str(log), "--steps", "24", "--quiet"),
    }
    seconds: dict[str, list[float]] = {name: [] for name in commands}
    for _ in range(rounds):
        for name, command in commands.items():
            seconds[name].append(run(*command).seconds)
    base = seconds['python -c "import numpy, click"']
    lines = []
    for name, some in seconds.items():
        ratios = [one / other for one, other in zip(some, base, strict=True)]
        lines.append([name, f"{median(some):.3f}", f"{min(some):.3f}", f"{median(ratios):.2f}x"])
    table(["whole process", "median seconds", "least", "against numpy and click, median of rounds"], lines)


def measure(rounds: int) -> None:
    with TemporaryDirectory() as folder:
        logs = {name: Path(folder) / f"{name}.csv" for name in ("hourly", "births", "short")}
        hourly(logs["hourly"], HOURS)
        hourly(logs["short"], 1000)
        births(logs["births"])
        scored(logs["hourly"], 1)
        scored(logs["births"], 1)
        short_question(logs["short"], rounds)


if __name__ == "__main__":
    measure(int(sys.argv[1]) if len(sys.argv) > 1 else 15)
