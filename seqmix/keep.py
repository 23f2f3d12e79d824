"""State out and in: every stateful part names what it keeps, and its parts keep themselves.

A state is a flat dict from dotted names to numpy arrays and plain scalars: what a file, a pipe or another
process can carry.
"""

from __future__ import annotations

from typing import Any

import numpy as np


class Kept:
    """A part with state: `kept` names its arrays and scalars, `parts` what it is made of."""

    kept: tuple[str, ...] = ()

    def parts(self) -> dict[str, Kept]:
        return {}

    def state(self) -> dict[str, Any]:
        """Copies of all arrays, and the scalars."""
        out: dict[str, Any] = {}
        for name in self.kept:
            value = getattr(self, name)
            out[name] = value.copy() if isinstance(value, np.ndarray) else value
        for prefix, part in self.parts().items():
            out.update({f"{prefix}.{name}": value for name, value in part.state().items()})
        return out

    def restore(self, state: dict[str, Any]) -> None:
        """Take over what `state()` gave; a name that is missing is a KeyError."""
        for name in self.kept:
            value = state[name]
            setattr(self, name, value.copy() if isinstance(value, np.ndarray) else value)
        for prefix, part in self.parts().items():
            start = prefix + "."
            part.restore({name[len(start) :]: v for name, v in state.items() if name.startswith(start)})
