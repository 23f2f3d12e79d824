"""Decompression of blocks of bytes: gzip, zstandard, brotli.

Each function turns an iterator of compressed blocks into one of plain blocks, holds little more than one
block of each, and raises ValueError for data that are damaged or cut short.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

BLOCK = 1 << 20
"""Bytes read at a time."""

Blocks = Iterator[bytes]

_ZSTD_MAGIC = b"\x28\xb5\x2f\xfd"


def compression_of(head: bytes, name: str) -> str | None:
    """The compression that the first bytes of a log show; brotli shows only in the ending of the name."""
    if head.startswith(b"\x1f\x8b\x08"):
        return "gzip"
    skippable = head[1:4] == b"\x2a\x4d\x18" and 0x50 <= head[0] <= 0x5F
    if head.startswith(_ZSTD_MAGIC) or skippable:
        return "zstandard"
    return "brotli" if name.endswith(".br") else None


def gunzip(blocks: Blocks) -> Blocks:
    """gzip, of one member or several; zero bytes may pad the end."""
    import zlib

    member = None
    for block in blocks:
        while block:
            if member is None:
                block = block.lstrip(b"\0")
                if not block:
                    break
                member = zlib.decompressobj(wbits=31)
            try:
                yield member.decompress(block, BLOCK)
            except zlib.error as error:
                raise ValueError(str(error)) from None
            block = member.unused_data if member.eof else member.unconsumed_tail
            if member.eof:
                member = None
    if member is not None:
        yield member.flush()
        raise ValueError("cut short")


def unzstd(blocks: Blocks) -> Blocks:
    """zstandard, of one frame or several."""
    import zstandard

    # A few bytes can stand for a whole 128 KiB, so little is fed at a time.
    feed = 1024
    frame = None
    for block in blocks:
        view = memoryview(block)
        while view:
            frame = frame or zstandard.ZstdDecompressor().decompressobj()
            try:
                yield frame.decompress(view[:feed])
            except zstandard.ZstdError as error:
                raise ValueError(str(error)) from None
            if frame.eof:
                view = view[min(feed, len(view)) - len(frame.unused_data) :]
                frame = None
            else:
                view = view[feed:]
    if frame is not None:
        raise ValueError("cut short")


def unbrotli(blocks: Blocks) -> Blocks:
    """brotli: one stream."""
    import brotli

    stream = brotli.Decompressor()
    for block in blocks:
        try:
            yield stream.process(block, output_buffer_limit=BLOCK)
            while not stream.can_accept_more_data():
                yield stream.process(b"", output_buffer_limit=BLOCK)
        except brotli.error as error:
            raise ValueError(str(error)) from None
    while not stream.is_finished():
        rest = stream.process(b"", output_buffer_limit=BLOCK)
        if not rest:
            raise ValueError("cut short")
        yield rest


DECOMPRESSORS: dict[str, Callable[[Blocks], Blocks]] = {
    "gzip": gunzip,
    "zstandard": unzstd,
    "brotli": unbrotli,
}
