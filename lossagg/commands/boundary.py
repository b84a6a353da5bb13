"""The edge between lossagg and its user: every failure becomes a message and an exit code."""

from __future__ import annotations

import functools
import os
import sys
from collections.abc import Callable
from typing import ParamSpec

import typer

Arguments = ParamSpec("Arguments")


def guarded(command: Callable[Arguments, int]) -> Callable[Arguments, None]:
    """A command whose return value is its exit code and whose exceptions never reach the user.

    Errors of lossagg are printed to stderr as what, where, value and remedy. An unexpected error is
    named without a traceback, unless the environment variable LOSSAGG_DEBUG is set.
    """

    @functools.wraps(command)
    def run(*args: Arguments.args, **kwargs: Arguments.kwargs) -> None:
        try:
            code = command(*args, **kwargs)
        except BrokenPipeError:
            _leave_closed_pipe()
            code = 0
        # The outermost boundary: whatever it is, the user gets words and not a traceback.
        except (Exception, KeyboardInterrupt) as error:  # noqa: BLE001
            code = _report(error)
        raise typer.Exit(code)

    run.__annotations__["return"] = None
    return run


def _report(error: BaseException) -> int:
    from lossagg.batch import explain
    from lossagg.batch.failure import debugging
    from lossagg.errors import LossaggError
    from lossagg.report.cells import clean

    failure = explain(error)
    for line in failure.lines():
        typer.echo(clean(line), err=True)
    if debugging() and not isinstance(error, (LossaggError, KeyboardInterrupt)):
        sys.excepthook(type(error), error, error.__traceback__)
    return failure.exit_code


def _leave_closed_pipe() -> None:
    """Whoever read the output has gone; keep Python from complaining when it flushes at the end."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
