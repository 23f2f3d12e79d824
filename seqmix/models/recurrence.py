"""Linear recurrences of whole numbers, found exactly (Berlekamp 1968; Massey 1969)."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from math import lcm
from typing import Any

ORDER = 4
"""Longest recurrence."""

_PRIME = (1 << 61) - 1


def recurrence(numbers: Sequence[int]) -> list[int] | None:
    """The shortest linear recurrence that whole numbers obey, if of order r <= 4 with 2 r < len(numbers); else None.

    [d, c1, ..., cr]: d x[t] = c1 x[t-1] + ... + cr x[t-r].
    """
    # what holds over the rationals holds modulo a prime too, which is quick to see
    if _shortest(numbers, lambda a, b: a * pow(b, -1, _PRIME), lambda a: a % _PRIME) is None:
        return None
    factors = _shortest(numbers, Fraction, lambda a: a)
    if factors is None:
        return None
    denominator = lcm(*(Fraction(factor).denominator for factor in factors))
    return [denominator, *(int(factor * denominator) for factor in factors)]


def _shortest(
    numbers: Sequence[int], divide: Callable[[Any, Any], Any], reduce: Callable[[Any], Any]
) -> list[Any] | None:
    """Factors of the shortest recurrence in a field, by the algorithm of Berlekamp and Massey; see `recurrence`."""
    now, old = [1], [1]  # connection polynomials: now, and before the order last grew
    order, since, gap = 0, 1, 1
    for at, number in enumerate(numbers):
        error = reduce(number + sum(c * numbers[at - i] for i, c in enumerate(now[1 : order + 1], 1)))
        if error:
            factor = divide(error, gap)
            longer = now + [0] * (len(old) + since - len(now))
            for i, c in enumerate(old):
                longer[i + since] = reduce(longer[i + since] - factor * c)
            if 2 * order <= at:
                order, old, gap, since = at + 1 - order, now, error, 0
                if order > ORDER:
                    return None
            now = longer
        since += 1
    if not order or 2 * order >= len(numbers):
        return None
    return [-c for c in (now + [0] * order)[1 : order + 1]]
