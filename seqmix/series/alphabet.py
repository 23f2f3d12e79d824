"""The alphabet of a log: which label has which code; and how the text of a cell becomes a code."""

from __future__ import annotations

from collections.abc import Iterable

from ..errors import DataError
from .kinds import is_missing
from .rows import MISSING

MAX_STATES = 1 << 20
"""More different states than this are refused: such a column names rows, not states."""


class Alphabet:
    """Labels and their codes, numbered in order of first appearance.

    labels: the label of each code.
    fixed: True for bytes, where all 256 labels are there from the start and nothing is ever unseen.
    """

    def __init__(self, labels: Iterable[str] = (), fixed: bool = False) -> None:
        self.labels = list(labels)
        self.fixed = fixed
        self._codes = {label: code for code, label in enumerate(self.labels)}

    @classmethod
    def for_bytes(cls) -> Alphabet:
        """The 256 bytes: printable ASCII as it is; backslash and the others as escapes (`\\n`, `\\x00`)."""
        return cls((repr(bytes([byte]))[2:-1] for byte in range(256)), fixed=True)

    def __len__(self) -> int:
        return len(self.labels)

    def code(self, label: str) -> int | None:
        """The code of `label`, None if it was never seen."""
        return self._codes.get(label)

    def encode(self, label: str) -> int:
        """The code of `label`, which is added when new, unless the alphabet is fixed (KeyError)."""
        code = self._codes.get(label)
        if code is None:
            if self.fixed:
                raise KeyError(label)
            code = self._codes[label] = len(self.labels)
            self.labels.append(label)
        return code

    def forget(self, size: int) -> None:
        """Keep the first `size` labels only: those after them were read and then refused."""
        for label in self.labels[size:]:
            del self._codes[label]
        del self.labels[size:]


class Codes(dict[str, int]):
    """The code of every cell text met so far: a look-up that learns, so that each text is examined once.

    strip: blanks around a text do not belong to its label. Lone surrogates, which JSON can smuggle in and no
    file can hold, become visible escapes.
    """

    def __init__(self, alphabet: Alphabet, name: str, strip: bool) -> None:
        super().__init__()
        self.alphabet = alphabet
        self.name = name
        self.strip = strip

    def __missing__(self, text: str) -> int:
        if is_missing(text):
            code = MISSING
        else:
            label = text.strip() if self.strip else str(text)
            code = self.alphabet.encode(label.encode("utf-8", "backslashreplace").decode("utf-8"))
            if len(self.alphabet) > MAX_STATES:
                raise DataError(
                    f"more than {MAX_STATES} different states; take another column, or read the log as bytes",
                    self.name,
                )
        self[text] = code
        return code
