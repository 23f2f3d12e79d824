"""The errors a user of seqmix can meet: one tree under `SeqmixError`.

Every message says what was found, where, and what to do. Text that came from a log is passed through
`visible` first, so that a message can never carry a terminal escape.
"""

from __future__ import annotations

import os


class SeqmixError(Exception):
    """Base of all errors raised on purpose. `exit_code` is what the command line ends with."""

    exit_code = 1


class DataError(SeqmixError):
    """A log that cannot be read as asked.

    `place` is `file`, `file:line` or `file:line:column` (lines and columns from 1), and starts the message.
    """

    def __init__(self, message: str, name: str, line: int | None = None, column: int | None = None) -> None:
        place = ":".join(str(part) for part in (visible(name), line, column) if part is not None)
        super().__init__(f"{place}: {message}")
        self.place = place
        self.line = line
        self.column = column


class StateError(SeqmixError):
    """A state file that cannot be used: not there, damaged, newer, of another kind, or being written by another."""


class OptionError(SeqmixError):
    """A request that makes no sense: an unknown model, zero steps, a column that is not there."""

    exit_code = 2


class OutputError(SeqmixError):
    """The answer could not be written."""

    exit_code = os.EX_IOERR if hasattr(os, "EX_IOERR") else 74


class KernelError(SeqmixError):
    """The kernels asked for by SEQMIX_KERNELS are not there."""


class PluginWarning(UserWarning):
    """A model of another package is left out; the message names it and says why."""


def visible(text: str, limit: int = 80) -> str:
    """`text` with control, format and lone surrogate characters as escapes, cut to `limit` characters."""
    shown = "".join(
        char if char.isprintable() else char.encode("unicode_escape", "surrogatepass").decode("ascii")
        for char in text[: limit + 1]
    )
    return shown if len(shown) <= limit else shown[: limit - 1] + "…"
