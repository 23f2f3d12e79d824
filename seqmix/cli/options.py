"""What commands share: how help looks, options, the log to read, the answer to write."""

from __future__ import annotations

import functools
import os
import sys
from collections.abc import Callable, Iterator
from contextlib import AbstractContextManager, contextmanager, suppress
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import click

from seqmix.beside import failing
from seqmix.cli.notes import Progress, say
from seqmix.cli.writer import FORMATS, Writer, writing

if TYPE_CHECKING:
    from seqmix.learned import Learned
    from seqmix.series.log import Log

Function = Callable[..., Any]

_M_TRIM_THRESHOLD, _M_MMAP_THRESHOLD = -1, -3  # of malloc.h

ANYWHERE = ("AS", "MODELS", "SEED", "FORMAT")  # options that SEQMIX_<OPTION> sets for every command


class Helpful(click.Command):
    """A command whose help starts with an example."""

    def __init__(self, *args: Any, example: str, **settings: Any) -> None:
        super().__init__(*args, **settings)
        self.example = example

    def make_context(self, *args: Any, **settings: Any) -> click.Context:
        with failing("stdout"):  # --help and --version answer from here
            return super().make_context(*args, **settings)

    def format_help(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Example"):
            formatter.write_text(self.example)
        formatter.write_paragraph()
        super().format_help(ctx, formatter)


class Setting(click.Option):
    """An option that the environment can set: SEQMIX_<COMMAND>_<OPTION> first, then SEQMIX_<OPTION>."""

    def resolve_envvar_value(self, ctx: click.Context) -> str | None:
        variable = self._variable(ctx)
        return os.environ[variable] if variable else None

    def get_error_hint(self, ctx: click.Context | None) -> str:
        hint = super().get_error_hint(ctx)  # type: ignore[arg-type,unused-ignore]
        if ctx and ctx.get_parameter_source(self.name or "") is click.core.ParameterSource.ENVIRONMENT:
            hint += f" (from {self._variable(ctx)})"
        return hint

    def _variable(self, ctx: click.Context) -> str | None:
        """The variable that sets this option; one that is empty sets nothing."""
        option = max(self.opts, key=len).lstrip("-").replace("-", "_").upper()
        names = [f"SEQMIX_{(ctx.info_name or '').upper()}_{option}"]
        if option in ANYWHERE:
            names.append(f"SEQMIX_{option}")
        return next((name for name in names if os.environ.get(name)), None)


option = functools.partial(click.option, cls=Setting)


@dataclass(frozen=True)
class Source:
    """Which log to read, and how."""

    path: str | None
    kind: str | None
    column: str | None
    time: str | None
    header: bool | None
    quiet: bool

    @property
    def watched(self) -> bool:
        """Whether progress is shown."""
        return not self.quiet and sys.stderr is not None and sys.stderr.isatty()

    @contextmanager
    def open(self, notes: bool = True, known: Learned | None = None, needed: bool = True) -> Iterator[Log]:
        """The log, with progress while it is read; what was assumed is told (`notes`) when all went well.

        known: what is known of the rows before it; then, unless it is `needed`, no name is no log, not stdin.
        """
        if known is not None and self.path is None and not needed:
            with known.go_on(None, kind=self.kind, column=self.column, time=self.time) as log:
                yield log
        else:
            after = None if known is None else known.facts
            with self._opened(self.path, notes, kind=self.kind, after=after) as log:
                yield log

    @contextmanager
    def open_another(self, path: str, first: Log) -> Iterator[Log]:
        """A second log, read like the first, that goes on with the kind and the states of the first."""
        with self._opened(path, True, kind=first.kind, alphabet=first.alphabet) as log:
            yield log

    @contextmanager
    def _opened(self, path: str | None, notes: bool, **more: Any) -> Iterator[Log]:
        place = place_of(path)

        from seqmix.series import open_log

        progress = Progress()
        with open_log(place, column=self.column, time=self.time, header=self.header, **more) as log:
            if self.watched:
                chunks = log.chunks
                log.chunks = lambda: progress.count(chunks())  # type: ignore[method-assign]
            try:
                yield log
            finally:
                progress.erase()
            if notes and not self.quiet:
                for note in log.notes:
                    say(note)


def place_of(path: str | None) -> str:
    """A path, or standard input as open_log calls it; a terminal would seem to hang, so it must be asked for as "-"."""
    if path is not None:
        return path
    if sys.stdin is None or sys.stdin.isatty():
        raise click.UsageError("no log to read: name a file, or pipe rows in", click.get_current_context())
    return "-"


@dataclass(frozen=True)
class Answer:
    """Where the answer goes, and in which format."""

    path: str | None
    format: str | None

    def open(self) -> AbstractContextManager[Writer]:
        return writing(self.path, self.format)


def reads_log(command: Function) -> Function:
    """Adds LOG and the options on reading it; the command gets them as `source`."""
    return _reads(command, click.argument("log", required=False, type=click.Path(allow_dash=True)))


def reads_logs(command: Function) -> Function:
    """Adds LOG LOG... and the same options; the command gets `logs`, and a `source` whose path is to be filled in."""
    logs = click.argument("logs", nargs=-1, metavar="LOG LOG...", type=click.Path(allow_dash=True))
    return _reads(command, logs)


def _give_memory_back() -> None:
    """Let large pieces of memory be mappings of their own, always: where the GNU C library makes that size its own
    choice, tables that were outgrown leave holes in the heap. It then keeps little free memory unless told to, which
    costs a fifth of the time."""
    with suppress(ImportError, OSError, AttributeError):
        from ctypes import CDLL

        malloc = CDLL(None)
        malloc.mallopt(_M_MMAP_THRESHOLD, 1 << 20)
        malloc.mallopt(_M_TRIM_THRESHOLD, 8 << 20)


def _reads(command: Function, argument: Function) -> Function:
    def run(
        kind: str | None, column: str | None, time: str | None, header: bool | None, quiet: bool,
        log: str | None = None, **others: Any,
    ) -> None:  # fmt: skip
        _give_memory_back()
        command(source=Source(log, kind, column, time, header, quiet), **others)

    return _with(
        run, command, argument,
        option("--as", "kind", type=click.Choice(["states", "numbers", "bytes"]),
               help="What a row is.  [default: found in the log]"),
        option("--column", metavar="NAME|NUMBER",
               help="Column of the values; numbers count from 1.  [default: found in the log]"),
        option("--time", metavar="NAME|NUMBER", help="Column of the times.  [default: found in the log]"),
        option("--header/--no-header", default=None,
               help="Whether the first line names the columns.  [default: found in the log]"),
        option("--quiet", is_flag=True, help="No notes and no progress on stderr."),
    )  # fmt: skip


def writes_answer(command: Function) -> Function:
    """Adds --format and --output; the command gets them as `answer`."""

    def run(output: str | None, format: str | None, **others: Any) -> None:
        command(answer=Answer(output, format), **others)

    return _with(
        run, command,
        option("--format", type=click.Choice(FORMATS),
               help="Format of the answer.  [default: table on a terminal, else csv]"),
        option("-o", "--output", metavar="FILE", type=click.Path(),
               help="Write to FILE, whole or not at all.  [default: stdout]"),
    )  # fmt: skip


def takes_models(command: Function) -> Function:
    """Adds --models and --compressor-share; the command gets both as `library`, for the library's functions."""

    def run(models: str | None, compressor_share: float | None, **others: Any) -> None:
        names = [name.strip() for name in models.split(",")] if models else None
        command(library={"models": names, "compressor_share": compressor_share}, **others)

    return _with(
        run, command,
        option("--models", metavar="NAME,NAME",
               help="Models to mix, see seqmix models; default names all of the library.  "
                    "[default: all for the kind of log]"),
        option("--compressor-share", type=click.FloatRange(0.0, 1.0), metavar="SHARE",
               help="Part of the run time for models made of compressors; 0 leaves them out.  [default: 0.1]"),
    )  # fmt: skip


def goes_on(command: Function) -> Function:
    """Adds --state; the command gets what the file holds as `known`, or None."""

    def run(state: str | None, **others: Any) -> None:
        known = None
        if state is not None:
            from seqmix.learned import load

            known = load(state)
        command(known=known, **others)

    return _with(
        run, command,
        option("--state", metavar="STATE", type=click.Path(),
               help="Go on from what 'seqmix learn' kept in STATE; the file stays as it is."),
    )  # fmt: skip


def _with(run: Function, command: Function, *decorators: Function) -> Function:
    functools.update_wrapper(run, command)
    for decorate in reversed(decorators):
        run = decorate(run)
    return run
