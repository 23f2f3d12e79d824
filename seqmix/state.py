"""State files: what was learned from a log, kept for another process.

One file, version 1. All numbers are little-endian.

    bytes       what
    8           magic: 89 's' 'e' 'q' 'm' 'i' 'x' 0a
    4           version of this format, unsigned: 1
    4           length of the header in bytes, unsigned; 16 MiB at the most
    that many   header: one JSON object in ASCII, see below
    the rest    body: one zstandard frame; it holds the arrays, end to end, in the order of the header, each in C order
    32          checksum: BLAKE2b-256 of all bytes before it

The checksum is that of what lies in the file, so it is compared before anything is unfolded or taken for granted. The
body is unfolded to just as many bytes as the header says, 64 GiB at the most. A checksum tells damage, not intent: take
states from where you would take a log. Nothing in a file is ever run.

The header has exactly these keys:

    seqmix      version of the program that wrote it, a text
    rows        rows learned, missing rows put into gaps too
    log         what the log is: kind, format, column, time_column, places, separator, header, clock (an object:
                mark, seconds, digits, offset, shift), cadence; as in `seqmix.series.facts.Facts`
    timed       whether its rows have times
    settled     whether the first 4,096 rows are there, which decide the cadence
    last        time of the last row in microseconds, or null
    asked       models, period, resolution, compressor_share: as they were asked for, or null
    models      names of the models of the mixture
    scalars     name: integer, text, boolean or null, of the mixture
    arrays      list of [name, dtype, shape]; dtype is one of b1 i1 u1 u2 i4 i8 u8 f4 f8; a shape of [] is a float

Arrays: `labels`, the labels of the alphabet in UTF-8, end to end, and `ends`, where each ends. While the first 4,096
rows are not there, the rows themselves: `held` (codes, i4, or numbers, f8) and, if they have times, `times` (i8).
From then on, with the scalars, the state of the mixture: names that start with "mixture."; and `tail`, perhaps with
`tail_times`, in the same forms: the last rows, at most 64, which the mixture has not learned yet, for models that sleep
may wake on them if a forecast comes next.

A file is written beside its place, brought to the disk, and moved there: readers see the old state or the new one, and
never wait. Writers keep each other out by a lock on a side file, `.NAME.lock`, which is removed when the writer ends.
"""

from __future__ import annotations

import fcntl
import json
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from hashlib import blake2b
from math import prod
from typing import Any, BinaryIO

import numpy as np
import numpy.typing as npt

from seqmix.beside import beside, failing
from seqmix.errors import StateError, visible

MAGIC = b"\x89seqmix\n"
VERSION = 1
HEADER_CAP = 16 << 20
BODY_CAP = 64 << 30
KEYS = ("seqmix", "rows", "log", "timed", "settled", "last", "asked", "models", "scalars", "arrays")

_CHECKSUM = 32
_FIXED = len(MAGIC) + 8
_DTYPES = ("b1", "i1", "u1", "u2", "i4", "i8", "u8", "f4", "f8")
_BLOCK = 1 << 20

Arrays = dict[str, npt.NDArray[Any]]


def write(path: str, header: dict[str, Any], arrays: Arrays) -> None:
    """Write a state file, whole or not at all; the caller holds the `lock`.

    header: all KEYS but "arrays". Raises OutputError if it cannot be written, StateError if it would be too large.
    """
    _check_machine(path)
    listed = [[name, array.dtype.str[1:], list(array.shape)] for name, array in arrays.items()]
    text = json.dumps({**header, "arrays": listed}, allow_nan=False).encode("ascii")
    if len(text) > HEADER_CAP or sum(array.nbytes for array in arrays.values()) > BODY_CAP:
        raise StateError(f"{visible(path)}: too much to keep: a header over 16 MiB, or arrays over 64 GiB")
    from zstandard import ZstdCompressor

    with beside(path, f".{os.path.basename(os.path.realpath(path))}.part") as file:
        out = _Checked(file)
        out.write(MAGIC + VERSION.to_bytes(4, "little") + len(text).to_bytes(4, "little") + text)
        with ZstdCompressor(level=1).stream_writer(out, closefd=False) as frame:  # type: ignore[arg-type]
            for array in arrays.values():
                frame.write(np.ascontiguousarray(array).reshape(-1).view(np.uint8).data)
        file.write(out.sum.digest())


class _Checked:
    """A file that adds up what is written."""

    def __init__(self, file: BinaryIO) -> None:
        self._file = file
        self.sum = blake2b(digest_size=_CHECKSUM)

    def write(self, data: bytes) -> int:
        self.sum.update(data)
        return self._file.write(data)

    def flush(self) -> None:
        self._file.flush()


def read(path: str) -> tuple[dict[str, Any], Arrays]:
    """The header and the arrays of a state file. Raises StateError, which says what is wrong with the file."""
    _check_machine(path)
    try:
        with open(path, "rb") as file:
            data = memoryview(file.read())
    except (OSError, ValueError) as error:
        raise StateError(f"{visible(path)}: cannot be opened: {getattr(error, 'strerror', None) or error}") from None
    if data[: len(MAGIC)] != MAGIC[: len(data)] or not len(data):
        raise StateError(f"{visible(path)}: no state file of seqmix; 'seqmix learn LOG --into FILE' makes one")
    version = int.from_bytes(data[len(MAGIC) : len(MAGIC) + 4], "little")
    if len(data) >= _FIXED and version != VERSION:
        raise StateError(
            f"{visible(path)}: a state of format {version}, and this seqmix reads format {VERSION}; "
            "take the seqmix that wrote it, or learn the log anew"
        )
    if (
        len(data) < _FIXED + _CHECKSUM
        or blake2b(data[:-_CHECKSUM], digest_size=_CHECKSUM).digest() != data[-_CHECKSUM:]
    ):
        raise StateError(f"{visible(path)}: damaged or cut short; take a copy, or learn the log anew")
    try:
        end = _FIXED + int.from_bytes(data[_FIXED - 4 : _FIXED], "little")
        header = json.loads(bytes(data[_FIXED:end]))
        if end - _FIXED > HEADER_CAP or tuple(header) != KEYS:
            raise ValueError("not the keys of a header")
        return header, _unfold(data[end:-_CHECKSUM], header["arrays"])
    except (ValueError, TypeError, KeyError, RecursionError) as error:
        raise unfit(path, error) from error


def _unfold(body: memoryview, listed: list[tuple[str, str, list[int]]]) -> Arrays:
    """The arrays of a body. Raises ValueError where it does not hold just these."""
    from zstandard import ZstdDecompressor, ZstdError

    arrays: Arrays = {}
    sizes = [
        prod(shape) * int(dtype[1:]) for _, dtype, shape in listed if dtype in _DTYPES and min(shape, default=0) >= 0
    ]
    if len(sizes) < len(listed) or sum(sizes) > BODY_CAP:
        raise ValueError("arrays of no such kind or size")
    try:
        with ZstdDecompressor().stream_reader(body) as frame:
            for name, dtype, shape in listed:
                array = np.empty(shape, dtype=dtype)
                room = array.reshape(-1).view(np.uint8).data
                while len(room):
                    count = frame.readinto(room[:_BLOCK])
                    if not count:
                        raise ValueError("arrays that end too soon")
                    room = room[count:]
                arrays[name] = array
            if frame.read(1):
                raise ValueError("more than the arrays")
    except ZstdError as error:
        raise ValueError(str(error)) from None
    return arrays


def unfit(path: str, error: Exception) -> StateError:
    """A file that is whole, and yet no state that this program can go on from."""
    found = visible(f"{type(error).__name__}: {error}")
    return StateError(f"{visible(path)}: not a state that this seqmix can go on from ({found}); learn the log anew")


def _check_machine(path: str) -> None:
    if sys.byteorder != "little":
        raise StateError(f"{visible(path)}: states are kept on little-endian machines only")


@contextmanager
def lock(path: str) -> Iterator[None]:
    """Keep other writers of a state file out. Raises StateError if there is one, OutputError without the right."""
    target = os.path.realpath(path)
    side = os.path.join(os.path.dirname(target), f".{os.path.basename(target)}.lock")
    file = _locked(side, path)
    try:
        yield
    finally:
        with suppress(FileNotFoundError):
            os.unlink(side)
        os.close(file)


def _locked(side: str, path: str) -> int:
    """The side file, open and locked."""
    while True:
        with failing(path):
            file = os.open(side, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
        try:
            with failing(path):
                try:
                    fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
                except BlockingIOError:
                    raise StateError(
                        f"{visible(path)}: another seqmix is learning into it; wait until it ends"
                    ) from None
            # whoever held it before has removed the file by now, or is about to
            with suppress(FileNotFoundError):
                if os.path.samestat(os.fstat(file), os.stat(side)):
                    return file
        except BaseException:
            os.close(file)
            raise
        os.close(file)
