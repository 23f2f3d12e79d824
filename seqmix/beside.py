"""A file that appears whole or not at all: written beside its place, then moved there."""

from __future__ import annotations

import os
import stat
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from typing import BinaryIO

from seqmix.errors import OutputError, visible


@contextmanager
def beside(path: str, part: str | None = None) -> Iterator[BinaryIO]:
    """A new file that takes the place and the rights of `path` at the end; removed if anything fails.

    part: name of the new file in the same directory, where nobody else uses it; else one that nobody has.
    What was written is on the disk when the name is moved, and the name when this ends. Raises OutputError.
    """
    target = os.path.realpath(path)  # a link stays a link
    place = os.path.dirname(target)
    new = os.path.join(place, part or f".{os.path.basename(target)}.{os.urandom(4).hex()}")
    try:
        with failing(path):
            if part is not None:
                with suppress(FileNotFoundError):
                    os.unlink(new)  # left by a process that was killed
            file = open(new, "xb")  # noqa: SIM115
        try:
            yield file
            with failing(path):
                with suppress(FileNotFoundError):
                    os.chmod(new, stat.S_IMODE(os.stat(target).st_mode))
                file.flush()
                file.flush()
                os.fsync(file.fileno())
        finally:
            with suppress(OSError):  # what could not be written on purpose cannot be written now
                file.close()
        with failing(path):
            os.replace(new, target)
        with suppress(OSError):  # not every file system has a way to do it
            folder = os.open(place, os.O_RDONLY)
            try:
                os.fsync(folder)
            finally:
                os.close(folder)
    finally:
        with suppress(FileNotFoundError):
            os.unlink(new)


@contextmanager
def failing(name: str) -> Iterator[None]:
    """Errors of the operating system in here are errors of the output `name`."""
    try:
        yield
    except BrokenPipeError:
        raise
    except OSError as error:
        raise failure(name, error) from error


def failure(name: str, error: OSError) -> OutputError:
    """The error of the output `name` that one of the operating system is."""
    return OutputError(f"cannot write {visible(name)}: {error.strerror}")
