"""How every kernel is compiled: cached on disk, without the interpreter lock, IEEE arithmetic."""

from __future__ import annotations

from collections.abc import Callable
from typing import ParamSpec, TypeVar, cast

import numba

P = ParamSpec("P")
R = TypeVar("R")


def compiled(function: Callable[P, R]) -> Callable[P, R]:
    """Compile a kernel; its plain Python twin stays reachable as `.py_func`.

    Division by zero gives inf or NaN as in NumPy. No fast-math: results must not depend on how the
    compiler reorders a sum.
    """
    return cast(Callable[P, R], numba.njit(cache=True, nogil=True, error_model="numpy")(function))
