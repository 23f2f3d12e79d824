"""Whatever the bytes: a log reads or raises a SeqmixError, and says the same however written or packed."""

import gzip
import io

import brotli
import numpy as np
import zstandard
from hypothesis import example, given, settings
from hypothesis import strategies as st

from seqmix.errors import SeqmixError
from seqmix.series import MISSING, read

SLOW = settings(deadline=None, max_examples=150)

pieces = st.sampled_from(
    [
        "a",
        "b",
        "fill",
        "1",
        "2.5",
        "-0.1e-3",
        "12.658579999999999",
        "1_0",
        "inf",
        "-nan",
        "NaN",
        "NA",
        "",
        " ",
        "\t",
        ",",
        ";",
        "|",
        '"',
        '""',
        "\n",
        "\r\n",
        "\r",
        "\n\n",
        "{",
        "}",
        "[",
        ":",
        "null",
        "true",
        '{"s": "a"}',
        '{"s": 1, "t": "2024-01-01"}',
        '"x"',
        "2024-01-01",
        "2024-01-02T10:00Z",
        "time",
        "state",
        "é",
        "\ufeff",
        "\0",
        "\u2028",
        "\x85",
        "\x1b[31m",
        "2024-13-01",
        "\\ud800",
        "1e999",
    ]
)
texts = st.lists(pieces, max_size=40).map("".join)
names = st.sampled_from(["state", "time", "s", "t", "a", "1", "2", 1, 2, 9, ""])
options = st.fixed_dictionaries(
    {},
    optional={
        "column": names,
        "time": names,
        "kind": st.sampled_from(["states", "bytes", "numbers"]),
        "header": st.booleans(),
    },
)


class Pipe(io.RawIOBase):
    """Hands over `step` bytes at a time and cannot seek."""

    def __init__(self, data: bytes, step: int) -> None:
        self.data, self.step = io.BytesIO(data), step

    def read(self, size: int = -1) -> bytes:
        return self.data.read(min(size, self.step))


def outcome(file, **asked):
    """The rows, times and facts of a log, or its error, without its name."""
    try:
        series = read(file, **asked)
    except SeqmixError as error:
        return type(error).__name__, str(error).replace(str(getattr(file, "name", "<file>")), "<file>")
    if series.kind == "numbers":
        assert (np.isnan(series.values) == (series.codes == MISSING)).all()
        assert np.isfinite(series.values[series.codes == 0]).all()
        labels = list(map(str, series.values))
    else:
        labels = [None if code == MISSING else series.alphabet.labels[code] for code in series.codes]
    times = None if series.times is None else [series.clock.text(time) for time in series.times]
    return (
        series.kind,
        series.format,
        series.separator,
        series.header,
        series.column,
        labels,
        times,
        series.notes,
    )


@SLOW
@given(st.binary(max_size=300), options)
def test_any_bytes(data, asked):
    outcome(io.BytesIO(data), **asked)


@SLOW
@given(texts, options)
@example('a,"b\n', {"column": 1})
def test_any_text(text, asked):
    outcome(io.BytesIO(text.encode()), **asked)


@SLOW
@given(st.sampled_from([gzip.compress, zstandard.compress, brotli.compress]), st.data())
def test_any_damage_to_compressed_bytes(pack, data):
    packed = bytearray(pack(b"fill\ncap\njam\n" * 30))
    for place in data.draw(st.lists(st.integers(0, len(packed) - 1), max_size=3)):
        packed[place] ^= data.draw(st.integers(1, 255))
    file = io.BytesIO(packed[: data.draw(st.integers(0, len(packed)))])
    file.name = "log.br"
    outcome(file)


@SLOW
@given(texts, options, st.integers(1, 9))
def test_a_pipe_equals_a_file(text, asked, step):
    data = text.encode()
    assert outcome(Pipe(data, step), **asked) == outcome(io.BytesIO(data), **asked)


@SLOW
@given(texts, options, st.sampled_from([gzip.compress, zstandard.compress, brotli.compress]))
def test_compressed_equals_plain(text, asked, pack):
    file = io.BytesIO(pack(text.encode()))
    file.name = "log.br"
    assert outcome(file, **asked) == outcome(io.BytesIO(text.encode()), **asked)


@SLOW
@given(texts, options.filter(lambda asked: asked.get("kind") != "bytes"))
def test_line_ends_final_newline_and_bom_do_not_matter(text, asked):
    text = text.replace("\r", "").replace("\ufeff", "").replace("\0", "")
    expected = outcome(io.BytesIO(text.encode()), **asked)
    assert outcome(io.BytesIO(text.replace("\n", "\r\n").encode()), **asked) == expected
    assert outcome(io.BytesIO(b"\xef\xbb\xbf" + text.encode()), **asked) == expected
    if text and not text.endswith("\n"):
        assert outcome(io.BytesIO((text + "\n").encode()), **asked) == expected
