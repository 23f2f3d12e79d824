"""What the kernels need of the `cython` module when Cython is not installed: names that do nothing."""

from __future__ import annotations

from typing import Any

compiled = False


class _Type:
    """A C type: callable and subscriptable, so that annotations and casts can be evaluated."""

    def __getitem__(self, _: Any) -> _Type:
        return self


class _NoGil:
    """`with nogil:` and `@nogil`."""

    def __enter__(self) -> None:
        return None

    def __exit__(self, *_: object) -> None:
        return None

    def __call__(self, function: Any) -> Any:
        return function


nogil = _NoGil()
void = int = bint = uchar = ushort = longlong = ulonglong = float = double = Py_ssize_t = _Type()


def cfunc(function: Any) -> Any:
    return function


inline = cfunc


def exceptval(*_: Any, **__: Any) -> Any:
    return cfunc


def cast(_: Any, value: Any) -> Any:
    return value


def declare(_: Any, value: Any = None) -> Any:
    return value
