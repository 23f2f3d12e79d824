"""How far two logs are apart for general-purpose compressors, which look at bytes and know nothing of models."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from seqmix.compressors.sizes import sizes


class Distances:
    """Normalised compression distances (Cilibrasi & Vitanyi 2005) between texts, each compressed once.

    With C(x) the size of x, and xy the texts in whichever order is the smaller,

        (C(xy) - min(C(x), C(y))) / max(C(x), C(y))

    about 0 where one text tells all of the other, about 1 where it tells nothing; symmetric.
    """

    def __init__(self, texts: Sequence[bytes]) -> None:
        self._texts = texts
        self._alone = [_with_least(sizes(text)) for text in texts]
        self._known: dict[tuple[int, int], dict[str, float]] = {}

    def between(self, x: int, y: int) -> dict[str, float]:
        """The distance by each compressor, and as "least" by the one that does best on x, on y and on xy."""
        pair = min(x, y), max(x, y)
        if pair not in self._known:
            one, other = self._texts[x], self._texts[y]
            both, turned = _with_least(sizes(one + other)), _with_least(sizes(other + one))
            self._known[pair] = {
                name: (min(both[name], turned[name]) - min(alone, self._alone[y][name]))
                / max(alone, self._alone[y][name])
                for name, alone in self._alone[x].items()
            }
        return self._known[pair]


def _with_least(found: dict[str, int]) -> dict[str, int]:
    return {"least": min(found.values()), **found}


def text_of_codes(codes: np.ndarray, states: int) -> bytes:
    """Codes (n,), 0 to `states` - 1, as a byte a row; two with more than 256 states, four with more than 65,536."""
    width = np.min_scalar_type(max(states - 1, 0)).newbyteorder("<")
    return codes.astype(width).tobytes()


def text_of_numbers(values: np.ndarray, resolution: float) -> bytes:
    """Numbers (n,) as lines that say how many times the resolution they are; a missing one (NaN) is a blank line."""
    with np.errstate(over="ignore"):
        units = np.clip(np.rint(values / resolution), -1e308, 1e308) + 0.0  # no -0
    return "".join("\n" if np.isnan(unit) else f"{unit:.0f}\n" for unit in units.tolist()).encode("ascii")
