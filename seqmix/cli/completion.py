"""`seqmix completion`: the script that teaches a shell our commands and options."""

from __future__ import annotations

import click
from click.shell_completion import ShellComplete, get_completion_class

from seqmix.cli.options import Helpful
from seqmix.cli.writer import writing


@click.command("completion", cls=Helpful, example='eval "$(seqmix completion bash)"')
@click.argument("shell", type=click.Choice(["bash", "zsh", "fish"]), metavar="SHELL")
def command(shell: str) -> None:
    """Print the completion script for SHELL: bash, zsh or fish.

    Put the line of the example into the start file of the shell; for fish: seqmix completion fish | source.
    """
    from seqmix.cli.group import COMPLETE, group

    maker = get_completion_class(shell)
    assert maker is not None
    # The base class: the one for bash would start a bash to look at its version.
    script = ShellComplete.source(maker(group, {}, "seqmix", COMPLETE))
    with writing(None, "table") as writer:
        writer.write(script + "\n")
