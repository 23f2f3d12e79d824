"""Brotli: repeats, context-modelled codes, and a built-in dictionary of common words and phrases."""

from __future__ import annotations

from collections.abc import Sequence


class Brotli:
    name = "brotli"
    summary = "code lengths of brotli: repeats in the last 4,096 rows, and words of common texts"
    source = "RFC 7932 (Alakuijala & Szabadka 2016)"
    cost = 60.0
    reach = 1 << 12
    informed = True

    def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
        import brotli  # only where it is needed: start-up time

        return [8.0 * len(brotli.compress(history + candidate, quality=5)) for candidate in candidates]
