"""What every count law answers."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt

from lossagg.arrays import FloatArray, Floats, elementwise
from lossagg.families.law import Law, within

ComplexArray = npt.NDArray[Any]
"""float64 or complex128."""


class CountLaw(Law):
    """The number of losses in a year."""

    @abstractmethod
    def _pmf(self, n: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _cdf(self, n: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _sf(self, n: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _pgf(self, z: ComplexArray) -> ComplexArray: ...

    @abstractmethod
    def _log_pgf(self, z: ComplexArray) -> ComplexArray: ...

    @abstractmethod
    def thinned(self, probability: float) -> CountLaw:
        """The law of how many of the losses pass an independent test of this probability.

        With the test "exceeds the threshold" it gives the count above a threshold from the
        ground-up count. The result is a law of the same family where the family is closed.
        """

    @abstractmethod
    def with_exposure(self, factor: float) -> CountLaw:
        """The law of the count when the exposure is `factor` times as large, factor > 0.

        What that does beyond the mean is an assumption; each law states its own.

        Raises:
            InputError: the law does not say how it changes with exposure.
        """

    @property
    def recursion(self) -> tuple[float, float] | None:
        """(a, b) with p(n) = (a + b/n) p(n-1) for n >= 1 (Panjer 1981), or None outside that class."""
        return None

    def pgf(self, z: npt.ArrayLike) -> Any:
        """Probability generating function E[z**N].

        Args:
            z: real or complex, scalar or array, |z| <= 1; beyond 1 as far as the moments allow.

        Returns:
            Of the shape of `z`; real where `z` is real.
        """
        return _generating(self._pgf, z)

    def log_pgf(self, z: npt.ArrayLike) -> Any:
        """A logarithm of `pgf(z)`, accurate where the law has a huge mean and pgf(z) underflows.

        Only its exponential has a meaning: the imaginary part is not unwrapped. For real `z` the
        real logarithm, NaN where the pgf is negative.
        """
        return _generating(self._log_pgf, z)

    def pmf(self, n: Floats) -> FloatArray | float:
        """P(N = n); zero where n is negative or not a whole number."""
        return elementwise(
            lambda x: within(
                lambda k: np.where(k == np.floor(k), self._pmf(np.floor(k)), 0.0), x, below=0.0, above=0.0
            ),
            n,
            "n",
        )

    def cdf(self, n: Floats) -> FloatArray | float:
        """P(N <= n)."""
        return elementwise(
            lambda x: within(lambda k: self._cdf(np.floor(k)), x, below=0.0, above=1.0), n, "n"
        )

    def sf(self, n: Floats) -> FloatArray | float:
        """P(N > n), accurate in the far tail."""
        return elementwise(lambda x: within(lambda k: self._sf(np.floor(k)), x, below=1.0, above=0.0), n, "n")


def _generating(function: Callable[[ComplexArray], ComplexArray], z: npt.ArrayLike) -> Any:
    array = np.asarray(z)
    array = array.astype(np.complex128 if np.iscomplexobj(array) else np.float64, copy=False)
    result = function(np.atleast_1d(array))
    return result[0].item() if array.ndim == 0 else result.reshape(array.shape)
