"""Compressors as models: what each is worth alone, with and without them on every log, and the time they take.

Run by hand: python tests/benchmarks/compressors.py [ROUNDS]
"""

from __future__ import annotations

import json
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory

import numpy as np
from logs import DATA, by_appearance, chain, noisy_repeats, real_logs, write_lines
from processes import SEQMIX, Run, run, table

import seqmix
from seqmix.models import registry
from seqmix.models.compressed import Compressed

EXAMPLES = Path(__file__).parents[2] / "examples"


def alone() -> None:
    """Every compressor model by itself, always awake, on noisy repeats, beside the other models."""
    codes = noisy_repeats(seed=1)
    half = len(codes) // 2
    lines = []
    for model in registry.MODELS:
        if model.needs_times:
            continue
        one = model()
        begun = time.perf_counter()
        bits = one.absorb(seqmix.series.Rows(codes, None, 0))
        a_row = (time.perf_counter() - begun) / len(codes) * 1e6
        line = [model.name, f"{bits[half:].mean():.4f}", f"{a_row:.1f}", "", "", ""]
        if isinstance(one, Compressed):
            reader = one.reader
            line[3:] = [
                f"{reader.calls / len(codes):.1f}",
                str(6 * len(reader.windows)),
                f"{one_shot(one.compressor, codes):.1f}",
            ]
        lines.append(line)
    head = ["model", "bits a row, last half", "microseconds a row", "candidates compressed a row",
            "states x windows", "microseconds, one shot of 4,096 rows"]  # fmt: skip
    table(head, lines)


def one_shot(compressor: type, codes: np.ndarray) -> float:
    """Microseconds that the compressor takes for the window as a whole."""
    window = codes[-4096:].astype(np.uint8).tobytes()
    times = []
    for _ in range(20):
        begun = time.perf_counter()
        compressor().code_length(b"", [window])
        times.append(time.perf_counter() - begun)
    return median(times) * 1e6


def logs() -> Iterator[tuple[str, seqmix.Series]]:
    yield from real_logs()
    states = {
        "noisy repeats": noisy_repeats(seed=1),
        "chain, 4 states, order 2": by_appearance(chain(4, 2, seed=81).draw(20_000, 82)[0]),
        "one long program, three times": long_program(),
    }
    for name, codes in states.items():
        yield name, seqmix.Series.of([f"s{code}" for code in codes.tolist()])
    yield "packing list that slips", seqmix.read(EXAMPLES / "belt.txt")
    text = (DATA / "alice29.txt").read_bytes()
    yield "alice29, 600 bytes", seqmix.Series.of(text[1000:1600], kind="bytes")
    yield "births", seqmix.read(DATA / "us_births_1969_1988.csv", column="births")
    yield "weather, temperature", seqmix.read(DATA / "weather_jfk_2013.csv", column="temp_f", time="time")


def long_program() -> np.ndarray:
    """A program of 3,000 rows of 20 states, run three times with other work between."""
    rng = np.random.default_rng(7)
    program = rng.integers(0, 20, 3000)
    return by_appearance(
        np.concatenate([program, rng.integers(0, 20, 500), program, rng.integers(0, 20, 500), program])
    )


def beside() -> None:
    """The default library with the compressors and without."""
    lines = []
    for name, series in logs():
        scores = {share: seqmix.score(series, last="all", compressor_share=share) for share in (0.0, 0.1, 0.9)}
        bits = {share: score.bits for share, score in scores.items()}
        rows = scores[0.1].rows
        awake = max(
            (m["rows_awake"], m["name"])
            for m in scores[0.1].models
            if m["name"] in {c.name for c in registry.COMPRESSORS}
        )
        cost = np.log2(1 / (1 - prior_of_compressors(series.kind)))
        lines.append([
            name, f"{rows:,}", f"{bits[0.0] / rows:.5f}",
            f"{bits[0.1] - bits[0.0]:+.3f}", f"{bits[0.9] - bits[0.0]:+.3f}",
            f"{cost:.3f}", f"{awake[1]} {awake[0]}", max(scores[0.9].models, key=lambda m: m["weight_after"])["name"],
        ])  # fmt: skip
    table(["log", "rows", "bits a row without", "with, share 0.1: bits more", "share 0.9: bits more",
           "prior given to them, bits", "rows awake, share 0.1", "heaviest, share 0.9"], lines)  # fmt: skip


def prior_of_compressors(kind: str) -> float:
    names = {compressor.name for compressor in registry.COMPRESSORS}
    models = registry.NUMBER_MODELS if kind == "numbers" else registry.MODELS
    heavy = {model.name: 2.0**-model.prior_cost for model in models}
    return sum(prior for name, prior in heavy.items() if name in names) / sum(heavy.values())


def a_million(rounds: int) -> None:
    source = chain(states=8, order=2, seed=31, evenness=1.0)
    with TemporaryDirectory() as folder:
        file = Path(folder) / "rows.txt"
        codes, _ = source.draw(1_000_000, seed=32)
        write_lines(file, codes[source.order :])
        runs: dict[str, list[Run]] = {"0": [], "0.1": [], "0.2": []}
        for _ in range(rounds):
            for share, some in runs.items():
                some.append(run(*SEQMIX, "score", str(file), "--last", "all", "--format", "jsonl", "--quiet",
                                "--compressor-share", share))  # fmt: skip
    lines = []
    for share, some in runs.items():
        pairs = zip(some, runs["0"], strict=True)
        ratio = median(one.seconds / other.seconds for one, other in pairs)
        score = json.loads(some[0].output)
        awake = {m["name"]: m["rows_awake"] for m in score["models"]}
        lines.append([share, f"{median(one.seconds for one in some):.2f}", f"{ratio:.2f}x", f"{score['bits']:.1f}",
                      ", ".join(f"{c.name} {awake.get(c.name, 0):,}" for c in registry.COMPRESSORS)])  # fmt: skip
    table(["share", "seconds", "against none, median of rounds", "bits", "rows awake"], lines)


if __name__ == "__main__":
    parts = sys.argv[1:] or ["alone", "beside", "million"]
    if "alone" in parts:
        alone()
        print()
    if "beside" in parts:
        beside()
        print()
    if "million" in parts:
        a_million(3)
