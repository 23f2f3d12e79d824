"""The compiled loops, each in a file `*_cy.py` that Python can also run as it stands.

SEQMIX_KERNELS = compiled | interpreted forces one way; without it the compiled module is taken where the
install could build it. Both give the same bits; interpreted is some hundred times slower.
"""

from __future__ import annotations

import importlib
import importlib.util
import os
import sys
from collections.abc import Callable
from types import ModuleType
from typing import Any

from seqmix.errors import KernelError

view: Callable[[Any], memoryview] = memoryview
"""How arrays are handed to a kernel: interpreted, a memoryview gives plain Python numbers, and quickly."""

NAMES = ("contexts_cy", "numbers_cy", "repeats_cy", "weights_cy")
_CHOICES = ("compiled", "interpreted")


def _interpreted(name: str) -> ModuleType:
    """The kernel `name` from its source, even where a compiled one stands beside it."""
    source = os.path.join(os.path.dirname(__file__), f"{name}.py")
    spec = importlib.util.spec_from_file_location(f"{__name__}.{name}", source)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def _load() -> tuple[str, dict[str, ModuleType]]:
    asked = os.environ.get("SEQMIX_KERNELS", "")
    if asked and asked not in _CHOICES:
        raise KernelError(f"SEQMIX_KERNELS is {asked!r}; it may be {' or '.join(_CHOICES)}")
    if asked != "interpreted":
        loaded = {name: importlib.import_module(f"{__name__}.{name}") for name in NAMES}
        if all(module.is_compiled() for module in loaded.values()):
            return "compiled", loaded
        if asked == "compiled":
            raise KernelError(
                "SEQMIX_KERNELS asks for compiled kernels, but they are not built; "
                "install seqmix where there is a C compiler"
            )
        print(
            "seqmix: kernels run interpreted (slow); install with a C compiler for the compiled ones",
            file=sys.stderr,
        )
    return "interpreted", {name: _interpreted(name) for name in NAMES}


MODE, _kernels = _load()
contexts = _kernels["contexts_cy"]
numbers = _kernels["numbers_cy"]
repeats = _kernels["repeats_cy"]
weights = _kernels["weights_cy"]
