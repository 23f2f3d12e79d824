"""The loss that `score` prints, against scikit-learn's log loss of the laws that were printed before each row."""

from __future__ import annotations

import csv
import subprocess
import sys

import numpy as np
import pytest
from sklearn.metrics import brier_score_loss, log_loss

import seqmix
from seqmix.mixture.mixture import Mixture
from seqmix.models.protocol import Ask

LEARNED, SCORED = 300, 100


def log(seed: int) -> list[str]:
    """A log with habits and noise; the state "late" comes first among the scored rows."""
    rng = np.random.default_rng(seed)
    turns = [t if rng.random() < 0.8 else int(rng.integers(4)) for t in range(400)]
    values = [["fill", "cap", "label", "jam"][turn % 4] for turn in turns]
    return [*values[:350], "late", *values[351:]]


def printed_laws(values: list[str]) -> tuple[np.ndarray, np.ndarray]:
    """The law before each scored row, (rows, states + 1), and the column that came; the unseen stands last."""
    numbers: dict[str, int] = {}
    codes = [numbers.setdefault(value, len(numbers)) for value in values]
    laws, came = np.zeros((SCORED, len(numbers) + 1)), np.empty(SCORED, dtype=int)
    mixture = Mixture()
    mixture.absorb(codes[:LEARNED])
    for row in range(SCORED):
        law = mixture.predict()
        mixture.absorb(codes[LEARNED + row : LEARNED + row + 1])
        laws[row, : len(law.masses)], laws[row, -1] = law.masses, law.unseen
        code = codes[LEARNED + row]
        came[row] = code if code < len(law.masses) else len(numbers)
    return laws, came


def test_sum_and_every_row() -> None:
    values = log(1)
    laws, came = printed_laws(values)
    columns = np.arange(laws.shape[1])
    each: list[float] = []
    score = seqmix.score(values, last=SCORED, on_row=lambda rows, bits: each.extend(bits.tolist()))
    expected = [log_loss([k], law[None, :], labels=columns) / np.log(2) for k, law in zip(came, laws, strict=True)]
    np.testing.assert_allclose(each, expected, rtol=1e-9)
    assert score.bits == pytest.approx(log_loss(came, laws, labels=columns, normalize=False) / np.log(2), rel=1e-9)
    assert score.bits_per_row == pytest.approx(log_loss(came, laws, labels=columns) / np.log(2), rel=1e-9)


def test_brier_and_accuracy() -> None:
    values = log(2)
    laws, came = printed_laws(values)
    score = seqmix.score(values, last=SCORED)
    # summed over the columns, one against the rest each, as scikit-learn knows it for two outcomes
    brier = sum(brier_score_loss(came == k, laws[:, k], pos_label=True) for k in range(laws.shape[1]))
    assert score.brier == pytest.approx(brier, rel=1e-9)
    assert score.accuracy == pytest.approx((laws.argmax(axis=1) == came).mean())


def test_rows_printed_by_the_command() -> None:
    values = log(3)
    laws, came = printed_laws(values)
    done = subprocess.run(
        [sys.executable, "-m", "seqmix", "score", "-", "--last", str(SCORED), "--per-row", "--format", "csv"],
        input="".join(value + "\n" for value in values), capture_output=True, text=True, check=True, timeout=120,
    )  # fmt: skip
    printed = list(csv.DictReader(done.stdout.splitlines()))
    assert [row["value"] for row in printed] == values[-SCORED:]
    total = log_loss(came, laws, labels=np.arange(laws.shape[1]), normalize=False) / np.log(2)
    assert sum(float(row["bits"]) for row in printed) == pytest.approx(total, rel=1e-9)


def test_laws_asked_for_in_bulk_are_the_printed_ones() -> None:
    values = log(4)
    laws, _ = printed_laws(values)
    numbers: dict[str, int] = {}
    codes = np.array([numbers.setdefault(value, len(numbers)) for value in values], dtype=np.int32)
    ask = Ask.of(len(codes), np.arange(LEARNED, len(codes)), len(numbers))
    Mixture().absorb(codes, ask)
    np.testing.assert_allclose(ask.laws, laws, rtol=1e-9, atol=1e-12)
