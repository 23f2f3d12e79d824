"""Two motes of a labelled sensor log: someone held hot water under them, which the labels tell (Suthaharan and others
2010, "Labelled data collection for anomaly detection in wireless sensor networks", from memory; tests/data/README.md).
"""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

import seqmix

LOG = Path(__file__).parents[1] / "data" / "sensor_multihop_labelled.csv"
AFTER = 40  # rows of the event that are read: it starts slowly


@pytest.mark.parametrize("column", ["humidity", "temperature"])
@pytest.mark.parametrize("mote", ["1", "3"])
def test_the_event_is_a_surprise_and_little_before_it_is(mote: str, column: str) -> None:
    with LOG.open(encoding="utf-8", newline="") as file:
        rows = [row for row in csv.DictReader(file) if row["mote_id"] == mote]
    start = next(at for at, row in enumerate(rows, 1) if row["label"] != "0")
    values = [float(row[column]) for row in rows[: start + AFTER]]
    found = seqmix.surprise(values, false_alarms="1/2000rows").events
    assert sum(event.end < start for event in found) <= 2
    assert any(event.end >= start for event in found)
