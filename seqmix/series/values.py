"""Python values and times as what a log would hold."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np

from ..errors import DataError, visible
from .clock import Clock, TimeTextError
from .kinds import NumberText
from .rows import MISSING

_LATEST = int(np.datetime64("9999-12-31T23:59:59", "us").astype(np.int64))
_EARLIEST = int(np.datetime64("0001-01-01", "us").astype(np.int64))

_PLAIN = {float, int, type(None), np.float64, np.int64}


def cell_text(value: Any) -> str:
    """A value as the text of a cell: strings as they are, numbers and booleans as in JSON.

    Raises TypeError for other types.
    """
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, str):
        return value
    if value is None:
        return "null"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, (int, float)):
        return NumberText(value)
    raise TypeError(f"{type(value).__name__} is neither text nor a number nor a boolean")


def plain_numbers(values: np.ndarray | list[Any]) -> np.ndarray | None:
    """(n,) float64 of an array (n,) of numbers, or a list of floats, integers and None; None for anything else."""
    if isinstance(values, np.ndarray):
        if values.dtype.kind not in "fiu":
            return None
        # Another float is the number that it prints, not the double nearest to it.
        texts = values.dtype.kind == "f" and values.dtype != np.float64
        return (values.astype(str) if texts else values).astype(np.float64)
    types = set(map(type, values))
    if not types or types == {type(None)} or not types <= _PLAIN:
        return None
    try:
        return np.array(values, dtype=np.float64)
    except OverflowError:  # an integer beyond all floats
        return None


def byte_codes(values: Iterable[Any], name: str) -> np.ndarray:
    """(n,) int32 codes of bytes, or of integers 0 to 255 and None. Raises DataError for anything else."""
    if isinstance(values, (bytes, bytearray, memoryview)):
        return np.frombuffer(values, np.uint8).astype(np.int32)
    codes = []
    for row, value in enumerate(values):
        if value is not None and not (isinstance(value, (int, np.integer)) and 0 <= value <= 255):
            raise DataError(f"row {row}: not a byte, an integer from 0 to 255: {value!r:.40}", name)
        codes.append(MISSING if value is None else value)
    return np.array(codes, np.int32)


def times_of(values: Any, name: str) -> tuple[np.ndarray, Clock]:
    """Microseconds since 1970, and the clock, of times in any of the forms that `Series.of` takes."""
    array = np.asarray(values)
    if array.dtype.kind in "iuM":
        times = (array.astype("datetime64[us]") if array.dtype.kind == "M" else array).astype(np.int64)
        bad = np.flatnonzero((times < _EARLIEST) | (times > _LATEST))
        if len(bad):
            message = f"row {bad[0]}: a time outside the years 1 to 9999; integers are microseconds"
            raise DataError(message, name)
        return times, Clock()
    texts = [value.isoformat() if hasattr(value, "isoformat") else str(value) for value in array.tolist()]
    clock = Clock.like(texts[0]) if texts else Clock()
    try:
        return clock.parse(texts), clock
    except TimeTextError as error:
        raise DataError(f"row {error.index}: {error.reason}: '{visible(texts[error.index])}'", name) from None
