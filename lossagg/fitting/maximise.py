"""Maximum of a log-likelihood in a few unconstrained coordinates, with a certificate or a refusal.

Newton's method on exact derivatives, made safe far from the maximum: where the information matrix is
not positive definite its eigenvalues are replaced by their size, a step is at most two units long,
and it is halved until the likelihood rises (Nocedal & Wright, Numerical Optimization, 2006, ch. 3).
A likelihood that rises for ever towards a limit law betrays itself at the end: its Newton step does not
shrink to nothing although its gradient does. That is why the certificate asks for both.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.fitting.jets import Jet, variables

_LONGEST_STEP = 2.0
_STEPS = 120
_HALVINGS = 40
_FARTHEST = 60.0  # coordinates are logarithms or of order one: beyond, a parameter has run away
_END_GAME = 1e-6  # length of a step in coordinates
_SETTLED = 1e-10  # a step this short ends at the maximum: Newton's method squares what is left
_STEP_TOLERANCE = 1e-6  # in coordinates
_DISTANCE_TOLERANCE = 1e-5  # in standard errors
_SMALLEST_CURVATURE = 1e-10  # of the information scaled to unit diagonal: below, it is rounding

Objective = Callable[[tuple[Jet, ...]], Jet]


@dataclass(frozen=True, eq=False)
class Maximum:
    """Where the climb ended.

    Attributes:
        point: coordinates, shape (p,).
        value: log-likelihood there.
        covariance: inverse of the observed information in these coordinates, shape (p, p).
        distance: sqrt(g' C g), the distance left to the maximum in standard errors.
        failure: why this is no certified maximum; empty when it is one.
    """

    point: FloatArray
    value: float
    covariance: FloatArray
    distance: float
    failure: str


@dataclass(frozen=True, eq=False)
class _Place:
    point: FloatArray
    value: float
    gradient: FloatArray
    hessian: FloatArray

    @property
    def usable(self) -> bool:
        finite = np.isfinite(self.gradient).all() and np.isfinite(self.hessian).all()
        return bool(np.isfinite(self.value) and finite)


def evaluate(objective: Objective, point: FloatArray) -> float:
    """The log-likelihood at one point; `-inf` where it is not defined."""
    return _look(objective, point).value


def maximise(
    objective: Objective, start: FloatArray, runaway: Callable[[FloatArray], str] | None = None
) -> Maximum:
    """Climb from a starting point to the nearest maximum, and certify it or say why not.

    Args:
        objective: the log-likelihood as a jet of its coordinates.
        start: coordinates to start from, shape (p,).
        runaway: says of coordinates why a climb that reached them may stop; empty where it may not.
    """
    place = _look(objective, start)
    if not place.usable:
        return _refused(place, "the likelihood is not defined at the start")
    for _ in range(_STEPS):
        step = _newton_step(place)
        if not np.max(np.abs(step)) > _SETTLED:  # taken unseen, certified from where it starts
            place = replace(place, point=place.point + step)
            break
        # So close to the end the likelihood itself no longer tells a better point: its slope does.
        end_game = np.max(np.abs(step)) < _END_GAME
        following = (_polish if end_game else _search)(objective, place, step)
        if following is None:
            break
        place = following
        if np.max(np.abs(place.point)) > _FARTHEST:
            return _refused(place, "a parameter ran towards its boundary")
        reason = runaway(place.point) if runaway else ""
        if reason:
            return _refused(place, reason)
    return _certified(place)


def _look(objective: Objective, point: FloatArray) -> _Place:
    with np.errstate(all="ignore"):  # outside its domain the likelihood is -inf, not an error
        jet = objective(variables(point))
    value = float(jet.value[0])
    return _Place(point, value if np.isfinite(value) else -np.inf, jet.gradient[:, 0], jet.hessian[:, :, 0])


@np.errstate(all="ignore")  # a flat direction overflows; the certificate refuses what comes of it
def _newton_step(place: _Place) -> FloatArray:
    spread = np.sqrt(np.abs(np.diag(place.hessian)))
    spread[spread == 0] = 1.0
    values, vectors = np.linalg.eigh(-place.hessian / np.outer(spread, spread))
    floor = 1e-10 * max(float(np.max(np.abs(values))), 1e-300)
    sizes = np.maximum(np.abs(values), floor)
    step = vectors @ ((vectors.T @ (place.gradient / spread)) / sizes) / spread
    longest = float(np.max(np.abs(step)))
    return np.asarray(step * min(1.0, _LONGEST_STEP / longest)) if 0 < longest < np.inf else 0 * place.point


def _polish(objective: Objective, place: _Place, step: FloatArray) -> _Place | None:
    trial = _look(objective, place.point + step)
    closer = trial.usable and np.max(np.abs(trial.gradient)) < np.max(np.abs(place.gradient))
    return trial if closer else None


def _search(objective: Objective, place: _Place, step: FloatArray) -> _Place | None:
    slope = float(place.gradient @ step)
    rounding = 4e-16 * abs(place.value)
    for _ in range(_HALVINGS):
        trial = _look(objective, place.point + step)
        if trial.usable and trial.value >= place.value + 1e-4 * slope - rounding:
            closer = np.max(np.abs(trial.gradient)) < np.max(np.abs(place.gradient))
            return trial if trial.value > place.value + rounding or closer else None
        step, slope = step / 2, slope / 2
    return None


def _certified(place: _Place) -> Maximum:
    spread = np.sqrt(np.maximum(np.diag(-place.hessian), 0))
    if (spread == 0).any():
        return _refused(place, "it is flat or rising in one direction")
    values, vectors = np.linalg.eigh(-place.hessian / np.outer(spread, spread))
    if values[0] < _SMALLEST_CURVATURE:
        return _refused(place, "its information matrix is not positive definite")
    covariance = (vectors / values) @ vectors.T / np.outer(spread, spread)
    step = covariance @ place.gradient
    distance = float(np.sqrt(max(float(place.gradient @ step), 0.0)))
    failure = ""
    if np.max(np.abs(step)) > _STEP_TOLERANCE:
        failure = "it rises without end while a parameter runs to the edge of its range"
    elif distance > _DISTANCE_TOLERANCE:
        failure = f"the climb stopped {distance:.2g} standard errors short of a maximum"
    return Maximum(place.point, place.value, covariance, distance, failure)


def _refused(place: _Place, why: str) -> Maximum:
    count = len(place.point)
    return Maximum(place.point, place.value, np.full((count, count), np.nan), np.inf, why)
