"""How every kernel is compiled: cached on disk, without the interpreter lock, IEEE arithmetic.

Where the compiler would do one number at a time what the processor can do eight at a time (it must
assume that a store changes the table it reads next), `Vectors` writes the instructions out. They are
those of any processor: one with narrower registers takes more steps to the same bits.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, ParamSpec, TypeVar, cast

import numba
from llvmlite import ir
from numba.core import cgutils as untyped
from numba.core import types
from numba.extending import intrinsic

cgutils: Any = untyped
P = ParamSpec("P")
R = TypeVar("R")
WHOLE, REAL = ir.IntType(64), ir.DoubleType()
TRUTH, BYTE, INDEX = ir.IntType(1), ir.IntType(8), ir.IntType(32)


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


class Vectors:
    """Writes loops over vectors of numbers; see `instructions`.

    Args:
        builder: numba's, placed where the instructions go.
        lanes: numbers in a vector.
    """

    def __init__(self, builder: Any, lanes: int) -> None:
        self.builder, self.lanes = builder, lanes
        self.reals, self.wholes = ir.VectorType(REAL, lanes), ir.VectorType(WHOLE, lanes)

    def all(self, number: float) -> Any:
        """The same number in every lane."""
        kind = self.wholes if isinstance(number, int) else self.reals
        return ir.Constant(kind, [number] * self.lanes)

    def spread(self, number: Any) -> Any:
        """A number that is known when the loop runs, in every lane."""
        kind = ir.VectorType(number.type, self.lanes)
        first = self.builder.insert_element(ir.Constant(kind, ir.Undefined), number, ir.Constant(INDEX, 0))
        zeros = ir.Constant(ir.VectorType(INDEX, self.lanes), [0] * self.lanes)
        return self.builder.shuffle_vector(first, ir.Constant(kind, ir.Undefined), zeros)

    def load(self, array: Any, place: Any, kind: Any) -> Any:
        """The vector that begins at a place of an array."""
        value = self.builder.load(self._pointer(array, place, kind))
        value.align = 8
        return value

    def store(self, vector: Any, array: Any, place: Any) -> None:
        """Put a vector at a place of an array."""
        self.builder.store(vector, self._pointer(array, place, vector.type)).align = 8

    def store_flags(self, flags: Any, array: Any, place: Any) -> None:
        """Put the truths of eight lanes into one byte of an array."""
        self.builder.store(self.builder.bitcast(flags, BYTE), self.builder.gep(array, [place]))

    def variable(self, vector: Any) -> Any:
        """A place for a vector that changes in a loop: a register, in the end."""
        return cgutils.alloca_once_value(self.builder, vector)

    def gather(self, array: Any, places: Any) -> Any:
        """One real number of an array for each lane."""
        pointers = ir.VectorType(REAL.as_pointer(), self.lanes)
        mask = ir.VectorType(TRUTH, self.lanes)
        function = cgutils.get_or_insert_function(
            self.builder.module,
            ir.FunctionType(self.reals, [pointers, INDEX, mask, self.reals]),
            f"llvm.masked.gather.v{self.lanes}f64.v{self.lanes}p0",
        )
        start = self.spread(self.builder.ptrtoint(array, WHOLE))
        address = self.builder.add(start, self.builder.shl(places, self.all(3)))
        every = ir.Constant(mask, [1] * self.lanes)
        given = (self.builder.inttoptr(address, pointers), ir.Constant(INDEX, 8), every)
        return self.builder.call(function, (*given, ir.Constant(self.reals, ir.Undefined)))

    @contextmanager
    def loop(self, start: Any, stop: Any, step: Any) -> Iterator[Any]:
        """A loop; gives the place of the first lane."""
        with cgutils.for_range_slice(self.builder, start, stop, step) as (place, _):
            yield place

    def _pointer(self, array: Any, place: Any, kind: Any) -> Any:
        return self.builder.bitcast(self.builder.gep(array, [place]), kind.as_pointer())


def whole(number: int) -> Any:
    """A whole number as the instructions have it."""
    return ir.Constant(WHOLE, number)


def instructions(write: Callable[..., None]) -> Callable[..., None]:
    """A function for compiled code alone, whose instructions `write` writes.

    It takes one tuple. `write` is called with numba's builder and, for each entry, the address of an
    array's first number, or a number. What it writes must give what the plain function gives that it
    stands for (`numba.extending.overload` says which), bit for bit.
    """

    def typed(_: Any, arguments: Any) -> Any:
        def generate(context: Any, builder: Any, signature: Any, values: Any) -> Any:
            given = []
            for kind, value in zip(arguments, cgutils.unpack_tuple(builder, values[0]), strict=True):
                array = isinstance(kind, types.Array)
                given.append(context.make_array(kind)(context, builder, value).data if array else value)
            write(builder, *given)
            return context.get_dummy_value()

        return types.void(arguments), generate

    return cast(Callable[..., None], intrinsic(typed))
