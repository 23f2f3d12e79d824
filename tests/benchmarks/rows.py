"""Many rows of few states: rows a second, memory, and how time grows with the log.

Run by hand: python tests/benchmarks/rows.py [ROUNDS]
"""

from __future__ import annotations

import json
import sys
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory

from logs import chain, write_lines
from processes import SEQMIX, Run, run, table

SIZES = (100_000, 1_000_000)


def measure(rounds: int) -> None:
    source = chain(states=8, order=2, seed=31, evenness=1.0)
    with TemporaryDirectory() as folder:
        files = {rows: Path(folder) / f"{rows}.txt" for rows in SIZES}
        for rows, file in files.items():
            codes, contexts = source.draw(rows, seed=32)
            write_lines(file, codes[source.order :])
        own = source.bits(codes, contexts) / rows
        del codes, contexts
        runs: dict[int, list[Run]] = {rows: [] for rows in SIZES}
        for _ in range(rounds):
            for rows, file in files.items():
                runs[rows].append(run(*SEQMIX, "score", str(file), "--last", "all", "--format", "jsonl", "--quiet"))
    lines = []
    for rows, some in runs.items():
        seconds = median(one.seconds for one in some)
        score = json.loads(some[0].output)
        lines.append([
            f"{rows:,}", f"{seconds:.2f}", f"{median(one.work for one in some):.2f}", f"{rows / seconds:,.0f}",
            f"{max(one.peak for one in some):.0f}", f"{score['bits_per_row']:.4f}",
        ])  # fmt: skip
    table(["rows", "seconds", "seconds of all cores", "rows a second", "peak MB", "bits a row"], lines)
    small, large = (median(one.seconds for one in runs[rows]) for rows in SIZES)
    print(f"\ngrowth of time for ten times the rows: {large / small:.1f}x")
    print(f"who knows the source loses {own:.4f} bits a row on the longer log")


if __name__ == "__main__":
    measure(int(sys.argv[1]) if len(sys.argv) > 1 else 3)
