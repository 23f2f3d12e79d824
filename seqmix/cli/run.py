"""The entry point: runs one command and ends with its exit code and, if it failed, one line on stderr.

Exit codes: 0; 1 data or state; 2 usage; 74 output; 130 and 143 on SIGINT and SIGTERM; 141 when the reader of
our pipe went away. SEQMIX_DEBUG=1 adds the traceback of an error nobody expected.
"""

from __future__ import annotations

import os
import signal
import sys
import warnings
from collections.abc import Callable
from types import FrameType
from typing import Any

from seqmix.cli.notes import discard, say
from seqmix.errors import PluginWarning, SeqmixError


class Stopped(KeyboardInterrupt):
    """A signal asked us to end. Raised wherever the program is, so that files half-written are removed."""

    def __init__(self, number: int) -> None:
        super().__init__(number)
        self.number = number


def main() -> int:
    """Run `seqmix` on the arguments of the process; returns the exit code."""
    # our matrices are small: threads of the linear algebra under numpy only cost, and may add up in another order
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    _on_signals(_stop)
    try:
        try:
            # Imported here, so that a signal during the import is met as well.
            from seqmix.cli.group import run

            with warnings.catch_warnings():
                warnings.simplefilter("always", PluginWarning)
                others = warnings.showwarning

                def show(message: Warning | str, category: type[Warning], *where: Any) -> None:
                    if issubclass(category, PluginWarning):
                        say(str(message))
                    else:
                        others(message, category, *where)

                warnings.showwarning = show  # type: ignore[assignment]
                return run(sys.argv[1:])
        finally:
            _on_signals(signal.SIG_DFL)
    except BaseException as error:
        return _end(error)


def _on_signals(handler: Callable[[int, FrameType | None], Any] | int) -> None:
    for number in (signal.SIGINT, signal.SIGTERM):
        if signal.getsignal(number) is not signal.SIG_IGN:  # nohup and `&` in a script stay in force
            signal.signal(number, handler)


def _stop(number: int, frame: FrameType | None) -> None:
    _on_signals(signal.SIG_DFL)  # a second one ends the process on the spot
    raise Stopped(number)


def _end(error: BaseException) -> int:
    """Say what ended the command, if there is anything to say; the exit code."""
    discard(sys.stdout)  # a reader that is gone, or does not read, must not hold up the end
    if isinstance(error, Stopped):
        say(f"stopped by {signal.Signals(error.number).name}")
        return 128 + error.number
    if isinstance(error, BrokenPipeError):
        return 128 + signal.SIGPIPE
    if isinstance(error, SeqmixError):
        say(str(error))
        return error.exit_code
    if isinstance(error, OSError) and error.strerror:
        say(": ".join(str(part) for part in (error.filename, error.strerror) if part))
        return 1
    if isinstance(error, MemoryError):
        say("not enough memory")
        return 1
    if os.environ.get("SEQMIX_DEBUG") == "1":
        import traceback

        traceback.print_exception(error)
    found = f"{type(error).__name__}: {error}"
    say(f"unexpected {found}; please report it (SEQMIX_DEBUG=1 shows where it happened)")
    return 1
