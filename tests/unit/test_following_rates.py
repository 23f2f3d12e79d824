"""Rates of false alarms in time, while the cadence of a live log is still to be found out."""

import pytest

from seqmix.errors import OptionError
from seqmix.following import Follower, Reader
from seqmix.learned import Learned


def surprising(lines: list[str], false_alarms: str) -> list[int]:
    """Rows of a blank start that were surprising."""
    reader = Reader("line", Learned, tell=pytest.fail)
    follower, found = None, []
    for line in lines:
        for piece in reader.feed([line.encode()]):
            assert reader.known is not None
            follower = follower or Follower(reader.known, false_alarms)
            found += [told["row"] for told in follower.feed(piece) if told["surprise"]]
    return found


STATES = ["fill"] * 200 + ["jam"]


def test_a_rate_in_time_holds_once_the_cadence_has_shown() -> None:
    lines = [f"2026-03-02T{6 + i // 60:02}:{i % 60:02},{state}\n" for i, state in enumerate(STATES)]
    assert surprising(lines, "1/hour") == [201]  # a p-value of 1/400, at 1/60 a row
    assert surprising(lines, "1/60rows") == [201]
    assert surprising(lines, "1/day") == surprising(lines, "1/1440rows")


def test_a_rate_in_time_needs_times() -> None:
    with pytest.raises(OptionError, match="needs a log with regular times"):
        surprising([f"{state}\n" for state in STATES], "1/hour")
