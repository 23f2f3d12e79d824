"""JSON Lines: a value or an object a line."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cache
from typing import TYPE_CHECKING, Any

from ..errors import DataError, visible
from .columns import Options, Sample
from .kinds import NumberText
from .layout import Beside, split_lines
from .text import Text

if TYPE_CHECKING:
    from json import JSONDecoder


class JsonLines:
    """A value or an object a line; blank lines are skipped.

    Strings are taken as they are, numbers and booleans by their JSON text, null and absent keys as missing.
    """

    name = "jsonl"
    separator = None
    typed = True

    def __init__(self, records: list[Any]) -> None:
        self._records = records

    @classmethod
    def detect(cls, start: str) -> JsonLines | None:
        """The layout where the first line is an object, or all are JSON and one is a string or an array."""
        if '"' not in start:
            return None
        records: list[Any] = []
        for line in split_lines(start):
            if line.strip():
                try:
                    records.append(_decode(line))
                except ValueError:
                    # After a first object it is an error, to be met when its row is reached.
                    if not records or not isinstance(records[0], dict):
                        return None
        objects = isinstance(records[0], dict)
        return cls(records) if objects or any(type(record) in (str, list) for record in records) else None

    def sample(self, log: str, options: Options, notes: list[str]) -> Sample:
        """The keys of the first object as columns, or the only column of values."""
        if not isinstance(self._records[0], dict):
            return Sample(log, None, [list(map(_text, self._records))], single=True)
        objects = [record for record in self._records if isinstance(record, dict)]
        names = list(objects[0])
        return Sample(log, names, [[_text(record.get(name)) for record in objects] for name in names])

    def again(self, log: str, names: tuple[str | None, str | None], header: bool | None) -> Sample:
        """A name that the first object happens not to have is a column all the same."""
        first = self._records[0]
        if isinstance(first, dict):
            self._records[0] = dict.fromkeys((name for name in names if name is not None), None) | first
        return self.sample(log, Options(), [])

    def cells(self, text: Text, sample: Sample, value: int, time: int | None, beside: Beside) -> Iterator[str]:
        """The values, or the values under one key.

        Raises DataError for a line that is not JSON, is not an object where the first is one, or has a nested
        value.
        """
        names = sample.names
        number = 0
        for block in text.lines():
            for line in split_lines(block):
                number += 1
                if not line.strip():
                    continue
                try:
                    record = _decode(line)
                except ValueError as error:
                    message = f"not JSON: {getattr(error, 'msg', error)}: '{visible(line)}'"
                    raise DataError(message, text.name, number, getattr(error, "colno", 1)) from None
                if names:
                    if not isinstance(record, dict):
                        message = f"not an object as the first line is: '{visible(line)}'"
                        raise DataError(message, text.name, number)
                    if time is not None:
                        beside.times.append(_text(record.get(names[time])))
                    record = record.get(names[value])
                if isinstance(record, (dict, list)):
                    message = f"a nested value, not a text, number or boolean: '{visible(line)}'"
                    raise DataError(message, text.name, number)
                beside.lines.append(number)
                yield _text(record)


def _decode(line: str) -> Any:
    """The JSON value in `line`, its numbers as `NumberText`. Raises json.JSONDecodeError, a ValueError."""
    from json import JSONDecodeError

    try:
        return _decoder().decode(line)
    except RecursionError:
        raise JSONDecodeError("nested too deeply", line, 0) from None


@cache
def _decoder() -> JSONDecoder:
    from json import JSONDecoder

    return JSONDecoder(parse_float=NumberText, parse_int=NumberText, parse_constant=NumberText)


def _text(value: Any) -> str:
    """A value as the text of a cell."""
    if isinstance(value, str):
        return value
    if value is None:
        return "null"
    return str(value).lower() if isinstance(value, bool) else str(value)
