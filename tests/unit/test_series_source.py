"""Where logs come from: paths, pipes, open files, compressed data; and what happens when they are damaged."""

import bz2
import gzip
import io
import os
import random
import subprocess
import sys
import threading

import brotli
import pytest
import zstandard

from seqmix.errors import DataError
from seqmix.series import CHUNK, open_log, read
from seqmix.series import source as source_module

LINES = b"fill\ncap\nlabel\nfill\njam\n" * 3000
NOISE = random.Random(1).randbytes(5000).hex().encode() + b"\n"
PACKERS = {
    "gzip": gzip.compress,
    "zstandard": zstandard.compress,
    "brotli": lambda data: brotli.compress(data, quality=4),
}


class Dribble(io.RawIOBase):
    """A pipe that hands over a few bytes at a time."""

    def __init__(self, data: bytes, step: int) -> None:
        self.data, self.step, self.place = data, step, 0

    def readable(self) -> bool:
        return True

    def read(self, size: int = -1) -> bytes:
        part = self.data[self.place : self.place + min(size, self.step)]
        self.place += len(part)
        return part


def chunks_of(log):
    with open_log(log) as opened:
        return [(rows.first, rows.codes.tolist()) for rows in opened.chunks()], opened.alphabet.labels


def write(tmp_path, name, data):
    path = tmp_path / name
    path.write_bytes(data)
    return path


@pytest.mark.parametrize("step", [7, 1000, 70_000])
def test_chunks_do_not_depend_on_how_bytes_arrive(tmp_path, step):
    expected, labels = chunks_of(write(tmp_path, "log", LINES))
    assert [first for first, _ in expected] == [0, CHUNK, 2 * CHUNK, 3 * CHUNK]
    assert [len(codes) for _, codes in expected] == [CHUNK, CHUNK, CHUNK, 15_000 - 3 * CHUNK]
    assert labels == ["fill", "cap", "label", "jam"]
    assert chunks_of(Dribble(LINES, step)) == (expected, labels)


def test_the_alphabet_at_a_chunk_does_not_depend_on_how_bytes_arrive():
    data = b"".join(b"s%d\n" % row for row in range(3 * CHUNK))
    for file in (io.BytesIO(data), Dribble(data, 100_000)):
        with open_log(file) as log:
            assert [len(log.alphabet) for _ in log.chunks()] == [CHUNK, 2 * CHUNK, 3 * CHUNK]


@pytest.mark.parametrize("compression", PACKERS)
def test_compressed_equals_plain(tmp_path, compression):
    ending = ".br" if compression == "brotli" else ".any"
    packed = write(tmp_path, "log" + ending, PACKERS[compression](LINES))
    with open_log(packed) as log:
        assert log.compression == compression
    assert chunks_of(packed) == chunks_of(io.BytesIO(LINES))


@pytest.mark.parametrize("compression", ["gzip", "zstandard"])
def test_several_members_are_read_on(compression):
    pack = PACKERS[compression]
    assert chunks_of(io.BytesIO(pack(LINES) + pack(b"end\n"))) == chunks_of(io.BytesIO(LINES + b"end\n"))


def test_gzip_may_be_padded_and_zstandard_may_hold_frames_to_skip():
    plain = chunks_of(io.BytesIO(LINES))
    assert chunks_of(io.BytesIO(gzip.compress(LINES) + bytes(100))) == plain
    skipped = b"\x50\x2a\x4d\x18\x04\x00\x00\x00abcd"
    assert chunks_of(io.BytesIO(skipped + zstandard.compress(LINES))) == plain


@pytest.mark.parametrize("compression", PACKERS)
@pytest.mark.parametrize("keep", [0.3, 0.99])
def test_compressed_data_cut_short_are_an_error(tmp_path, compression, keep):
    packed = PACKERS[compression](NOISE + LINES)
    path = write(tmp_path, "log.br", packed[: int(keep * len(packed))])
    with pytest.raises(DataError, match=f"damaged {compression} data: cut short; get the file again"):
        read(path)


@pytest.mark.parametrize("compression", PACKERS)
def test_damaged_compressed_data_are_an_error(tmp_path, compression):
    packed = bytearray(PACKERS[compression](NOISE))
    # Brotli has no checksum, so only damage to its structure shows.
    for place in range(0, 30) if compression == "brotli" else range(30, 60):
        packed[place] ^= 0xFF
    with pytest.raises(DataError, match=rf"log\.br: damaged {compression} data: "):
        read(write(tmp_path, "log.br", packed), kind="states")


@pytest.mark.parametrize("compression", PACKERS)
def test_a_bomb_is_stopped_by_the_cap(tmp_path, monkeypatch, compression):
    monkeypatch.setattr(source_module, "MAX_PLAIN", 3 << 20)
    path = write(tmp_path, "log.br", PACKERS[compression](b"fill\n" * 2_000_000))
    with pytest.raises(DataError, match="unfolds to more than"):
        read(path)


def test_bz2_is_just_bytes(tmp_path):
    assert read(write(tmp_path, "log.bz2", bz2.compress(LINES))).kind == "bytes"


def test_binary_and_text_file_objects():
    assert read(io.BytesIO(b"a\nb\n")).name == "<file>"
    assert read(io.StringIO("a\nb\n")).codes.tolist() == [0, 1]
    with pytest.raises(DataError, match=r"<file>:1:1: the byte \\xed is not UTF-8 text"):
        read(io.StringIO("\ud800\n"), kind="states")


def test_a_file_given_open_stays_open(tmp_path):
    with open(write(tmp_path, "log", b"a\nb\n"), "rb") as file:
        series = read(file)
        assert not file.closed
        assert series.name == file.name


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no FIFOs here")
def test_a_fifo_is_read_as_it_fills(tmp_path):
    path = tmp_path / "fifo"
    os.mkfifo(path)
    chunk_seen = threading.Event()

    def fill():
        with open(path, "wb", buffering=0) as pipe:
            pipe.write(b"fill\n" * (2 * CHUNK))
            # The rest comes only after the first chunk was handed over: reading must not wait for the end.
            assert chunk_seen.wait(20)
            pipe.write(b"cap\n")

    writer = threading.Thread(target=fill)
    writer.start()
    with open_log(path) as log:
        chunks = log.chunks()
        assert len(next(chunks)) == CHUNK
        chunk_seen.set()
        assert [len(rows) for rows in chunks] == [CHUNK, 1]
    writer.join()


@pytest.mark.parametrize("name", ["-", "/dev/stdin"])
def test_standard_input(name):
    if name != "-" and not os.path.exists(name):
        pytest.skip("no /dev/stdin here")
    code = f"from seqmix.series import read; s = read({name!r}); print(s.name, s.codes.tolist())"
    run = subprocess.run([sys.executable, "-c", code], input=b"a\nb\na\n", capture_output=True, check=True)
    assert run.stdout.decode().split(maxsplit=1)[1].strip() == "[0, 1, 0]"
    assert run.stdout.decode().split()[0] == ("<stdin>" if name == "-" else name)


def test_a_closed_standard_input_is_an_error(monkeypatch):
    monkeypatch.setattr(sys, "stdin", None)
    with pytest.raises(DataError, match="<stdin>: standard input is closed; name a file"):
        read("-")


def test_what_cannot_be_opened(tmp_path):
    with pytest.raises(DataError, match=r"no\\nlog: cannot be opened: No such file"):
        read(tmp_path / "no\nlog")
    with pytest.raises(DataError, match="cannot be opened"):
        read(tmp_path)
    with pytest.raises(DataError, match=r"a\\x00b: cannot be opened: embedded null"):
        read("a\0b")


def test_what_cannot_be_read():
    class Broken(io.RawIOBase):
        def read(self, size=-1):
            raise OSError(5, "Input/output error")

    with pytest.raises(DataError, match="<file>: cannot be read: Input/output error"):
        read(Broken())


def test_a_line_over_the_cap_is_an_error_wherever_blocks_end():
    limit = 16 << 20
    for step in (1 << 20, 999_983):
        fits = Dribble(b"a\n" + b"x" * limit + b"\n", step)
        assert len(read(fits, kind="states")) == 2
        with pytest.raises(DataError, match="<file>:2: a line of more than 16 MiB"):
            read(Dribble(b"a\n" + b"x" * (limit + 1) + b"\nb\n", step), kind="states")
