"""The compressed size of a well-known file: that this is the file, and that bits a byte mean what they say."""

import bz2
from pathlib import Path

ALICE = Path(__file__).parents[1] / "data" / "alice29.txt"


# Canterbury corpus; recomputed.
def test_bzip2_of_alice29() -> None:
    assert len(bz2.compress(ALICE.read_bytes(), 9)) == 43_202
