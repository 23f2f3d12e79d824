"""State files: what comes back is what was kept, pieces are one log, and what is damaged is refused."""

from __future__ import annotations

import io
import json
import random
from collections.abc import Callable, Iterator
from hashlib import blake2b
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import seqmix
from seqmix import state
from seqmix.errors import DataError, OptionError, SeqmixError, StateError
from seqmix.learned import Learned, facts_of, load
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.numbers import NumberMixture
from seqmix.models import registry
from seqmix.models.protocol import Context
from seqmix.series.rows import CHUNK, Rows

DATA = Path(__file__).parents[1] / "data"
MINUTE = 60_000_000
HOUR = 60 * MINUTE
AWKWARD = (1, 2, 3, 7, 8, 9, 15, 16, 17, 31, 63, 64, 65, 127, 128, 129, 130, 255, 256, 257, 300)
QUICK = ["memoryless", "markov"]


def loaded(path: object) -> Learned:
    """A state, its last rows learned too."""
    known = load(path)
    known.finish()
    return known


def equal(one: dict[str, Any], other: dict[str, Any]) -> bool:
    return one.keys() == other.keys() and all(
        np.array_equal(value, other[name], equal_nan=getattr(value, "dtype", np.dtype(float)).kind == "f")
        if isinstance(value, np.ndarray | float)
        else value == other[name]
        for name, value in one.items()
    )


# ---- every model


def coded(kind: str, rows: int) -> Rows:
    """States or bytes with habits, noise, missing rows, and new ones until late."""
    rng = np.random.default_rng(11)
    codes = (np.arange(rows) // 4 + (rng.random(rows) < 0.2)) % 9 + np.where(np.arange(rows) % 83 == 82, 9, 0)
    if kind == "states":
        codes = np.unique(codes, return_inverse=True)[1].reshape(-1)
        _, first = np.unique(codes, return_index=True)
        codes = np.argsort(np.argsort(first))[codes]
    codes = np.where(rng.random(rows) < 0.03, -1, codes + (90 if kind == "bytes" else 0))
    times = None if kind == "bytes" else 1_700_000_000_000_000 + np.arange(rows, dtype=np.int64) * MINUTE
    return Rows(codes.astype(np.int32), times, 0)


def numbered(shape: str, rows: int) -> Rows:
    rng = np.random.default_rng(12)
    t = np.arange(rows)
    values = {
        "waves": np.round(20 + 5 * np.sin(t * np.pi / 12) + rng.normal(size=rows), 1),
        "counts": rng.poisson(3 + 2 * np.sin(t * np.pi / 12) ** 2).astype(float),
        "levels": np.array([10.0, 12.5, 15.0])[(t // 5 + (rng.random(rows) < 0.1)) % 3],
        "squares": (t + 1.0) ** 2,
        "repeat": np.round(np.tile(rng.normal(size=11), rows // 11 + 1)[:rows], 2),
    }[shape]
    values[rng.random(rows) < 0.03] = np.nan
    held = Rows.of(values, 1_700_000_000_000_000 // HOUR * HOUR + t * HOUR, 0)
    mixture = NumberMixture(["trend"])
    mixture.absorb(held)  # its grid finds the cells
    return held


def trip(
    make: Callable[[], Any], rows: Rows, law_of: Callable[[Any], Any], at: tuple[int, ...] = AWKWARD, more: int = 24
) -> None:
    """At each row a state goes out and into a new object, which then says and does the same as the first."""
    one = make()
    done = 0
    for stop in at:
        one.absorb(rows[done:stop])
        done = stop
        kept = one.state()
        first, second = make(), make()
        first.restore(kept)
        second.restore(first.state())
        assert equal(second.state(), kept), stop
        assert law_of(second) == law_of(one), stop
        part = rows[stop : stop + more]
        again = make()
        again.restore(kept)
        assert np.array_equal(second.absorb(part), again.absorb(part), equal_nan=True), stop
        whole = make()
        whole.absorb(rows[:stop])
        assert np.array_equal(whole.absorb(part), make_on(make, kept, part), equal_nan=True), stop
        assert equal(whole.state(), second.state()), stop


def make_on(make: Callable[[], Any], kept: dict[str, Any], part: Rows) -> np.ndarray:
    one = make()
    one.restore(kept)
    return one.absorb(part)


def masses(model: Any) -> list[float]:
    law = model.predict(1_700_000_000_000_000 + 400 * MINUTE)
    return [*law.masses.tolist(), law.unseen]


def numbers_ahead(model: Any) -> list[list[float]] | None:
    laws = model.walk(2, [1_700_000_000_000_000 // HOUR * HOUR + k * HOUR for k in (400, 401)], 64)
    return None if laws is None else [np.concatenate([law.centres, law.scales, law.weights]).tolist() for law in laws]


@pytest.mark.parametrize(("kind", "model"), [(kind, model) for model in registry.MODELS for kind in model.kinds])
def test_every_model_of_states_goes_on(kind: str, model: Any) -> None:
    trip(lambda: model(256 if kind == "bytes" else 0), coded(kind, 340), masses)


@pytest.mark.parametrize("shape", ["waves", "counts", "levels", "squares", "repeat"])
def test_every_model_of_numbers_goes_on(shape: str) -> None:
    rows = numbered(shape, 340)
    context = Context((24,), HOUR, True)
    trip(lambda: NumberMixture(context=context), rows, numbers_ahead, AWKWARD[::2])


def test_a_rhythm_goes_on() -> None:
    rows = numbered("repeat", 340)
    trip(lambda: NumberMixture(["rhythm", "values"], context=Context()), rows, numbers_ahead)


@pytest.mark.parametrize("name", ["bits", "model.markov.seen", "model.markov.novelty.times_seen"])
def test_what_does_not_fit_is_not_taken(name: str) -> None:
    one = Mixture(QUICK)
    one.absorb(coded("states", 50).codes)
    kept = one.state()
    with pytest.raises(KeyError):
        Mixture(QUICK).restore({key: value for key, value in kept.items() if key != name})
    with pytest.raises(ValueError, match=name.rsplit(".", 1)[-1]):
        Mixture(QUICK).restore(kept | {name: np.zeros((2, 2))})


# ---- logs in pieces


def clocked(rows: int) -> list[str]:
    """A log of a line, a row a minute, with gaps, one of them long, and a row that comes twice."""
    rng, minute, lines = random.Random(5), 0, ["time,state\n"]
    for row in range(rows):
        minute += 0 if row == 21 else rng.choice((3, 90)) if rng.random() < 0.04 else 1
        state = rng.choice(("stop", "wash", "rinse")) if rng.random() < 0.1 else ("fill", "cap", "label")[row // 3 % 3]
        day, left = divmod(minute, 1440)
        lines.append(f"2026-03-{day + 2:02d}T{left // 60:02d}:{left % 60:02d}+01:00,{state}\n")
    return lines


def as_numbers(rows: int) -> list[str]:
    rng = random.Random(6)
    return ["when;celsius\n"] + [
        line.split(",")[0] + f";{4 + 0.1 * rng.randrange(-4, 9):.1f}\n" for line in clocked(rows)[1:]
    ]


LOGS: dict[str, Callable[[int], list[str]]] = {
    "lines": lambda rows: [line.split(",")[1] for line in clocked(rows)[1:]],
    "lines with commas": lambda rows: ["pump on, valve open\n" if k % 3 == 1 else "rinse\n" for k in range(rows)],
    "csv": clocked,
    "numbers in csv": as_numbers,
    "numbers": lambda rows: [line.split(";")[1] for line in as_numbers(rows)[1:]],
    "jsonl": lambda rows: [
        json.dumps(dict(zip(("time", "state"), line.strip().split(","), strict=True))) + "\n"
        for line in clocked(rows)[1:]
    ],
    "jsonl values": lambda rows: [json.dumps(line.strip().split(",")[1]) + "\n" for line in clocked(rows)[1:]],
}


def in_pieces(lines: list[str], cuts: list[int], into: Path, **options: Any) -> seqmix.Lesson:
    lesson = None
    for a, b in pairwise([0, *cuts, len(lines)]):
        lesson = seqmix.learn(io.BytesIO("".join(lines[a:b]).encode()), into=into, **options)
    assert lesson is not None
    return lesson


@pytest.mark.parametrize("log", LOGS)
def test_pieces_of_any_number_are_one_log(log: str, tmp_path: Path) -> None:
    lines = LOGS[log](60)
    lines = [*lines[:30], *(["\n"] if log == "lines" else []), *lines[30:]]
    options: dict[str, Any] = {"kind": "states"} if log == "lines with commas" else {}
    if "numbers" in log:
        options["models"] = ["trend", "values", "rules", "counts"]
    text = "".join(lines).encode()
    whole = in_pieces(lines, [], tmp_path / "whole", **options)
    expected = (tmp_path / "whole").read_bytes()
    n = len(lines)
    for pieces in (2, 7, n - 1):
        # the first piece has a header and a row: it settles the columns
        cuts = sorted({max(2, k * n // pieces) for k in range(1, pieces)})
        part = tmp_path / f"in {pieces}"
        lesson = in_pieces(lines, cuts, part, **options)
        assert part.read_bytes() == expected, pieces
        assert (lesson.rows, lesson.bits, lesson.leading) == (whole.rows, whole.bits, whole.leading)
    ahead = [list(seqmix.forecast(None, 3, state=tmp_path / name).records()) for name in ("whole", "in 7")]
    assert ahead[0] == ahead[1] == list(seqmix.forecast(io.BytesIO(text), 3, **options).records())


@pytest.mark.parametrize("log", ["csv", "numbers in csv"])
def test_pieces_that_meet_where_the_first_rows_are_complete(log: str, tmp_path: Path) -> None:
    lines = LOGS[log](CHUNK + 300)
    options: dict[str, Any] = {"models": QUICK if log == "csv" else ["counts", "rules"]}
    whole = in_pieces(lines, [], tmp_path / "whole", **options)
    for cuts in ([CHUNK], [CHUNK + 1], [CHUNK + 2], [2, 4000, CHUNK + 299]):
        lesson = in_pieces(lines, cuts, tmp_path / str(cuts), **options)
        assert (tmp_path / str(cuts)).read_bytes() == (tmp_path / "whole").read_bytes()
        assert lesson.bits == whole.bits
    text = io.BytesIO("".join(lines).encode())
    assert list(seqmix.forecast(text, 3, **options).records()) == list(
        seqmix.forecast(None, 3, state=tmp_path / "whole").records()
    )


@pytest.mark.parametrize("size", [50, CHUNK + 100])
def test_bytes_in_pieces(size: int, tmp_path: Path) -> None:
    data = ("fill cap label pack " * 300).encode()[: size - 7] + bytes(range(7))
    options: dict[str, Any] = {"kind": "bytes", "models": QUICK}
    for name, cuts in (("whole", []), ("two", [31]), ("seven", [1, 2, 3, 30, 44, 49])):
        for a, b in pairwise([0, *cuts, len(data)]):
            seqmix.learn(data[a:b] if 0 < a < 31 else io.BytesIO(data[a:b]), into=tmp_path / name, **options)
    assert (tmp_path / "whole").read_bytes() == (tmp_path / "two").read_bytes() == (tmp_path / "seven").read_bytes()


def test_a_cadence_that_later_rows_undo(tmp_path: Path) -> None:
    """Ten regular minutes with a gap, and then rows at any time: the first rows together have no cadence."""
    lines = ["time,state\n", *(f"2026-03-02T06:{m:02d},run\n" for m in (0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 15))]
    lines += [f"2026-03-02T07:{m:02d},stop\n" for m in (1, 3, 4, 9, 11, 30, 31, 50)]
    first = in_pieces(lines[:13], [], tmp_path / "first")
    assert first.rows == 16
    assert seqmix.forecast(None, 1, state=tmp_path / "first").steps[0].time == "2026-03-02T06:16"
    assert in_pieces(lines, [13], tmp_path / "two").rows == 20
    in_pieces(lines, [], tmp_path / "one")
    assert (tmp_path / "one").read_bytes() == (tmp_path / "two").read_bytes()


def test_scores_and_weights_go_on(tmp_path: Path) -> None:
    lines = clocked(400)
    in_pieces(lines[:300], [], tmp_path / "state")
    before = (tmp_path / "state").read_bytes()
    whole, rest = io.BytesIO("".join(lines).encode()), io.BytesIO("".join(lines[300:]).encode())
    start = lines[300].split(",")[0]
    seen: list[list[tuple[int, float]]] = [[], []]

    def keep(rows: Rows, bits: np.ndarray) -> None:
        seen[-1].extend(zip(range(rows.first, rows.first + len(rows)), bits.tolist(), strict=True))

    resumed = seqmix.score(rest, state=tmp_path / "state", on_row=keep)
    seen.reverse()
    once = seqmix.score(whole, start=start, on_row=keep)
    assert dict(seen[-1]).items() <= dict(seen[0]).items()
    assert (resumed.rows, resumed.best_model) == (once.rows, once.best_model)
    assert resumed.bits == pytest.approx(once.bits, abs=1e-9)
    rest.seek(0), whole.seek(0)
    assert seqmix.weights(rest, state=tmp_path / "state").models == seqmix.weights(whole).models
    assert (tmp_path / "state").read_bytes() == before


def test_a_series_and_values_go_on(tmp_path: Path) -> None:
    values = [line.strip().split(",")[1] for line in clocked(80)[1:]]
    whole = seqmix.Series.of(values)
    seqmix.learn(whole.slice(0, 33), into=tmp_path / "a")
    seqmix.learn(whole.slice(33), into=tmp_path / "a")
    seqmix.learn(values[:5], into=tmp_path / "b")
    seqmix.learn(values[5:], into=tmp_path / "b")
    seqmix.learn(values, into=tmp_path / "c")
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes() == (tmp_path / "c").read_bytes()
    assert list(seqmix.forecast(None, 2, state=tmp_path / "a").records()) == list(seqmix.forecast(values, 2).records())


def test_rows_pushed_one_by_one(tmp_path: Path) -> None:
    """What a program does that waits for rows: the state is that of the log learned at once."""
    lines = clocked(CHUNK + 50)
    text = "".join(lines).encode()
    seqmix.learn(io.BytesIO(text), into=tmp_path / "whole", models=QUICK)
    with seqmix.open_log(io.BytesIO(text)) as log:
        known = Learned(facts_of(log, "line"), models=QUICK)
        for held, times in log.pieces:
            for row in range(len(held)):
                for rows in known.push((held[row : row + 1], times[row : row + 1])):
                    known.mixture.absorb(rows)
    known.save(tmp_path / "pushed")
    assert loaded(tmp_path / "pushed").mixture.bits == loaded(tmp_path / "whole").mixture.bits
    pushed, whole = (loaded(tmp_path / name).mixture.state() for name in ("pushed", "whole"))
    assert pushed.keys() == whole.keys()
    assert all(np.array_equal(pushed[name], whole[name]) for name in whole)


# ---- what does not go together


def test_what_was_settled_holds(tmp_path: Path) -> None:
    path = tmp_path / "state"
    in_pieces(clocked(30), [], path, models=QUICK)
    later = clocked(40)[31:]
    for asked in ({"models": ["tree"]}, {"period": 24}, {"resolution": 0.5}, {"kind": "numbers"}, {"column": "speed"}):
        with pytest.raises(OptionError):
            in_pieces(later, [], path, **asked)
    before = path.read_bytes()
    with pytest.raises(DataError, match="the rows before it are csv, and these are not"):
        in_pieces(["fill\n"], [], path)
    with pytest.raises(DataError, match=r"<file>:1:1: a time without an offset"):
        in_pieces(["2026-03-04T06:00,fill\n"], [], path)
    with pytest.raises(DataError, match="without times"):
        seqmix.learn(["fill"], into=path)
    assert path.read_bytes() == before
    assert in_pieces(later, [], path, models=["markov", "memoryless"], column="state", time=1).learned >= 10
    with pytest.raises(OptionError, match="by name"):
        seqmix.learn(["fill"], into=tmp_path / "other", models=[registry.MODELS[0]()])


def test_a_column_is_found_again(tmp_path: Path) -> None:
    path = tmp_path / "state"
    in_pieces(["time,state,crew\n", "2026-03-02T06:00,fill,A\n"], [], path, column="state")
    in_pieces(["crew,time,state\n", "B,2026-03-02T06:01,cap\n"], [], path)  # by name, where there is a header
    in_pieces(["2026-03-02T06:02,label,A\n"], [], path)  # by number, where there is none
    assert load(path).facts.alphabet.labels == ["fill", "cap", "label"]
    seqmix.learn(io.BytesIO(b'{"t": "2026-03-02", "v": "a"}\n'), into=tmp_path / "json")
    seqmix.learn(io.BytesIO(b'{"t": "2026-03-03"}\n{"v": "b", "t": "2026-03-04"}\n'), into=tmp_path / "json")
    assert loaded(tmp_path / "json").mixture.present == 2


def test_nothing_to_learn(tmp_path: Path) -> None:
    path = tmp_path / "state"
    with pytest.raises(DataError, match="no rows"):
        seqmix.learn(io.BytesIO(b""), into=path)
    assert not list(tmp_path.iterdir())
    in_pieces(clocked(5), [], path)
    before = path.read_bytes()
    assert seqmix.learn(io.BytesIO(b""), into=path).learned == 0
    assert path.read_bytes() == before
    with pytest.raises(OptionError, match="neither"):
        seqmix.forecast(None)


# ---- the file


@pytest.mark.parametrize("name", ["held", "settled"])
def test_version_1_still_reads(name: str) -> None:
    known = loaded(DATA / f"state_v1_{name}.seqmix")
    told = json.loads((DATA / "state_v1.json").read_text())[name]
    assert known.settled == (name == "settled")
    assert known.facts.alphabet.labels == told["labels"]
    assert known.mixture.rows == told["rows"]
    assert known.mixture.bits == pytest.approx(told["bits"], abs=1e-9)
    forecast = seqmix.forecast(None, 2, state=known)
    assert [step.time for step in forecast.steps] == told["times"]
    assert forecast.steps[0].probabilities == pytest.approx(told["probabilities"], abs=1e-9)


@pytest.fixture(scope="module")
def file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("state") / "line.state"
    in_pieces(clocked(30), [], path)
    return path


@pytest.fixture
def damage(file: Path, tmp_path: Path) -> Iterator[Callable[[bytes], str]]:
    def told(data: bytes) -> str:
        (tmp_path / "damaged").write_bytes(data)
        with pytest.raises(StateError) as caught:
            load(tmp_path / "damaged")
        assert str(caught.value).startswith(f"{tmp_path / 'damaged'}: ")
        return str(caught.value).split(": ", 1)[1]

    yield told


def test_flips_and_cuts_are_refused(file: Path, damage: Callable[[bytes], str]) -> None:
    data, rng = file.read_bytes(), random.Random(1)
    bits = [*range(160), *rng.sample(range(8 * len(data)), 300)]
    for bit in bits:
        flipped = bytearray(data)
        flipped[bit // 8] ^= 1 << bit % 8
        damage(bytes(flipped))
    for size in [*range(80), *rng.sample(range(len(data)), 200), len(data) - 1]:
        damage(data[:size])
    damage(data + b"\0")


def test_what_is_said_of_a_file_that_is_none(file: Path, damage: Callable[[bytes], str]) -> None:
    data = file.read_bytes()
    none = "no state file of seqmix; 'seqmix learn LOG --into FILE' makes one"
    assert damage(b"") == damage(b"time,state\n") == none
    assert damage(data[:5]) == damage(data[:-1]) == "damaged or cut short; take a copy, or learn the log anew"
    newer = "a state of format 2, and this seqmix reads format 1; take the seqmix that wrote it, or learn the log anew"
    assert damage(data[:8] + b"\2" + data[9:]) == newer
    with pytest.raises(StateError, match="nowhere: cannot be opened: No such file or directory"):
        load("nowhere")


def forged(header: dict[str, Any], arrays: state.Arrays, path: Path) -> bytes:
    state.write(str(path), {key: value for key, value in header.items() if key != "arrays"}, arrays)
    return path.read_bytes()


def test_a_whole_file_that_does_not_fit_is_refused(file: Path, damage: Callable[[bytes], str], tmp_path: Path) -> None:
    header, arrays = state.read(str(file))
    path = tmp_path / "forged"
    assert loaded(file).mixture.rows == header["rows"]
    wrong: list[tuple[dict[str, Any], state.Arrays]] = [
        (header | {"rows": 7}, arrays),
        (header | {"settled": True}, arrays),
        (header | {"log": {}}, arrays),
        (header | {"log": header["log"] | {"kind": "tea"}}, arrays),
        (header | {"asked": header["asked"] | {"models": ["nobody"]}}, arrays),
        ({key: value for key, value in header.items() if key != "last"}, arrays),
        (header | {"more": 1}, arrays),
        (header, arrays | {"labels": arrays["labels"][:3]}),
        (header, arrays | {"labels": arrays["labels"] + np.uint8(100)}),
        (header, arrays | {"ends": arrays["ends"][:-1]}),
        (header, arrays | {"held": arrays["held"] + np.int32(1)}),
        (header, arrays | {"held": arrays["held"].astype(np.float64)}),
        (header, {key: value for key, value in arrays.items() if key != "ends"}),
    ]
    for head, held in wrong:
        assert damage(forged(head, held, path)).startswith("not a state that this seqmix can go on from (")
    body = file.read_bytes()[:-32]
    lying = body.replace(b'["held", "i4", [30]]', b'["held", "i4", [90]]')
    assert lying != body
    assert "end too soon" in damage(lying + blake2b(lying, digest_size=32).digest())


def test_one_writer_at_a_time(file: Path) -> None:
    before = file.read_bytes()
    with state.lock(str(file)):
        with pytest.raises(StateError, match="another seqmix is learning into it"):
            in_pieces(clocked(5), [], file)
        assert loaded(file).mixture.rows  # readers do not wait
    assert [path.name for path in file.parent.iterdir()] == [file.name]
    assert file.read_bytes() == before


def test_a_file_keeps_its_place_and_its_rights(tmp_path: Path) -> None:
    real, link = tmp_path / "real", tmp_path / "link"
    in_pieces(clocked(5), [], real)
    real.chmod(0o640)
    link.symlink_to(real)
    in_pieces(clocked(9)[7:], [], link)
    assert link.is_symlink()
    assert real.stat().st_mode & 0o777 == 0o640
    assert loaded(real).mixture.present == 8
    with pytest.raises(SeqmixError, match=r"cannot write .*: No such file or directory"):
        in_pieces(clocked(5), [], tmp_path / "none" / "state")
