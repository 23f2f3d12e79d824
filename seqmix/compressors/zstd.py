"""Zstandard: long windows, repeats of three bytes or more, entropy coding of literals and matches."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any


class Zstd:
    name = "zstd"
    summary = "code lengths of zstandard: verbatim repeats in the last 65,536 rows"
    source = "RFC 8878 (Collet & Kucherawy 2021)"
    cost = 6.0
    reach = 1 << 16
    informed = False

    def __init__(self) -> None:
        self._history: bytes | None = None
        self._begun: Any = None

    def code_length(self, history: bytes, candidates: Sequence[bytes]) -> list[float]:
        """The history is a dictionary of raw content: a candidate costs no more than its own length in time."""
        import zstandard  # only where it is needed: start-up time

        if history is not self._history:
            self._history = history
            known = None
            if len(history) >= 8:  # the least that the library takes for a dictionary
                known = zstandard.ZstdCompressionDict(history, dict_type=zstandard.DICT_TYPE_RAWCONTENT)
                known.precompute_compress(level=3)
            self._begun = zstandard.ZstdCompressor(
                level=3, dict_data=known, write_content_size=False, write_checksum=False, write_dict_id=False
            )
        return [8.0 * len(self._begun.compress(candidate)) for candidate in candidates]
