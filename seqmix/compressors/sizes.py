"""How long each compressor makes some bytes, in one shot, at its best effort."""

from __future__ import annotations

import bz2
import zlib


def sizes(data: bytes) -> dict[str, int]:
    """Bytes that `data` takes under deflate (RFC 1951, without a wrapper), bzip2, zstandard and brotli."""
    import brotli  # here, not above: start-up time
    import zstandard

    deflate = zlib.compressobj(9, zlib.DEFLATED, -zlib.MAX_WBITS)
    zstd = zstandard.ZstdCompressor(level=19, write_content_size=False)
    return {
        "deflate": len(deflate.compress(data)) + len(deflate.flush()),
        "bzip2": len(bz2.compress(data, 9)),
        "zstd": len(zstd.compress(data)),
        "brotli": len(brotli.compress(data, quality=11)),
    }
