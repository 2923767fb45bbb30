"""Loops that NumPy cannot express: run as plain Python on small input, compiled by Numba on large."""

import pickle
from collections.abc import Callable, Iterable
from functools import cache, wraps
from types import FunctionType
from typing import Any, ParamSpec, TypeVar, cast

import numpy as np

__all__ = ["compiled", "plain"]

P = ParamSpec("P")
R = TypeVar("R")

# Importing Numba costs as much as some 5,000 turns of an interpreted loop: below that the plain function is faster.
SMALL = 5_000
# What loading machine code from a truncated or foreign cache file raises.
_DAMAGED = (EOFError, OSError, RuntimeError, pickle.UnpicklingError, AttributeError, ImportError)


def compiled(kernel: Callable[P, R]) -> Callable[P, R]:
    """The same function, compiled when its arrays hold more than 5,000 entries in all.

    The kernel sees arrays, scalars and named tuples of arrays only, and calls nothing but NumPy and other kernels
    of its own file, so that both ways of running it give the same integers. Machine code is cached beside the
    package, or in the user's cache directory when the package is read-only, or not at all when neither can be
    written.
    """

    @wraps(kernel)
    def run(*args: P.args, **kwargs: P.kwargs) -> R:
        if _size(args) <= SMALL:
            return cast("R", plain(run)(*args, **kwargs))
        try:
            return cast("R", _machine(run)(*args, **kwargs))
        except _DAMAGED:  # the cached code did not load, so nothing has run yet
            return cast("R", _afresh(run)(*args, **kwargs))

    run.interpreted = kernel  # type: ignore[attr-defined]
    return run


def _size(args: Iterable[object]) -> int:
    size = 0
    for a in args:
        if isinstance(a, np.ndarray):
            size += a.size
        elif isinstance(a, tuple):
            size += _size(a)
    return size


@cache
def plain(run: Callable[..., Any]) -> Callable[..., Any]:
    """The kernel as written, never compiled, and so the kernels that it calls: also for arrays of Python objects."""
    return _linked(run, plain)


@cache
def _machine(run: Callable[..., Any]) -> Callable[..., Any]:
    """Return the kernel compiled, and the kernels that it calls with it."""
    import numba

    kernel = _linked(run, _machine)
    try:
        return cast("Callable[..., Any]", numba.njit(cache=True, nogil=True)(kernel))
    except RuntimeError:  # no place where the cache could be kept
        return cast("Callable[..., Any]", numba.njit(nogil=True)(kernel))


@cache
def _afresh(run: Callable[..., Any]) -> Callable[..., Any]:
    """Return the kernel compiled without a look at the cache."""
    import numba

    return cast("Callable[..., Any]", numba.njit(nogil=True)(_linked(run, _afresh)))


def _linked(run: Callable[..., Any], way: Callable[[Callable[..., Any]], Callable[..., Any]]) -> Callable[..., Any]:
    """Return the kernel with the kernels that it names replaced by what `way` makes of them."""
    kernel = cast("FunctionType", run.interpreted)  # type: ignore[attr-defined]
    names = [name for name in kernel.__code__.co_names if hasattr(kernel.__globals__.get(name), "interpreted")]
    if not names:
        return kernel
    scope = kernel.__globals__ | {name: way(kernel.__globals__[name]) for name in names}
    copy = FunctionType(kernel.__code__, scope, kernel.__name__, kernel.__defaults__, kernel.__closure__)
    copy.__qualname__, copy.__module__ = kernel.__qualname__, kernel.__module__
    return copy
