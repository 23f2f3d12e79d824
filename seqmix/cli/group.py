"""The `seqmix` group: imports the command asked for; a wrong word is told the nearest right one."""

from __future__ import annotations

import difflib
import os
from collections.abc import Sequence
from importlib import import_module

import click

import seqmix
from seqmix.cli.notes import say
from seqmix.cli.options import Helpful

NAMES = (
    "forecast", "score", "weights", "follow", "surprise", "shifts", "learn", "alike", "describe", "models", "completion"
)  # fmt: skip
COMPLETE = "_SEQMIX_COMPLETE"  # how the completion script of a shell asks for words


class Commands(Helpful, click.Group):
    """Commands are the modules of this package named in NAMES, each with its `command`."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(NAMES)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in NAMES:
            return None
        found: click.Command = import_module(f"seqmix.cli.{cmd_name}").command
        return found

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        if args[0] in NAMES or ctx.resilient_parsing:
            return super().resolve_command(ctx, args)
        raise click.UsageError(f"no such command '{args[0]}'{_nearest(args[0], NAMES)}", ctx)


def _version(ctx: click.Context, param: click.Parameter, wanted: bool) -> None:
    if not wanted or ctx.resilient_parsing:
        return
    import platform

    import numpy

    from seqmix.kernels import MODE

    click.echo(
        f"seqmix {seqmix.__version__}, kernels {MODE}, Python {platform.python_version()}, numpy {numpy.__version__}"
    )
    ctx.exit()


@click.group(
    cls=Commands,
    example="seqmix forecast line.csv --column state",
    context_settings={"help_option_names": ["-h", "--help"], "show_default": True},
    no_args_is_help=False,
    epilog="Every option can be set in the environment, as SEQMIX_<COMMAND>_<OPTION>; --as, --models, --seed "
    "and --format as SEQMIX_<OPTION>, too. The command line wins. An option that may be repeated takes several "
    "values there, with blanks between them. "
    "Exit codes: 0 done; 1 the log or the state cannot be read; 2 usage; 74 the answer cannot be written.",
)
@click.option(
    "--version", is_flag=True, is_eager=True, expose_value=False, callback=_version,
    help="Show the versions, and whether the kernels are compiled.",
)  # fmt: skip
def group() -> None:
    """Say what comes next in a log, with honest odds.

    Many models run side by side; each is weighed by how well it has predicted so far and by how simple it is.
    A log is a file or a pipe: a value a line, CSV, TSV, JSON Lines or raw bytes, compressed or not.
    """


def run(arguments: Sequence[str]) -> int:
    """Run the command the arguments ask for; the exit code. Usage errors are told here, all others raised."""
    if COMPLETE in os.environ:
        from click.shell_completion import shell_complete

        return shell_complete(group, {}, "seqmix", COMPLETE, os.environ[COMPLETE])
    try:
        with group.make_context("seqmix", list(arguments)) as context:
            group.invoke(context)
    except click.exceptions.Exit as end:
        return end.exit_code
    except click.UsageError as error:
        path = error.ctx.command_path if error.ctx else "seqmix"
        say(f"{_plain(error)}; see '{path} --help'")
        return error.exit_code
    return 0


def _plain(error: click.UsageError) -> str:
    """The message in our manner: one line, no capital at the start, no full stop."""
    if isinstance(error, click.NoSuchOption):
        known = [name for param in error.ctx.command.params for name in param.opts] if error.ctx else []
        return f"no such option '{error.option_name}'{_nearest(error.option_name, known)}"
    message = " ".join(error.format_message().split()).rstrip(".")
    return message[:1].lower() + message[1:]


def _nearest(word: str, known: Sequence[str]) -> str:
    return "".join(f", the nearest is '{name}'" for name in difflib.get_close_matches(word, known, n=1))
