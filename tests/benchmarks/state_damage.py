"""State files against damage and sudden ends, by hand: python tests/benchmarks/state_damage.py [TRIES [KILLS]]

Flips a bit or cuts the file so many times (10,000): each must be refused. Kills a process that saves after every row
so many times (500): what lies there must be the state after one of the rows, to the last byte.
"""

from __future__ import annotations

import os
import random
import signal
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

from seqmix.errors import StateError
from seqmix.learned import Learned, load
from seqmix.learning import learn
from seqmix.state import lock


def row(number: int) -> str:
    return ("fill", "cap", "label", "pack")[number * number // 7 % 4]


def go_on(known: Learned, path: Path) -> None:
    """Learn one row more, and save."""
    code = known.facts.alphabet.encode(row(known.mixture.rows))
    for rows in known.push((np.array([code], dtype=np.int32), None)):
        known.mixture.absorb(rows)
    known.save(path)


def damage(path: Path, tries: int, rng: random.Random) -> None:
    data = path.read_bytes()
    copy = path.with_suffix(".damaged")
    taken = 0
    for _ in range(tries):
        bad = bytearray(data)
        if rng.random() < 0.5:
            at = rng.randrange(8 * len(data))
            bad[at // 8] ^= 1 << at % 8
        else:
            del bad[rng.randrange(len(data)) :]
        copy.write_bytes(bad)
        try:
            load(copy)
            taken += 1
        except StateError:
            pass
    print(f"{tries} flips and cuts of a file of {len(data)} bytes: {taken} taken for a state")


def kills(path: Path, times: int, rng: random.Random) -> None:
    mirror, twin = load(path), path.with_suffix(".twin")
    mirror.save(twin)
    before, same, midway = mirror.mixture.rows, 0, 0
    for _ in range(times):
        child = os.fork()
        if child == 0:
            with lock(str(path)):
                known = load(path)
                while True:
                    go_on(known, path)
        time.sleep(rng.uniform(0.0, 0.06))
        os.kill(child, signal.SIGKILL)
        os.waitpid(child, 0)
        midway += path.with_name(f".{path.name}.part").exists()
        rows = load(path).mixture.rows
        while mirror.mixture.rows < rows:
            go_on(mirror, twin)
        same += path.read_bytes() == twin.read_bytes()
    print(f"{times} kills, {midway} of them while a file was being written; rows saved: {mirror.mixture.rows - before}")
    print(f"the state was that of one of the rows, to the last byte: {same} times")
    learn([row(mirror.mixture.rows)], into=path)
    print(f"left beside it after one more save: {sorted({p.name for p in path.parent.iterdir()} - {path.name})}")


def main() -> None:
    tries, times = (int(argument) for argument in (*sys.argv[1:], "10000", "500")[:2])
    rng = random.Random(7)
    with tempfile.TemporaryDirectory() as place:
        path = Path(place, "line.state")
        learn([row(number) for number in range(4200)], into=path, models=["memoryless", "match"])
        damage(path, tries, rng)
        path.with_suffix(".damaged").unlink()
        kills(path, times, rng)


if __name__ == "__main__":
    main()
