"""What the kernels need of the `cython` module when Cython is not installed: names that do nothing."""

from __future__ import annotations

import builtins
from collections.abc import Callable
from typing import Any

compiled = False


class _Type:
    """A C type: what a cast to it does to a number."""

    def __init__(self, convert: Callable[[Any], Any]) -> None:
        self.convert = convert


class _NoGil:
    """`with nogil:` and `@nogil`."""

    def __enter__(self) -> None:
        return None

    def __exit__(self, *_: object) -> None:
        return None

    def __call__(self, function: Any) -> Any:
        return function


nogil = _NoGil()
void = _Type(lambda value: value)
bint = uchar = ushort = longlong = ulonglong = Py_ssize_t = int = _Type(builtins.int)
float = double = _Type(builtins.float)


def cfunc(function: Any) -> Any:
    return function


inline = cfunc


def exceptval(*_: Any, **__: Any) -> Any:
    return cfunc


def cast(kind: _Type, value: Any) -> Any:
    return kind.convert(value)


def declare(_: Any, value: Any = None) -> Any:
    return value
