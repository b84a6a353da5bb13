"""What an exact engine takes: known roughly before the work, and said where it is not enough.

The estimate rests on the coarse look at the distribution that every lattice is chosen from, which takes a
hundredth of a second.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.engines.quantiles import LEVELS, Quantiles
from lossagg.errors import EngineError, LossaggWarning


@dataclass(frozen=True, kw_only=True)
class Resources:
    """What one annual loss is expected to take, before the work.

    Attributes:
        engine: the engine's name.
        points: number of lattice points of the first pass.
        step: their distance, in money.
        width: about how wide the bracket of VaR 99.5 % or, if wider, half that of VaR 99.9 % will be,
            relative to it; 0 where every payment lies on a lattice point.
        memory: most memory at one time, in bytes.
        seconds: time of the first pass, within a factor of three or so on an ordinary processor. A second
            pass follows where the first falls short of the accuracy.
    """

    engine: str
    points: int
    step: float
    width: float
    memory: float
    seconds: float

    def __str__(self) -> str:
        return (
            f"about {self.points:,} lattice points of step {self.step:.4g}, {self.memory / 1e6:,.0f} MB of "
            f"memory and {self.seconds:.2g} s for a bracket about {self.width:.2g} wide"
        )


def expected_width(quantiles: Quantiles, step: float) -> float:
    """Relative width of the bracket to be expected from a step; 0 where nothing is rounded."""
    return float(step / quantiles.step_for(1.0, limited=True))


class BracketWarning(LossaggWarning):
    """The bracket is wider than it is by default, because the lattice may not grow further.

    Attributes:
        level: the level at which it is widest, against what was asked.
        asked: relative width asked for at this level.
        width: relative width reached.
        points: number of lattice points used.
        step: lattice step used.
    """

    def __init__(self, level: float, asked: float, width: float, points: int, step: float, most: int) -> None:
        self.level, self.asked, self.width, self.points, self.step = level, asked, width, points, step
        wide = f"is {width:.2%} wide" if np.isfinite(width) else "has no upper end"
        super().__init__(
            f"The bracket of the value at risk at {100 * level:g} % {wide}, {asked:.2%} was "
            f"asked for; the lattice has {points:,} points of step {step:.6g}, the most allowed is "
            f"{most:,}. The value itself is far more accurate than its guaranteed bracket."
        )


class OutOfReachError(EngineError):
    """An accuracy was asked for that the lattice allowed does not give.

    Attributes:
        level: level of the value at risk whose bracket is too wide.
        asked: relative width asked for at this level.
        width: relative width reached, or expected where the refusal comes before the work.
        needed: about how many lattice points it would take.
    """

    def __init__(
        self, *, level: float, asked: float, width: float, needed: float, allowed: str, foreseen: bool
    ) -> None:
        self.level, self.asked, self.width, self.needed = level, asked, width, needed
        reached = f"about {_percent(width)} is" if foreseen else f"{_percent(width)} is what is"
        factor = dict(LEVELS)[level]
        wider = _rounded_up(width / factor)
        instead = f"Ask for accuracy={wider:g} or more, or leave" if wider < 1 else "Leave"
        super().__init__(
            f"the bracket of the value at risk at {100 * level:g} % cannot be had as narrow as asked: "
            f"{_percent(asked)} takes about {needed:,.0f} lattice points, and {allowed}; "
            f"{reached} reached with them",
            value=asked / factor,
            remedy=f"{instead} accuracy out: the width reached is then stated with the figure.",
        )


def _percent(width: float) -> str:
    return f"{100.0 * width:.2g} %" if np.isfinite(width) else "no upper bound"


def _rounded_up(width: float) -> float:
    """To one digit, upwards; `inf` stays."""
    if not np.isfinite(width) or width <= 0:
        return np.inf
    unit = 10.0 ** np.floor(np.log10(width))
    return float(np.ceil(width / unit * (1.0 - 1e-9)) * unit)
