"""How alike logs are: against scores, against bounds, and against compressors called by hand."""

from __future__ import annotations

import bz2
import zlib
from math import log2
from pathlib import Path
from random import Random

import brotli
import numpy as np
import pytest
import zstandard

import seqmix
from seqmix.compressors.sizes import sizes
from seqmix.distances import Distances, text_of_codes, text_of_numbers
from seqmix.likeness import Likeness, Pair
from seqmix.models.memoryless import Memoryless

RINSE = ["water", "water", "drain"] * 30 + ["closed"]
LYE = ["water", "lye", "lye", "lye", None, "drain", "return"] * 12 + ["closed"]


def pair(likeness: Likeness, log: int, known: int) -> Pair:
    """Of two logs given, by their places."""
    names = likeness.names[log], likeness.names[known]
    return next(one for one in likeness.pairs if (one.log, one.known_first) == names)


def noise(states: str, rows: int, seed: int) -> list[str]:
    return Random(seed).choices(states, k=rows)


def write(path: Path, lines: list[str]) -> Path:
    path.write_text("".join(f"{line}\n" for line in lines))
    return path


def runs(tmp_path: Path, kind: str) -> list[Path]:
    """Three small logs of a kind, with values of their own."""
    if kind == "numbers":
        rng = np.random.default_rng(3)
        return [
            write(tmp_path / f"{i}.txt", [f"{value:.1f}" for value in 4 + 0.5 * rng.normal(size=30).cumsum()] + ["NA"])
            for i in range(3)
        ]
    if kind == "timed":
        return [
            write(tmp_path / f"{i}.csv", [f"2026-03-0{i}T{row // 60:02}:{row % 60:02},{state}" for row, state in rows])
            for i, rows in enumerate([enumerate(RINSE), enumerate(map(str, LYE)), enumerate(RINSE[7:])], 1)
        ]
    return [
        write(tmp_path / f"{i}.txt", [str(state) if state else "NA" for state in rows])
        for i, rows in enumerate([RINSE, LYE, ["acid", *RINSE[5:], "lye"]])
    ]


@pytest.mark.parametrize("kind", ["states", "timed", "bytes", "numbers"])
def test_bits_are_those_of_scores(tmp_path, kind):
    logs = runs(tmp_path, kind)
    reading = {"kind": "bytes"} if kind == "bytes" else {}
    likeness = seqmix.alike(logs, **reading)
    assert len(likeness.pairs) == 6
    grid = {"resolution": likeness.resolution} if kind == "numbers" else {}
    for i, log in enumerate(logs):
        alone = seqmix.score(log, last="all", **grid, **reading)
        for j, known in enumerate(logs):
            if i != j:
                found = pair(likeness, i, j)
                after = seqmix.score(known, against=log, **grid, **reading)
                assert found.rows == alone.rows
                assert found.bits_alone == pytest.approx(alone.bits, rel=1e-12)
                assert found.bits_after == pytest.approx(after.bits, rel=1e-12)
                assert found.saved_bits == found.bits_alone - found.bits_after
                assert found.saved_share == found.saved_bits / found.bits_alone


def test_logs_longer_than_a_chunk_go_on_as_scores_do(tmp_path):
    logs = [write(tmp_path / f"{i}.txt", noise("abcd", 4500, i)) for i in range(2)]
    likeness = seqmix.alike(logs, models=["markov", "match"])
    after = seqmix.score(logs[0], against=logs[1], models=["markov", "match"])
    assert pair(likeness, 1, 0).bits_after == after.bits


def test_a_log_that_is_known_costs_next_to_nothing():
    rows = noise("abcd", 1000, 1)
    found, _ = seqmix.alike([rows, list(rows)]).pairs
    assert found.bits_alone > 1900
    assert found.saved_share > 0.95


def test_unrelated_noise_saves_nothing_within_the_prior():
    rows = 2000
    fair = noise("ab", rows, 2)
    for known in (noise("ab", rows, 3), ["a", "b"] * 500, ["a"] * 600, noise("cde", rows, 4)):
        found = pair(seqmix.alike([known, fair]), 1, 0)
        # What is never seen, the prior, one bit for the switching half, and the parameter of a coin.
        costs = sum(map(log2, (10, 4 * rows))) + Memoryless.prior_cost + 1 + 0.5 * log2(rows) + 1
        assert found.bits_alone <= rows + costs
        assert found.bits_after >= rows - 10  # nobody saves k bits of a fair coin with a chance over 2^-k
        assert found.saved_bits <= costs + 10


def test_to_answers_for_one_log_nearest_first():
    likeness = seqmix.alike([RINSE, LYE, RINSE[2:]], to=[*LYE[3:], "drain"])
    assert likeness.names == ["values", "values (2)", "values (3)", "values (4)"]
    assert [one.log for one in likeness.pairs] == ["values (4)"] * 3
    assert likeness.pairs[0].known_first == "values (2)"
    shares = [one.saved_share for one in likeness.pairs]
    assert shares == sorted(shares, reverse=True)
    everything = seqmix.alike([RINSE, LYE, RINSE[2:], [*LYE[3:], "drain"]])
    assert likeness.pairs == [one for one in everything.pairs if one.log == "values (4)"]


def test_every_log_has_its_others_nearest_first():
    likeness = seqmix.alike([RINSE, LYE, RINSE[2:]])
    assert [one.log for one in likeness.pairs] == [name for name in likeness.names for _ in range(2)]
    assert [one.known_first for one in likeness.pairs[::2]] == ["values (3)", "values", "values"]
    for first, second in zip(likeness.pairs[::2], likeness.pairs[1::2], strict=True):
        assert first.saved_share >= second.saved_share


def test_times_count_where_every_log_has_them():
    timed = [seqmix.Series.of(rows, times=[60_000_000 * row for row in range(len(rows))]) for rows in (RINSE, LYE)]
    untimed = seqmix.alike([RINSE, LYE])
    assert seqmix.alike([timed[0], LYE]).pairs == untimed.pairs
    assert seqmix.alike(timed).pairs != untimed.pairs


def test_states_that_only_others_have_do_not_count():
    rinse = seqmix.Series.of(RINSE)
    shared = seqmix.Series.of(LYE)
    rinse.alphabet.encode("steam")  # as if a third log had gone on with the alphabet
    assert seqmix.alike([rinse, shared]).pairs == seqmix.alike([RINSE, LYE]).pairs


def test_numbers_share_the_coarsest_grid_on_which_all_lie():
    coarse, fine, none = [1.0, 5.0, 3.0] * 8, [1.5, 5.25, 3.0] * 8, [None, None]  # steps of 1, and of 0.75
    likeness = seqmix.alike([coarse, fine, none], kind="numbers")
    assert likeness.resolution == 0.25
    assert pair(likeness, 0, 1).bits_alone == pytest.approx(
        seqmix.score(coarse, last="all", resolution=0.25).bits, abs=1e-9
    )
    assert pair(likeness, 2, 0).saved_share is None
    assert seqmix.alike([none, none], kind="numbers").resolution == 1.0
    assert seqmix.alike([RINSE, LYE]).resolution is None


@pytest.mark.parametrize("empty", [[], ["fill"], [None, None]])
def test_logs_that_cost_nothing_have_no_share(empty):
    likeness = seqmix.alike([empty, RINSE], kind="states")
    found = pair(likeness, 0, 1)
    assert found.saved_share is None
    assert abs(found.bits_alone) < 1e-6
    assert all(np.isfinite(one.distance) for one in likeness.pairs)


def test_what_cannot_be_compared():
    with pytest.raises(seqmix.SeqmixError, match="at least two logs"):
        seqmix.alike([RINSE])
    with pytest.raises(seqmix.SeqmixError, match="values is read as numbers, but values as states"):
        seqmix.alike([RINSE, [1, 2, 3]])
    with pytest.raises(seqmix.SeqmixError, match="by name"):
        seqmix.alike([RINSE, LYE], models=[Memoryless()])


def test_records_are_pairs():
    likeness = seqmix.alike([RINSE, LYE])
    assert [Pair(**record) for record in likeness.records()] == likeness.pairs


X, Y = b"water drain water drain lye " * 9, b"acid return acid return lye " * 7


def test_sizes_are_those_of_one_shot():
    shot = zlib.compressobj(9, zlib.DEFLATED, -15)
    assert sizes(X) == {
        "deflate": len(shot.compress(X) + shot.flush()),
        "bzip2": len(bz2.compress(X)),
        "zstd": len(zstandard.ZstdCompressor(level=19, write_content_size=False).compress(X)),
        "brotli": len(brotli.compress(X)),
    }
    # Without header (2 bytes) and checksum (4) zlib is deflate.
    assert sizes(X)["deflate"] == len(zlib.compress(X, 9)) - 6


def test_distance_by_hand():
    found = Distances([X, Y]).between(0, 1)
    for name, size in {
        "deflate": lambda data: len(zlib.compress(data, 9)) - 6,
        "bzip2": lambda data: len(bz2.compress(data)),
        "least": lambda data: min(sizes(data).values()),
    }.items():
        x, y, both = size(X), size(Y), min(size(X + Y), size(Y + X))
        assert found[name] == (both - min(x, y)) / max(x, y)


def test_distances_are_symmetric_and_bounded():
    texts = [X, Y, bytes(Random(1).choices(range(256), k=500)), bytes(Random(2).choices(range(256), k=300)), X, b""]
    distances = Distances(texts)
    for i in range(len(texts)):
        for j in range(len(texts)):
            found = distances.between(i, j)
            assert found == Distances(texts).between(j, i)
            assert all(0 <= value <= 1.1 for value in found.values())
    assert distances.between(0, 4)["least"] < 0.1
    assert distances.between(2, 3)["least"] > 0.95


def test_logs_as_bytes():
    codes = np.array([0, 2, 255], dtype=np.int32)
    assert text_of_codes(codes, 256) == b"\x00\x02\xff"
    assert text_of_codes(codes, 257) == b"\x00\x00\x02\x00\xff\x00"
    assert text_of_codes(codes, 1 << 17) == b"\x00\x00\x00\x00\x02\x00\x00\x00\xff\x00\x00\x00"
    numbers = np.array([0.3, -0.01, np.nan, 1e308, 2.0])
    assert text_of_numbers(numbers, 0.1).split(b"\n") == [b"3", b"0", b"", b"%.0f" % 1e308, b"20", b""]


def test_distances_of_logs_are_those_of_one_alphabet():
    likeness = seqmix.alike([RINSE, LYE])
    number = {state: i for i, state in enumerate(["water", "drain", "closed", "lye", "return", None])}
    texts = [bytes(number[state] for state in rows) for rows in (RINSE, LYE)]
    found = Distances(texts).between(0, 1)
    assert {"least": likeness.pairs[0].distance, **likeness.pairs[0].distances} == found
    assert likeness.pairs[0].distances == likeness.pairs[1].distances


def test_distances_of_bytes_are_those_of_the_bytes():
    likeness = seqmix.alike([X, Y])
    assert likeness.pairs[0].distance == Distances([X, Y]).between(0, 1)["least"]


def test_rows_are_watched_as_they_are_read():
    seen = []

    def watch(chunks):
        for rows in chunks:
            seen.append(len(rows))
            yield rows

    seqmix.alike([RINSE, LYE], watch=watch)
    assert sum(seen) == 2 * (len(RINSE) + len(LYE))
