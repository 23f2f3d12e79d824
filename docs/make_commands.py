"""Rewrites commands.md, the command reference, from every --help: python docs/make_commands.py"""

from __future__ import annotations

from pathlib import Path

import click

from seqmix.cli.group import NAMES, group

PAGE = Path(__file__).with_name("commands.md")

HEAD = """# Commands

What `--help` says of each command. `docs/make_commands.py` makes this page; a test checks that it is up to
date.
"""


def reference() -> str:
    """The text of the page."""
    top = click.Context(group, info_name="seqmix", terminal_width=80, **group.context_settings)
    pages = [("seqmix", group.get_help(top))]
    for name in NAMES:
        command = group.get_command(top, name)
        assert command is not None
        pages.append((f"seqmix {name}", command.get_help(click.Context(command, top, name))))
    return HEAD + "".join(f"\n## {title}\n\n```text\n{text}\n```\n" for title, text in pages)


if __name__ == "__main__":
    PAGE.write_text(reference(), encoding="utf-8")
