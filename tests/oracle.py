"""Slow and obvious twins of what lossagg computes. Nothing in here imports lossagg.

Distributions are dictionaries amount -> probability; with Fractions in, exact fractions come out.
"""

from __future__ import annotations

import itertools
import math


def convolve(left, right):
    """Probabilities of the sum of two independent whole numbers, by the double loop of the definition."""
    result = [0] * (len(left) + len(right) - 1)
    for i, p in enumerate(left):
        for j, q in enumerate(right):
            result[i + j] += p * q
    return result


def aggregate_on_lattice(counts, sizes):
    """P(S = 0), P(S = 1), ... for counts P(N = n) and sizes P(X = x): the sum of P(N = n) f^{n*}."""
    total = [0] * ((len(counts) - 1) * (len(sizes) - 1) + 1)
    power = [1]
    for probability in counts:
        for amount, share in enumerate(power):
            total[amount] += probability * share
        power = convolve(power, sizes)
    return total


def aggregate(counts, sizes):
    """The annual sum for counts P(N = n) and a dictionary of sizes, any amounts."""
    total, power = {}, {0: 1}
    for probability in counts:
        for amount, share in power.items():
            total[amount] = total.get(amount, 0) + probability * share
        power = add(power, sizes)
    return total


def add(left, right):
    """The sum of two independent amounts."""
    total = {}
    for a, p in left.items():
        for b, q in right.items():
            total[a + b] = total.get(a + b, 0) + p * q
    return total


def mapped(distribution, function):
    """The distribution of a function of the amount."""
    total = {}
    for amount, p in distribution.items():
        value = function(amount)
        total[value] = total.get(value, 0) + p
    return total


def every_year(counts, sizes):
    """(probability, losses) of every possible year, losses in every order."""
    for n, p in enumerate(counts):
        for losses in itertools.product(sizes.items(), repeat=n):
            yield p * math.prod(q for _, q in losses), [x for x, _ in losses]


def poisson(mean, most):
    """P(N = 0), ..., P(N = most)."""
    return [math.exp(n * math.log(mean) - mean - math.lgamma(n + 1)) for n in range(most + 1)]


def negative_binomial(mean, dispersion, most):
    """P(N = 0), ..., P(N = most), variance mean + dispersion * mean**2."""
    r, beta = 1 / dispersion, dispersion * mean
    return [
        math.exp(
            math.lgamma(n + r)
            - math.lgamma(r)
            - math.lgamma(n + 1)
            + n * math.log(beta / (1 + beta))
            - r * math.log1p(beta)
        )
        for n in range(most + 1)
    ]


def binomial(trials, probability):
    """P(N = 0), ..., P(N = trials)."""
    return [
        math.comb(trials, n) * probability**n * (1 - probability) ** (trials - n) for n in range(trials + 1)
    ]


def zero_modified(counts, at_zero):
    """The same counts with another probability of no loss, the others in proportion."""
    return [at_zero, *((1 - at_zero) * p / sum(counts[1:]) for p in counts[1:])]


def zero_inflated(counts, share):
    """A share of years in which nothing can happen."""
    return [share * (n == 0) + (1 - share) * p for n, p in enumerate(counts)]


def event_payment(loss, deductible=0, limit=math.inf, franchise=False):
    """What a cover pays of one event, before annual terms and share."""
    if loss <= deductible:
        return 0
    return min(loss if franchise else loss - deductible, limit)


def event_retained(loss, deductible=0, franchise=False):
    """What the deductible keeps of one event."""
    if franchise and loss > deductible:
        return 0
    return min(loss, deductible)


def year_payment(
    losses, *, annual_retention=0, annual_limit=math.inf, retained_cap=math.inf, share=1, **event
):
    """What a cover pays of a year: retention, excess over the retained cap, limit, then share."""
    paid = sum(event_payment(loss, **event) for loss in losses)
    kept = sum(
        event_retained(loss, event.get("deductible", 0), event.get("franchise", False)) for loss in losses
    )
    total = max(paid - annual_retention, 0) + max(kept - retained_cap, 0)
    return share * min(total, annual_limit)


def mean(distribution):
    """The mean."""
    return sum(amount * p for amount, p in distribution.items())


def sd(distribution):
    """The standard deviation."""
    centre = mean(distribution)
    return math.sqrt(sum((amount - centre) ** 2 * p for amount, p in distribution.items()))


def exceedance(distribution, x):
    """P(S > x)."""
    return sum(p for amount, p in distribution.items() if amount > x)


def stop_loss(distribution, x):
    """E[(S - x)+]."""
    return sum((amount - x) * p for amount, p in distribution.items() if amount > x)


def value_at_risk(distribution, level):
    """The smallest amount with P(S <= x) >= level, walking up through the sorted amounts."""
    total = 0
    for amount in sorted(distribution):
        total += distribution[amount]
        if total >= level:
            return amount
    return max(distribution)


def tail_value_at_risk(distribution, level):
    """The mean of the worst 1 - level of years, taken from the largest amount down."""
    wanted = 1 - level
    total, weight = 0, 0
    for amount in sorted(distribution, reverse=True):
        part = min(distribution[amount], wanted - weight)
        total += amount * part
        weight += part
        if weight >= wanted:
            break
    return total / wanted


def layer_cost(losses, low, high):
    """What the layer from `low` to `high` costs for a list of losses, loss by loss."""
    return sum(min(max(loss - low, 0), high - low) for loss in losses)
