"""Incremental parsing against the published example and against a parse in plain Python."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from seqmix.models import lz78
from seqmix.models.history import History
from seqmix.series.rows import Rows


def phrases(codes: list[int]) -> list[tuple[int, ...]]:
    """The phrases of the tree that the library grows, in the order in which they were added."""
    setting = lz78.Phrases()
    rows = np.array(codes, dtype=np.int32)
    past = History(1).ahead(rows, None)
    setting.learn(past, rows, np.full(len(rows), -1, dtype=np.int32), np.zeros((1, 1)))
    parents = {int(child): (int(node), int(state)) for node, state, child in setting.edges if child}
    found = []
    for node in range(1, int(setting.counters[1])):
        phrase: tuple[int, ...] = ()
        while node:
            node, state = parents[node]
            phrase = (state, *phrase)
        found.append(phrase)
    return found


def parsed(codes: list[int]) -> list[tuple[int, ...]]:
    """Ziv & Lempel 1978: each phrase is the shortest one not met before."""
    found: list[tuple[int, ...]] = []
    met = {()}
    phrase: tuple[int, ...] = ()
    for code in codes:
        phrase = (*phrase, code)
        if phrase not in met:
            met.add(phrase)
            found.append(phrase)
            phrase = ()
    return found


# Cover & Thomas, Elements of Information Theory, the chapter on universal coding, from memory.
def test_published_example() -> None:
    first_seen = {"1": 0, "0": 1}
    found = phrases([first_seen[char] for char in "1011010100010"])
    assert ["".join("10"[code] for code in phrase) for phrase in found] == ["1", "0", "11", "01", "010", "00", "10"]


@given(st.lists(st.integers(0, 3), min_size=1, max_size=200))
@settings(max_examples=60, deadline=None)
def test_parse_in_plain_python(labels: list[int]) -> None:
    numbers: dict[int, int] = {}
    codes = [numbers.setdefault(label, len(numbers)) for label in labels]
    assert phrases(codes) == parsed(codes)


def test_parse_goes_on_when_the_tree_grows() -> None:
    codes = np.random.default_rng(8).integers(0, 5, 20_000).tolist()
    codes[:5] = range(5)
    expected = parsed(codes)
    assert len(expected) > 3000
    assert phrases(codes) == expected


def test_masses_add_to_one_when_no_phrase_can_be_added(monkeypatch: pytest.MonkeyPatch) -> None:
    """The law at every node of a full tree is one: what leaves for no known phrase counts for nobody."""
    monkeypatch.setattr(lz78, "_MOST", 512)
    codes = np.random.default_rng(9).integers(0, 5, 6000).astype(np.int32)
    codes[:5] = range(5)
    model = lz78.LZ78()
    for at in range(0, len(codes), 50):
        law = model.predict()
        assert law.masses.sum() + law.unseen == pytest.approx(1, abs=1e-12)
        model.absorb(Rows(codes[at : at + 50], None, at))
