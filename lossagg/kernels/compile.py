"""How every kernel is compiled: cached on disk, without the interpreter lock, IEEE arithmetic."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, ParamSpec, TypeVar, cast

import numba

P = ParamSpec("P")
R = TypeVar("R")


def compiled(function: Callable[P, R]) -> Callable[P, R]:
    """Compile a kernel; its plain Python twin stays reachable as `.py_func`.

    Division by zero gives inf or NaN as in NumPy. No fast-math: results must not depend on how the
    compiler reorders a sum.
    """
    return cast(Callable[P, R], numba.njit(cache=True, nogil=True, error_model="numpy")(function))


def awaits_compilation(kernel: Callable[..., object]) -> bool:
    """Whether a kernel's first call will compile it: neither in memory nor in the cache on disk."""
    dispatcher = cast(Any, kernel)
    if dispatcher.signatures or not dispatcher.stats.cache_path:
        return not dispatcher.signatures
    code = dispatcher.py_func.__code__
    pattern = f"{Path(code.co_filename).stem}.{dispatcher.py_func.__qualname__}-{code.co_firstlineno}.*.nbi"
    return not any(Path(dispatcher.stats.cache_path).glob(pattern))
