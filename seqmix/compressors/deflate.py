"""Deflate: a window of 32 KiB, repeats of three bytes or more, Huffman codes."""

from __future__ import annotations

import zlib
from collections.abc import Sequence


class Deflate:
    name = "deflate"
    summary = "code lengths of deflate: verbatim repeats in the last 32,768 rows"
    source = "RFC 1951 (Deutsch 1996)"
    cost = 12.0
    reach = 1 << 15
    informed = False

    def __init__(self) -> None:
        self._history: bytes | None = None
        self._begun = zlib.compressobj()

    def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
        """The history is a preset dictionary: a candidate costs no more than its own length in time."""
        if history is not self._history:
            self._history = history
            self._begun = zlib.compressobj(6, zlib.DEFLATED, -15, 5, zlib.Z_DEFAULT_STRATEGY, history)
        out = []
        for candidate in candidates:
            one = self._begun.copy()
            out.append(8.0 * (len(one.compress(candidate)) + len(one.flush())))
        return out
