"""Columns of a log: is there a header, which column holds the values, which the times."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from ..errors import OptionError, visible
from .clock import is_time
from .kinds import are_numbers, is_missing, number_of

Wanted = str | int | None
"""A column asked for: its name, its number from 1, or None for the one that suggests itself."""


@dataclass(frozen=True)
class Options:
    """What the caller asked for; None where the log itself decides."""

    column: Wanted = None
    time: Wanted = None
    kind: str | None = None
    header: bool | None = None


@dataclass
class Sample:
    """The start of a log as columns of cells, to choose from.

    log: its name. names: of the columns, None without a header. columns: the cells of each.
    single: whether the log has one value a line.
    """

    log: str
    names: list[str] | None
    columns: list[list[str]]
    single: bool = False

    def label(self, index: int) -> str | None:
        """How results name a column: by name, or else by number; None for a lone column without a name."""
        if self.names:
            return self.names[index]
        return None if self.single else str(index + 1)

    def describe(self, index: int) -> str:
        """A column in a sentence: its number, and its name or a value."""
        if self.names:
            return f"{index + 1} '{visible(self.names[index])}'"
        value = next((cell for cell in self.columns[index] if not is_missing(cell)), "")
        return f"{index + 1} (like '{visible(value, 24)}')"

    def find(self, wanted: str | int) -> int:
        """The index of a column asked for. Raises OptionError, which lists the columns, if there is none."""
        if self.names and wanted in self.names:
            return self.names.index(str(wanted))
        text = str(wanted)
        if text.isdecimal() and 1 <= int(text[:9]) <= len(self.columns):
            return int(text) - 1
        raise OptionError(f"{visible(self.log)} has no column '{visible(text)}'; {self._list()}")

    def choose(self, column: Wanted, time: Wanted, notes: list[str]) -> tuple[int, int | None]:
        """The indices of the value column and of the time column, the latter None without times.

        Without being asked, the time is the first column most of whose values are times, and the value the
        only column that remains. Adds to `notes` what was assumed; raises OptionError where nothing suggests
        itself.
        """
        if self.single:
            if time is not None:
                raise OptionError(f"{visible(self.log)} has one value a line, and no column of times")
            # An empty log has whatever column is asked for.
            return (0 if column is None or not self.columns[0] else self.find(column)), None
        value = None if column is None else self.find(column)
        if time is not None:
            when: int | None = self.find(time)
        else:
            when = next((i for i, cells in enumerate(self.columns) if i != value and _are_times(cells)), None)
            if when is not None:
                notes.append(f"column {self.describe(when)} taken as the time; --time changes it")
        if value is None:
            rest = [i for i in range(len(self.columns)) if i != when]
            if len(rest) != 1:
                raise OptionError(f"which column of {visible(self.log)}? Say --column NAME or NUMBER; {self._list()}")
            value = rest[0]
            notes.append(f"column {self.describe(value)} taken as the value; --column changes it")
        if value == when:
            raise OptionError(f"column {self.describe(value)} cannot be both the value and the time")
        return value, when

    def again(
        self, names: tuple[str | None, str | None], places: tuple[int | None, int | None]
    ) -> tuple[int, int | None]:
        """The indices of the columns of an earlier part of the log: by name, or by number where there are no names.

        Raises OptionError where they are not there.
        """
        if self.single:
            if places[1] is not None and self.columns[0]:
                raise OptionError(f"{visible(self.log)} has one value a line, and no column of times")
            return 0, None
        value, when = names if self.names else places
        if value is None:
            raise OptionError(f"{visible(self.log)} has columns, and the rows before it are one value a line")
        return self.find(value), None if when is None else self.find(when)

    def _list(self) -> str:
        return "its columns are " + ", ".join(map(self.describe, range(len(self.columns))))


def has_header(rows: Sequence[Sequence[str]], wanted: Sequence[Wanted]) -> bool:
    """Whether the first of `rows` names the columns.

    It does when its cells are distinct and none is blank, a number or a time, and besides one of them is
    `wanted` as a column, or some column below holds only numbers or only times, or no cell of it comes again
    in its own column although values do repeat in some column.
    """
    if not rows:
        return False
    first = [cell.strip() for cell in rows[0]]
    values = any(is_missing(cell) or number_of(cell) is not None or is_time(cell) for cell in first)
    if values or len(set(first)) < len(first):
        return False
    if any(name in first for name in wanted):
        return True
    columns = [[cell.strip() for cell in cells] for cells in zip(*rows[1:], strict=True)]
    if any(are_numbers(cells) or _are_times(cells) for cells in columns):
        return True
    new = not any(name in cells for name, cells in zip(first, columns, strict=False))
    return new and any(len(set(cells)) < len(cells) for cells in columns)


def _are_times(cells: Sequence[str]) -> bool:
    """Whether most values are times; the others will be met as errors."""
    values = [cell for cell in cells if not is_missing(cell)]
    return 2 * sum(map(is_time, values)) > len(values)
