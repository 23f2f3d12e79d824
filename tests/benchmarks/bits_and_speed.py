"""A well-known text as bytes: bits a byte, and the time of the whole process against brotli at its highest level.

Run by hand: python tests/benchmarks/bits_and_speed.py [PAIRS]
"""

from __future__ import annotations

import bz2
import json
import sys
import time
from statistics import median

import brotli
from logs import DATA
from processes import SEQMIX, run, table

FILE = DATA / "alice29.txt"


def brotli_seconds(data: bytes) -> float:
    """Time of the call alone, with no process around it."""
    begun = time.perf_counter()
    brotli.compress(data, quality=11)
    return time.perf_counter() - begun


def measure(pairs: int) -> None:
    """Take turns, so that whatever else the machine does falls on both."""
    data = FILE.read_bytes()
    command = (*SEQMIX, "score", str(FILE), "--as", "bytes", "--last", "all", "--format", "jsonl", "--quiet")
    ours, theirs = [], []
    for _ in range(pairs):
        theirs.append(brotli_seconds(data))
        ours.append(run(*command))
    score = json.loads(ours[0].output)
    sizes = {"bzip2-9": len(bz2.compress(data, 9)), "brotli-11": len(brotli.compress(data, quality=11))}
    table(
        ["alice29.txt, 152,089 bytes", "bits a byte", "seconds", "seconds of all cores"],
        [
            ["seqmix, default models", f"{score['bits_per_row']:.4f}", f"{median(one.seconds for one in ours):.2f}",
             f"{median(one.work for one in ours):.2f}"],
            *([name, f"{8 * size / len(data):.4f}", f"{median(theirs):.3f}" if name == "brotli-11" else "", ""]
              for name, size in sizes.items()),
            *([f"model {model['name']}", f"{model['bits_per_row']:.4f}", "", ""] for model in score["models"]),
        ],
    )  # fmt: skip
    ratios = sorted(one.seconds / other for one, other in zip(ours, theirs, strict=True))
    print(f"\ntime against brotli-11: median {median(ratios):.1f}x of {pairs}, {ratios[0]:.1f}x to {ratios[-1]:.1f}x")
    print(f"regret {score['regret_bits']:.3f} bits, bound {score['bound_bits']:.3f} bits")


if __name__ == "__main__":
    measure(int(sys.argv[1]) if len(sys.argv) > 1 else 5)
