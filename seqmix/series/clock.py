"""Times in ISO 8601: read many at once, print in the log's own manner."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

_TIME = re.compile(
    r"(?P<year>[0-9]{4})-(?P<month>[0-9]{2})-(?P<day>[0-9]{2})"
    r"(?:(?P<mark>[Tt ])(?P<hour>[0-9]{2}):(?P<minute>[0-9]{2})"
    r"(?::(?P<second>[0-9]{2})(?:[.,](?P<fraction>[0-9]{1,9}))?)?"
    r"(?P<offset>[Zz]|[+-](?P<hours>[0-9]{2})(?::?(?P<minutes>[0-9]{2}))?)?)?"
)
_LONGEST = len("2000-01-01T00:00:00.123456789+00:00")
_NO_TIME = "not a time in ISO 8601, like 2000-01-31T23:59:00"
_NO_OFFSET = "a time without an offset, while the first has one"
_OFFSET_TOO_MANY = "a time with an offset, while the first has none"

_SECOND = 1_000_000
_MINUTE = 60 * _SECOND
_HOUR = 60 * _MINUTE
_DAY = 24 * _HOUR
_UNITS = {
    "hour": (24, _HOUR),
    "minute": (60, _MINUTE),
    "second": (60, _SECOND),
    "hours": (24, _HOUR),
    "minutes": (60, _MINUTE),
}
_OFFSET = ("hours", "minutes")


class TimeTextError(ValueError):
    """A text that is no time. index: of the first such text. reason: what is wrong with it."""

    def __init__(self, index: int, reason: str) -> None:
        super().__init__(reason)
        self.index = index
        self.reason = reason


def is_time(text: str) -> bool:
    """Whether a text has the form of a time: a date, with or without a time of day and its offset."""
    return _TIME.fullmatch(text.strip()) is not None


@dataclass(frozen=True)
class Clock:
    """How a log writes its times.

    mark: between date and time of day, "" if it writes dates only. seconds: whether it writes them.
    digits: of a second's fraction. offset: as written ("Z", "+02:00"), "" if it writes none.
    shift: that offset in microseconds.
    """

    mark: str = "T"
    seconds: bool = True
    digits: int = 0
    offset: str = ""
    shift: int = 0

    @classmethod
    def like(cls, text: str) -> Clock:
        """The clock that writes times as `text` is written; the usual one if `text` is no time."""
        found = _TIME.fullmatch(text.strip())
        if found is None:
            return cls()
        offset = found["offset"] or ""
        minutes = int(found["hours"] or 0) * 60 + int(found["minutes"] or 0)
        shift = (-minutes if "-" in offset else minutes) * _MINUTE
        digits = min(len(found["fraction"] or ""), 6)
        seconds = found["mark"] is None or found["second"] is not None
        return cls(found["mark"] or "", seconds, digits, offset, shift)

    def parse(self, texts: Sequence[str]) -> np.ndarray:
        """(n,) int64 microseconds since 1970 of n texts: UTC if this clock writes an offset, else as written.

        Fractions are cut below the microsecond. Raises TimeTextError for the first text that is no time, or
        that has an offset when this clock writes none, or the other way round.
        """
        cells = [text.strip() for text in texts]
        problems = {len(cells): ""}
        for index, cell in enumerate(cells):
            if len(cell) > _LONGEST or not cell.isascii():
                problems[index] = _NO_TIME
                del cells[index:]
                break
        width = max(map(len, cells), default=0) or 1
        characters = np.array(cells, dtype=f"S{width}").view(np.uint8).reshape(-1, width)
        digits = characters - np.uint8(ord("0"))
        shapes = np.where(digits < 10, np.uint8(ord("0")), characters)
        times = np.zeros(len(cells), dtype=np.int64)
        todo = np.arange(len(cells))
        while len(todo):
            # Nearly always all texts of a log have one shape: the same characters where no digit stands.
            first = shapes[todo[0]]
            same = (shapes[todo] == first).all(axis=1)
            alike, todo = todo[same], todo[~same]
            shape = _TIME.fullmatch(first.tobytes().rstrip(b"\0").decode("ascii"))
            if shape is None:
                problems[int(alike[0])] = _NO_TIME
                break
            if (shape["offset"] is None) == bool(self.offset):
                problems[int(alike[0])] = _NO_OFFSET if self.offset else _OFFSET_TOO_MANY
                break
            times[alike], right = _read(shape, digits[alike])
            if not right.all():
                problems[int(alike[~right][0])] = "no such date or time of day"
        index = min(problems)
        if problems[index]:
            raise TimeTextError(index, problems[index])
        return times

    def text(self, time: int) -> str:
        """A time in microseconds since 1970 as this clock writes it, finer where needed to be exact."""
        local = int(time) + self.shift
        day, rest = divmod(local, _DAY)
        date = str(np.datetime64(day, "D"))
        if not self.mark and not rest:
            return date
        second, fraction = divmod(rest, _SECOND)
        minute, second = divmod(second, 60)
        text = f"{date}{self.mark or 'T'}{minute // 60:02d}:{minute % 60:02d}"
        if self.seconds or second or fraction:
            text += f":{second:02d}"
        decimals = f"{fraction:06d}"
        decimals = decimals[: max(self.digits, len(decimals.rstrip("0")))]
        return f"{text}{'.' * bool(decimals)}{decimals}{self.offset}"


def _read(shape: re.Match[str], digits: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Microseconds of texts of one shape, given the digits they have in it; and which of them do exist."""

    def part(name: str) -> np.ndarray:
        start, stop = shape.span(name)
        return digits[:, start:stop] @ 10 ** np.arange(stop - start - 1, -1, -1, dtype=np.int64)

    year, month, day = part("year"), part("month"), part("day")
    months = (12 * (year - 1970) + month - 1).astype("datetime64[M]")
    days = months.astype("datetime64[D]") + (day - 1)
    right = (year > 0) & (month > 0) & (month <= 12) & (days.astype("datetime64[M]") == months)
    times = days.astype(np.int64) * _DAY
    # Times east of Greenwich are ahead of UTC.
    sign = 1 if "-" in (shape["offset"] or "") else -1
    for name, (limit, unit) in _UNITS.items():
        if shape[name] is not None:
            value = part(name)
            right &= value < limit
            times += value * (sign * unit if name in _OFFSET else unit)
    if shape["fraction"] is not None:
        places = len(shape["fraction"])
        times += part("fraction") * 10 ** max(6 - places, 0) // 10 ** max(places - 6, 0)
    return times, right
