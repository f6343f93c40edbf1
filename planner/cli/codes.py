"""Exit codes: 0 done, 2 the input cannot be used, 3 no plan can be given, 130 interrupted."""

from __future__ import annotations

import functools
import sys
import warnings
from collections.abc import Callable
from typing import Any

import typer

from planner.errors import LightlagError, PlanningError

INPUT, PLANNING, INTERRUPTED = 2, 3, 130


def exit_code(error: BaseException) -> int:
    """Return the exit code of an error that a user can cause."""
    if isinstance(error, KeyboardInterrupt):
        return INTERRUPTED
    return PLANNING if isinstance(error, PlanningError) else INPUT


def words(error: BaseException) -> str:
    """Return what an error says, on one line a fact."""
    if isinstance(error, KeyboardInterrupt):
        return "interrupted; nothing half-written is left"
    if isinstance(error, OSError):
        return f"{error.filename or 'file'}: {error.strerror or error}"
    return str(error)


def _note(message: Warning | str, *_: Any, **__: Any) -> None:
    print(f"lightlag: note: {message}", file=sys.stderr)


def guarded(command: Callable[..., None]) -> Callable[..., None]:
    """Turn every error that a user can cause into its message on stderr and its exit code.

    Warnings become notes there: the file and line of our own code mean nothing to a user.
    """

    @functools.wraps(command)
    def inner(*args: Any, **kwargs: Any) -> None:
        try:
            with warnings.catch_warnings():
                warnings.showwarning = _note
                command(*args, **kwargs)
        except BrokenPipeError:
            raise  # whoever read our output has gone; there is no one to tell
        except (LightlagError, OSError, KeyboardInterrupt) as error:
            print(f"lightlag: {words(error)}", file=sys.stderr)
            raise typer.Exit(exit_code(error)) from None

    return inner
