"""What kind of log it is: text or raw bytes; which cells are missing, which are numbers."""

from __future__ import annotations

from collections.abc import Iterable
from math import isfinite

KINDS = ("states", "numbers", "bytes")

_MISSING = frozenset(("", "na", "nan", "null"))


class NumberText(str):
    """The text of a number in JSON or in Python, to tell 1 from "1"."""

    __slots__ = ()


def is_text(sample: bytes) -> bool:
    """Whether `sample` is meant as text: no NUL bytes, and at most one character in twenty is not UTF-8.

    A text with a broken character or two is then refused where it breaks, not taken as bytes unasked.
    """
    text = sample.decode("utf-8", "replace")
    return b"\0" not in sample and 20 * text.count("\ufffd") <= len(text)


def is_missing(cell: str) -> bool:
    """Whether a cell holds no value: blank, NA, NaN or null, in any case."""
    return cell.strip().lower() in _MISSING


def number_of(cell: str) -> float | None:
    """The decimal number in a cell, perhaps infinite or NaN; None if there is none.

    What float() reads, save 1_000 and digits other than 0 to 9.
    """
    text = cell.strip()
    if not text.isascii() or "_" in text:
        return None
    try:
        return float(text)
    except ValueError:
        return None


def are_numbers(cells: Iterable[str], typed: bool = False) -> bool:
    """Whether there is a finite number among `cells` and nothing but numbers and missing values.

    typed: a number is written as one, a `NumberText`; "1" is a text.
    """
    finite = False
    for cell in cells:
        if not is_missing(cell):
            number = None if typed and not isinstance(cell, NumberText) else number_of(cell)
            if number is None:
                return False
            finite = finite or isfinite(number)
    return finite
