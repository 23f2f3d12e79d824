"""What kind of log it is: text or raw bytes; which cells are missing, which are numbers."""

from __future__ import annotations

import codecs
import re
from collections.abc import Iterable

KINDS = ("states", "numbers", "bytes")

NO_NUMBERS = "{}: numbers are not supported yet; --as states takes every distinct value as a state"

_MISSING = frozenset(("", "na", "nan", "null"))
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")


class NumberText(str):
    """The text of a number in JSON or in Python, to tell 1 from "1"."""

    __slots__ = ()


def is_text(sample: bytes, whole: bool) -> bool:
    """Whether `sample` is UTF-8 without NUL bytes; a cut last character is no matter unless it is `whole`."""
    try:
        codecs.getincrementaldecoder("utf-8")().decode(sample, final=whole)
    except UnicodeDecodeError:
        return False
    return b"\0" not in sample


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
