"""Bits of the mixture minus bits and prior cost of each model, on every log tried: at most 0 for static Bayes, and at
most 1 for the default, which mixes it half and half with fixed share.

Run by hand: python tests/benchmarks/bounds.py
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from logs import by_appearance, chain, real_logs, tree_source
from processes import table

import seqmix
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.weights import RATES


def made_logs() -> Iterator[tuple[str, seqmix.Series]]:
    rng = np.random.default_rng(80)
    length = 20_000
    turns = np.where(np.arange(length) // 1000 % 2, np.arange(length) % 5, rng.integers(0, 3, length))
    codes = {
        "chain, 4 states, order 2": chain(4, 2, seed=81).draw(length, 82)[0],
        "tree, 2 states, 20 leaves": tree_source(2, 8, 20, seed=83).draw(length, 84)[0],
        "even noise, 8 states": rng.integers(0, 8, length),
        "constant": np.zeros(length, dtype=int),
        "turns: cycle of 5, noise": turns,
        "every row new": np.arange(3000),
        "10,000 states": rng.zipf(1.3, length) % 10_000,
    }
    for name, states in codes.items():
        yield name, seqmix.Series.of([f"s{code}" for code in by_appearance(np.asarray(states)).tolist()])


def excess(series: seqmix.Series, rates: tuple[float, ...]) -> tuple[float, Mixture]:
    """Largest excess over the models, in bits."""
    mixture: Mixture | None = None
    for rows in series.chunks():
        mixture = mixture or Mixture(kind=series.kind, timed=rows.times is not None, rates=rates)
        mixture.absorb(rows)
    assert mixture is not None
    return float((mixture.bits - mixture.model_bits - mixture.weights.costs).max()), mixture


def measure() -> None:
    lines, largest = [], {"static": -np.inf, "default": -np.inf}
    for name, series in (*real_logs(), *made_logs()):
        static, alone = excess(series, ())
        default, both = excess(series, RATES)
        largest = {"static": max(largest["static"], static), "default": max(largest["default"], default)}
        best = int(np.argmin(both.model_bits))
        lines.append([
            name, f"{both.rows:,}", f"{alone.bits / alone.rows:.4f}", f"{both.bits / both.rows:.4f}", both.names[best],
            f"{both.bits - both.model_bits[best]:.3f}", f"{static:.2e}", f"{default:.4f}",
        ])  # fmt: skip
    table(
        ["log", "rows", "static, bits a row", "default, bits a row", "best model", "default's regret, bits",
         "largest excess, static", "largest excess, default"],
        lines,
    )  # fmt: skip
    print(f"\nlargest of all: static {largest['static']:.2e} bits, default {largest['default']:.6f} bits")


if __name__ == "__main__":
    measure()
