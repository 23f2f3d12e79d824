"""What kind of log it is: text or raw bytes; which cells are missing, which are numbers."""

from __future__ import annotations

import re
from collections.abc import Iterable

KINDS = ("states", "numbers", "bytes")

NO_NUMBERS = "{}: numbers are not supported yet; --as states takes every distinct value as a state"

_MISSING = frozenset(("", "na", "nan", "null"))
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")


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


def is_number(cell: str) -> bool:
    """Whether a cell is a decimal number. "inf" is not."""
    return _NUMBER.fullmatch(cell.strip()) is not None


def are_numbers(cells: Iterable[str], written_as: type[str] = str) -> bool:
    """Whether there is a value among `cells` and all values are numbers, each an instance of `written_as`."""
    values = {cell for cell in cells if not is_missing(cell)}
    return bool(values) and all(isinstance(cell, written_as) and is_number(cell) for cell in values)
