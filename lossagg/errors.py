"""Every exception and warning of lossagg, in one small tree.

An error says what is wrong, where (file, row, column or key), the value seen, and what to do. The
command line prints it and leaves with the error's exit code; no traceback reaches a user.
"""

from __future__ import annotations

_ABSENT = object()


def place(
    *,
    file: object = None,
    sheet: str | None = None,
    row: int | None = None,
    column: str | None = None,
    key: str | None = None,
) -> str:
    """Name a place in the user's input: file, sheet, row, column or key, whichever are known."""
    parts = [
        f"file {file}" if file is not None else "",
        f"sheet {sheet!r}" if sheet is not None else "",
        f"row {row}" if row is not None else "",
        f"column {column!r}" if column is not None else "",
        f"key {key!r}" if key is not None else "",
    ]
    return ", ".join(part for part in parts if part)


class LossaggError(Exception):
    """Base of every error lossagg raises on purpose.

    Args:
        what: what is wrong, in one clause, without a full stop.
        where: the place in the user's input, see `place`.
        value: the value seen.
        remedy: what to do about it, as a sentence.
    """

    exit_code = 2

    def __init__(
        self, what: str, *, where: str | None = None, value: object = _ABSENT, remedy: str | None = None
    ) -> None:
        self.what = what
        self.where = where
        self.value = None if value is _ABSENT else value
        self.remedy = remedy
        text = what
        if where:
            text += f", in {where}"
        if value is not _ABSENT:
            text += f"; seen: {value!r}"
        text += "."
        if remedy:
            text += f" {remedy}"
        super().__init__(text)


class InputError(LossaggError, ValueError):
    """An argument, a key of the portfolio file or a record that cannot be used as it is."""


class FitError(LossaggError):
    """A fit that did not converge or that the data cannot support; carries what was tried."""

    def __init__(self, what: str, *, tried: tuple[str, ...] = (), **parts: object) -> None:
        self.tried = tried
        super().__init__(what, **parts)  # type: ignore[arg-type]


class DoesNotExistError(LossaggError, ArithmeticError):
    """A measure asked for that is infinite or undefined for this model."""


class EngineError(LossaggError):
    """An engine asked for something outside its domain or beyond its resources."""


class EnvironmentFault(LossaggError):
    """The machine, not the input: disk, permissions, a lock, a missing optional package."""

    exit_code = 3


class LossaggWarning(UserWarning):
    """Base of every warning lossagg gives; its numbers are attributes."""
