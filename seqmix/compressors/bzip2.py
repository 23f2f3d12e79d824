"""Bzip2: sorts the rotations of a block (Burrows & Wheeler 1994)."""

from __future__ import annotations

import bz2
from collections.abc import Sequence


class Bzip2:
    name = "bzip2"
    summary = "code lengths of bzip2: sorted contexts of the last 1,024 rows"
    source = "Burrows & Wheeler 1994"
    cost = 200.0
    reach = 1 << 10
    informed = False

    def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
        return [8.0 * len(bz2.compress(history + candidate, 1)) for candidate in candidates]
