"""Exact first and second derivatives of a log-likelihood, carried along with its value.

A `Jet` holds a value with its gradient and Hessian in the few free parameters of a fit; sums,
products and functions of jets follow the rules of calculus, so a likelihood is written once and its
score and observed information come out exact to rounding, without step sizes (forward
differentiation of second order: Griewank & Walther, Evaluating Derivatives, 2008, ch. 13). The last
axis of every array runs over losses (length 1 for one number).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray


@dataclass(frozen=True, eq=False, slots=True)
class Jet:
    """A value of shape (m,), its gradient (p, m) and its Hessian (p, p, m) in p parameters."""

    value: FloatArray
    gradient: FloatArray
    hessian: FloatArray

    # Arrays on the left of an operator leave the work to the jet on the right.
    __array_ufunc__: ClassVar[None] = None

    def __add__(self, other: Jet | FloatArray | float) -> Jet:
        if isinstance(other, Jet):
            return Jet(self.value + other.value, self.gradient + other.gradient, self.hessian + other.hessian)
        return Jet(self.value + other, self.gradient, self.hessian)

    __radd__ = __add__

    def __neg__(self) -> Jet:
        return Jet(-self.value, -self.gradient, -self.hessian)

    def __sub__(self, other: Jet | FloatArray | float) -> Jet:
        return self + (-other)

    def __rsub__(self, other: FloatArray | float) -> Jet:
        return (-self) + other

    def __mul__(self, other: Jet | FloatArray | float) -> Jet:
        if not isinstance(other, Jet):
            return Jet(self.value * other, self.gradient * other, self.hessian * other)
        cross = _outer(self.gradient, other.gradient)
        return Jet(
            self.value * other.value,
            self.value * other.gradient + other.value * self.gradient,
            self.value * other.hessian + other.value * self.hessian + cross + np.swapaxes(cross, 0, 1),
        )

    __rmul__ = __mul__

    def __truediv__(self, other: Jet | FloatArray | float) -> Jet:
        return self * (1.0 / other)

    def __rtruediv__(self, other: FloatArray | float) -> Jet:
        inverse = 1.0 / self.value
        return other * lift(self, inverse, -(inverse**2), 2 * inverse**3)

    def total(self, weights: FloatArray | float = 1.0) -> Jet:
        """The weighted sum over the last axis, as a jet of one number.

        Sums are NumPy's pairwise sums, not matrix products: their order does not depend on the
        number of threads of a linear algebra library.
        """
        return Jet(
            np.sum(weights * self.value, axis=-1, keepdims=True),
            np.sum(weights * self.gradient, axis=-1, keepdims=True),
            np.sum(weights * self.hessian, axis=-1, keepdims=True),
        )


def variables(values: FloatArray) -> tuple[Jet, ...]:
    """The free parameters themselves, as jets: unit gradients, no curvature."""
    count = len(values)
    unit = np.eye(count)
    flat = np.zeros((count, count, 1))
    return tuple(Jet(values[i : i + 1], unit[:, i : i + 1], flat) for i in range(count))


def lift(argument: Jet, value: FloatArray, first: FloatArray, second: FloatArray) -> Jet:
    """f(argument), given f and its first two derivatives there."""
    gradient = first * argument.gradient
    curvature = second * _outer(argument.gradient, argument.gradient)
    return Jet(value, gradient, first * argument.hessian + curvature)


def lift_pair(
    a: Jet,
    b: Jet,
    value: FloatArray,
    first: tuple[FloatArray, FloatArray],
    second: tuple[FloatArray, FloatArray, FloatArray],
) -> Jet:
    """f(a, b), given f, its derivatives (f_a, f_b) and (f_aa, f_ab, f_bb) there."""
    cross = _outer(a.gradient, b.gradient)
    return Jet(
        value,
        first[0] * a.gradient + first[1] * b.gradient,
        first[0] * a.hessian
        + first[1] * b.hessian
        + second[0] * _outer(a.gradient, a.gradient)
        + second[1] * (cross + np.swapaxes(cross, 0, 1))
        + second[2] * _outer(b.gradient, b.gradient),
    )


def compose(arguments: tuple[Jet, ...], value: float, first: FloatArray, second: FloatArray) -> Jet:
    """f(arguments) for one number f of k single numbers, given f, its gradient (k,) and Hessian (k, k)."""
    inner = np.stack([argument.gradient[:, 0] for argument in arguments])
    bend = np.stack([argument.hessian[:, :, 0] for argument in arguments])
    gradient = first @ inner
    hessian = inner.T @ second @ inner + np.tensordot(first, bend, axes=1)
    return Jet(np.array([value]), gradient[:, None], hessian[:, :, None])


def exp(argument: Jet) -> Jet:
    """The exponential of a jet."""
    value = np.exp(argument.value)
    return lift(argument, value, value, value)


def log(argument: Jet) -> Jet:
    """The natural logarithm of a jet."""
    inverse = 1.0 / argument.value
    return lift(argument, np.log(argument.value), inverse, -(inverse**2))


def _outer(a: FloatArray, b: FloatArray) -> FloatArray:
    return a[:, None] * b[None, :]
