"""The reference of the fit rows: truncated and censored lognormal losses, fitted by Nelder-Mead on NumPy.

Run as a script it fits ten million such losses by lossagg and leaves with exit code 1 when the memory this
took, beyond that of the losses themselves, exceeds eight times theirs.
"""

from __future__ import annotations

import sys
import tracemalloc

import numpy as np
from scipy import optimize, special

MU, SIGMA = 9.0, 1.3
LEVELS = [1e3, 2e3, 3e3, 4e3, 5e3]
LIMITS = [5e4, 1e5, 2e5, np.inf]
MOST_MEMORY = 8.0


def losses(count: int, *, own_thresholds: bool = False, seed: int = 1) -> tuple[np.ndarray, ...]:
    """Losses with a reporting threshold each, stopped at a policy limit: amounts, thresholds, marks."""
    random = np.random.default_rng(seed)
    parts: list[tuple[np.ndarray, ...]] = []
    while sum(len(part[0]) for part in parts) < count:
        ground_up = np.exp(MU + SIGMA * random.standard_normal(count))
        levels = (
            random.uniform(LEVELS[0], LEVELS[-1], count) if own_thresholds else random.choice(LEVELS, count)
        )
        limits = random.choice(LIMITS, count)
        seen = ground_up >= levels
        parts.append((np.minimum(ground_up, limits)[seen], levels[seen], (ground_up > limits)[seen]))
    return tuple(np.concatenate(column)[:count] for column in zip(*parts, strict=True))


def nelder_mead(amounts: np.ndarray, thresholds: np.ndarray, stopped: np.ndarray) -> tuple[float, float]:
    """mu and sigma by the simplex method of Nelder & Mead (1965) on the vectorised likelihood."""
    logs, starts = np.log(amounts), np.log(thresholds)
    constant = 0.5 * np.log(2 * np.pi)

    def minus_log_likelihood(point: np.ndarray) -> float:
        mu, sigma = point[0], np.exp(point[1])
        z = (logs - mu) / sigma
        each = np.where(stopped, special.log_ndtr(-z), -0.5 * z * z - point[1] - constant - logs)
        return -float(np.sum(each) - np.sum(special.log_ndtr((mu - starts) / sigma)))

    found = optimize.minimize(
        minus_log_likelihood,
        [float(np.mean(logs)), float(np.log(np.std(logs)))],
        method="Nelder-Mead",
        options={"xatol": 1e-8, "fatol": 1e-8},
    )
    return float(found.x[0]), float(np.exp(found.x[1]))


def main(count: int = 10_000_000) -> int:
    """Fit `count` losses and compare the peak of memory with what the losses take."""
    import lossagg

    parts = losses(count)
    lossagg.fit_severity(*(parts[0][:1000], "lognormal", parts[1][:1000], parts[2][:1000]))
    tracemalloc.start()  # NumPy reports its arrays to it
    fit = lossagg.fit_severity(parts[0], "lognormal", parts[1], parts[2])
    _, taken = tracemalloc.get_traced_memory()
    ratio = taken / sum(part.nbytes for part in parts)
    off = abs(fit.parameters["mu"] - MU) / fit.standard_errors["mu"]
    print(f"{count:,} losses: {ratio:.1f} times their memory, mu {off:.1f} standard errors from the truth")
    return int(ratio > MOST_MEMORY or off > 4)


if __name__ == "__main__":
    sys.exit(main())
