"""States of a feature that several steps of one forecast share are computed once.

Inside ``remembering()`` a method marked ``@once`` keeps its result for each feature, array of draws and array of
moments; outside it is called as it stands. Only read-only arrays are remembered by (they cannot change meanwhile), and
everything is forgotten at the end. Each thread remembers for itself.
"""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from functools import wraps
from typing import Any, Concatenate, ParamSpec, TypeVar

from planner.records import Floats

_Self = TypeVar("_Self")
_More = ParamSpec("_More")
_Result = TypeVar("_Result")
_LOCAL = threading.local()


@contextmanager
def remembering() -> Iterator[None]:
    """Remember the results of ``@once`` methods in this thread until the end of the block."""
    before = getattr(_LOCAL, "store", None)
    _LOCAL.store = {}
    try:
        yield
    finally:
        _LOCAL.store = before


def remember(method: Any, owner: Any, theta: Floats, mjd: Floats, result: Any) -> None:
    """Put a result where ``@once`` looks for it; does nothing outside ``remembering()``."""
    store: dict[Any, Any] | None = getattr(_LOCAL, "store", None)
    if store is not None:
        store[(method.__qualname__, id(owner), id(theta), id(mjd), (), ())] = (result, owner, theta, mjd)


def once(
    method: Callable[Concatenate[_Self, Floats, Floats, _More], _Result],
) -> Callable[Concatenate[_Self, Floats, Floats, _More], _Result]:
    """Mark a method (self, theta, mjd, ...) of a frozen record whose results must not be changed in place."""

    @wraps(method)
    def inner(self: _Self, theta: Floats, mjd: Floats, *args: _More.args, **kwargs: _More.kwargs) -> _Result:
        store: dict[Any, Any] | None = getattr(_LOCAL, "store", None)
        if store is None or theta.flags.writeable or mjd.flags.writeable:
            return method(self, theta, mjd, *args, **kwargs)
        key = (method.__qualname__, id(self), id(theta), id(mjd), args, tuple(sorted(kwargs.items())))
        if key not in store:
            # the arrays stay alive with the result, so that their identities cannot be taken by others
            store[key] = (method(self, theta, mjd, *args, **kwargs), self, theta, mjd)
        result: _Result = store[key][0]
        return result

    return inner
