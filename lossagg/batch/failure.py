"""What stopped a run, in words for the user and as an exit code."""

from __future__ import annotations

import os
from dataclasses import dataclass

from lossagg.errors import LossaggError

DEBUG_VARIABLE = "LOSSAGG_DEBUG"


@dataclass(frozen=True)
class Failure:
    """Why a run stopped.

    Attributes:
        what: what is wrong.
        exit_code: 2 for input and usage, 3 for the machine, an interruption or a fault of lossagg.
        where, seen, remedy: the place, the value seen and what to do, where they are known.
    """

    what: str
    exit_code: int
    where: str | None = None
    seen: str | None = None
    remedy: str | None = None

    def lines(self) -> list[str]:
        """The failure over several lines, for a terminal."""
        parts = (("where", self.where), ("seen", self.seen), ("do", self.remedy))
        return [f"error: {self.what}", *(f"  {name}: {text}" for name, text in parts if text)]

    def sentence(self) -> str:
        """The failure in one line, for a table."""
        text = self.what
        if self.where:
            text += f", in {self.where}"
        if self.seen:
            text += f"; seen: {self.seen}"
        return f"{text}. {self.remedy or ''}".strip()


def debugging() -> bool:
    """True when the environment asks for tracebacks of unexpected errors."""
    return bool(os.environ.get(DEBUG_VARIABLE))


def explain(error: BaseException) -> Failure:
    """The failure behind an exception; an unexpected one is named, and how to see more of it."""
    if isinstance(error, LossaggError):
        seen = None if error.value is None else repr(error.value)
        return Failure(error.what, error.exit_code, error.where, seen, error.remedy)
    if isinstance(error, KeyboardInterrupt):
        return Failure("interrupted", 3, remedy="Nothing half-written was left; start the command again.")
    if isinstance(error, MemoryError):
        return Failure(
            "the machine ran out of memory",
            3,
            remedy="Ask for fewer years or workers, or use a larger machine.",
        )
    if isinstance(error, OSError):
        place = None if error.filename is None else f"file {error.filename}"
        return Failure(
            error.strerror or type(error).__name__,
            3,
            place,
            remedy="Check the file, its permissions and the disk.",
        )
    return Failure(
        f"unexpected {type(error).__name__}: {error}",
        3,
        remedy=f"This is a fault of lossagg, not of the input. Set {DEBUG_VARIABLE}=1 to see where it lies.",
    )
