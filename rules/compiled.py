"""How number-heavy loops are compiled: cached where the cache can be written, else in memory.

Arrays are day-major, (days, cells). A kernel walks them in blocks of `BLOCK` cells whose state stays
in the processor's near caches, one day after the other, `STEP` cells at a time; before each step it
asks memory for the same cells of the next day, which lies too far away for the processor to guess.

The cache knows a kernel by its own file only: after a change here, delete the cached ones.
"""

from collections.abc import Callable
from typing import Any, TypeVar, cast

import numba
from numba.core import cgutils, types
from numba.extending import intrinsic

_code: Any = cgutils  # numba's tools for writing machine instructions, which carry no types

BLOCK = 4096
STEP = 256
_LINE = 16  # cells in a 64-byte cache line of float32

Function = TypeVar("Function", bound=Callable[..., Any])


def kernel(*, parallel: bool = False) -> Callable[[Function], Function]:
    """Compile a function without the interpreter, keeping the result on disk if there is a place for it."""

    def compile_(function: Function) -> Function:
        made: Any
        try:
            made = numba.njit(cache=True, nogil=True, parallel=parallel)(function)
        except RuntimeError:  # numba found no folder that it can write to
            made = numba.njit(nogil=True, parallel=parallel)(function)
        return cast(Function, made)

    return compile_


def _prefetch(typing_context: Any, array: Any, day: Any, cell: Any) -> tuple[Any, Callable[..., Any]]:
    """Ask memory for the cache line of array[day, cell] without waiting for it."""

    def generate(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        kind = signature.args[0]
        view = context.make_array(kind)(context, builder, arguments[0])
        at = _code.get_item_pointer(context, builder, kind, view, list(arguments[1:]), wraparound=False)
        byte, word = _code.voidptr_t, _code.int32_t
        shape = _code.ir.FunctionType(_code.ir.VoidType(), [byte, word, word, word])
        ask = builder.module.declare_intrinsic("llvm.prefetch", [byte], shape)
        builder.call(ask, [builder.bitcast(at, byte), word(0), word(3), word(1)])  # for reading, data, keep near
        return context.get_dummy_value()

    return types.void(array, types.intp, types.intp), generate


prefetch: Any = intrinsic(_prefetch)


@kernel()
def fetch(array: Any, day: int, first: int, last: int) -> None:
    """Ask memory for array[day, first:last]."""
    for cell in range(first, last, _LINE):
        prefetch(array, day, cell)
