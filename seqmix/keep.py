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

    def state(self, copy: bool = True) -> dict[str, Any]:
        """All arrays and scalars. copy: whether the arrays are copies; the part goes on changing its own."""
        out: dict[str, Any] = {}
        for name in self.kept:
            value = getattr(self, name)
            out[name] = value.copy() if copy and isinstance(value, np.ndarray) else value
        for prefix, part in self.parts().items():
            out.update({f"{prefix}.{name}": value for name, value in part.state(copy).items()})
        return out

    def restore(self, state: dict[str, Any]) -> None:
        """Take over what `state()` gave.

        Raises KeyError for a name that is missing, ValueError for a value that cannot be the one of that name.
        """
        for name in self.kept:
            value, own = state[name], getattr(self, name)
            if None not in (_form(value), _form(own)) and _form(value) != _form(own):
                raise ValueError(f"{name} is {_form(value)}, not {_form(own)}")
            setattr(self, name, value.copy() if isinstance(value, np.ndarray) else value)
        for prefix, part in self.parts().items():
            start = prefix + "."
            part.restore({name[len(start) :]: v for name, v in state.items() if name.startswith(start)})


def _form(value: Any) -> str | None:
    """What stays the same of a value while it is learned; None where it may still become something."""
    if value is None:
        return None
    return f"{value.dtype} in {value.ndim} dimensions" if isinstance(value, np.ndarray) else "a single value"
