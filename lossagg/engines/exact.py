"""What the exact engines have in common: covers as event payments and annual terms, and their brackets.

How a payment is put on a lattice and how payments are added up is each engine's own.
"""

from __future__ import annotations

import os
from abc import ABC, abstractmethod
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Cover, Schedule
from lossagg.engines.book import Book, Line, Subject, single_line
from lossagg.engines.bound import MOMENTS, LatticeBound
from lossagg.engines.compound import CompoundSum
from lossagg.engines.limited import LimitedMeans
from lossagg.engines.pair import PairPlan, pair_plan
from lossagg.engines.resources import Resources
from lossagg.engines.result import AnnualLoss, BookResult, TransformedAnnualLoss
from lossagg.engines.running import product_sum
from lossagg.engines.tied import annual_sum
from lossagg.errors import EngineError
from lossagg.families.base import CountLaw, SizeLaw


class ExactEngine(ABC):
    """An engine that computes the distribution of an annual sum, with a guaranteed bracket."""

    @property
    @abstractmethod
    def name(self) -> str:
        """The engine's name, as users write it."""

    @abstractmethod
    def solve(self, compound: CompoundSum) -> AnnualLoss:
        """The distribution of an annual sum of payments.

        Raises:
            EngineError: a count law outside the engine's domain, or a lattice beyond its resources.
        """

    @abstractmethod
    def expected(self, compound: CompoundSum) -> Resources:
        """What `solve` is expected to take.

        Raises:
            EngineError: as `solve`, where it is known before the work.
        """

    def resources(self, frequency: CountLaw, severity: SizeLaw, cover: Cover | None = None) -> Resources:
        """What `annual_loss` of the same will take: points, memory and time, before the work is done.

        Args:
            frequency: law of the number of losses in a year.
            severity: law of the size of one loss.
            cover: terms of a cover, or None.

        Returns:
            The first lattice, its memory and time, and about how wide the bracket will be.

        Raises:
            EngineError: as `solve`; and a retained cap, whose parts are not estimated beforehand.
        """
        book, subject = single_line(frequency, severity, cover)
        if pair_plan(book, subject) is not None:
            raise EngineError(
                "what a retained cap takes is not estimated before the work",
                remedy="Ask for the cover without it; with it the work is some tens of times as long.",
            )
        return self.expected(CompoundSum.of(book.lines, book.plan(subject).events))

    def solve_pair(self, lines: tuple[Line, ...], plan: PairPlan) -> AnnualLoss:
        """The distribution of a function of two annual sums, `plan.beyond` not yet applied.

        Raises:
            EngineError: an engine that follows one sum only, or a plan outside its domain.
        """
        raise EngineError(
            f"the {self.name} engine cannot follow two annual sums, as a retained cap needs",
            value=", ".join(sorted(plan.paid)),
            remedy="The fourier engine and the simulation compute it.",
        )

    def annual_loss(self, frequency: CountLaw, severity: SizeLaw, cover: Cover | None = None) -> AnnualLoss:
        """The annual loss of one line, or what a cover pays of it.

        Raises:
            EngineError: as `solve` and, for a retained cap, `solve_pair`.
        """
        book, subject = single_line(frequency, severity, cover)
        pair = pair_plan(book, subject)
        if pair is not None:
            return _paid(self.solve_pair(book.lines, pair), pair.beyond)
        plan = book.plan(subject)
        return _paid(self.solve(CompoundSum.of(book.lines, plan.events)), plan.annual)

    def book(self, book: Book) -> BookResult:
        """Every subject of a book; the reason in place of the result where the engine cannot do it.

        Subjects that add up the same event payments share one distribution.
        """
        losses: dict[Subject, AnnualLoss] = {}
        refused: dict[Subject, str] = {}
        tasks: dict[object, Callable[[], AnnualLoss]] = {}
        wanted: dict[Subject, tuple[object, Schedule]] = {}
        for subject in book.subjects:
            try:
                key, task, annual = self._task(book, subject)
            except EngineError as error:
                refused[subject] = str(error)
                continue
            tasks.setdefault(key, task)
            wanted[subject] = (key, annual)
        with ThreadPoolExecutor(max_workers=min(len(tasks), _cores()) or 1) as pool:
            solved = dict(zip(tasks, pool.map(_outcome, tasks.values()), strict=True))
        for subject, (key, annual) in wanted.items():
            base = solved[key]
            if isinstance(base, EngineError):
                refused[subject] = str(base)
            else:
                losses[subject] = _paid(base, annual)
        return BookResult({s: losses[s] for s in book.subjects if s in losses}, refused)

    def _task(self, book: Book, subject: Subject) -> tuple[object, Callable[[], AnnualLoss], Schedule]:
        """The annual sum behind a subject: what identifies it, how to solve it, and what is made of it."""
        pair = pair_plan(book, subject)
        if pair is not None and pair.single is None:
            two = pair
            return subject, lambda: self.solve_pair(book.independent_lines(two.paid), two), two.beyond
        plan = book.plan(subject) if pair is None or pair.single is None else pair.single
        events = plan.events
        compound = annual_sum(book, events)
        return frozenset(events.items()), lambda: self.solve(compound), plan.annual


def _outcome(task: Callable[[], AnnualLoss]) -> AnnualLoss | EngineError:
    try:
        return task()
    except EngineError as error:
        return error


def _cores() -> int:
    """Processors that this process may use; sums are solved side by side, none depends on another."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


@dataclass(frozen=True)
class Rounded:
    """A sum of rounded payments, and how well it is known.

    Args:
        least: lower bound of P(S > kh) of the rounded sum, non-increasing, shape (n,).
        most: upper bound of the same, shape (n,).
        inside: expected yearly sum of the rounded payments that lie on the lattice.
    """

    least: FloatArray
    most: FloatArray
    inside: float


def bracket(
    engine: str,
    compound: CompoundSum,
    step: float,
    down: Rounded,
    up: Rounded,
    limited: LimitedMeans | None = None,
) -> tuple[LatticeBound, LatticeBound]:
    """The two sides of the bracket, from the sums of payments rounded down and rounded up and, where they
    are known, from bounds of the limited means.

    What is left beyond the lattice is the mean of the rounded sum less the integral on the lattice. A
    payment beyond the lattice loses or gains less than one step by rounding.
    """
    points = len(down.least)
    top, last = step * points, step * (points - 1)
    beyond, above = compound.layer_cost(top, np.inf), float(compound.exceedances(np.array([top]))[0])
    low_mean = down.inside + top * above + max(beyond - step * above, 0.0)
    beyond, above = compound.layer_cost(last, np.inf), float(compound.exceedances(np.array([last]))[0])
    high_mean = up.inside + beyond + (last + step) * above
    means = (
        max(low_mean - step * float(down.most.sum()), 0.0),
        max(high_mean - step * float(up.least.sum()), 0.0),
    )
    least, most = down.least, up.most
    if limited is not None:
        low, high = limited.survival(compound.mean_count)
        least, most = np.maximum(least, low), np.minimum(most, high)
        if compound.mean < np.inf:
            off = MOMENTS * compound.mean
            below = compound.mean - off - float(limited.most[-1]) - step * float(most[-1])
            means = max(means[0], below), min(means[1], compound.mean + off - float(limited.least[-1]))
    if compound.variance == np.inf:
        squares = (np.inf, np.inf)
    else:
        odd = np.asarray(step**2 * (2.0 * np.arange(points) + 1.0), dtype=np.float64)
        squares = (
            max(compound.second_moment - product_sum(odd, most) - 2.0 * top * means[1], 0.0),
            max(compound.second_moment - product_sum(odd, least) - 2.0 * top * means[0], 0.0),
        )
    return (
        LatticeBound(engine, compound, False, step, least, means[0], squares[0]),
        LatticeBound(engine, compound, True, step, most, means[1], squares[1]),
    )


def _paid(base: AnnualLoss, annual: Schedule) -> AnnualLoss:
    return base if annual.is_identity else TransformedAnnualLoss(base, annual)
