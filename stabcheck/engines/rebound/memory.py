"""Two compiled primitives: call a C function by its address, and view memory by its address.

Addresses are passed as plain integers, so that the compiled code can be cached: a pointer baked into it would differ
in the next process.
"""

from typing import Any

from llvmlite import ir
from numba import types
from numba.extending import intrinsic


@intrinsic
def call_steps(typingctx: Any, function: Any, simulation: Any, steps: Any) -> Any:
    """Call ``int f(void *simulation, size_t steps)`` at an address."""

    def codegen(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        word = ir.IntType(64)
        kind = ir.FunctionType(ir.IntType(32), [word, word])
        pointer = builder.inttoptr(arguments[0], kind.as_pointer())
        return builder.call(pointer, [arguments[1], arguments[2]])

    return types.int32(types.int64, types.int64, types.int64), codegen


@intrinsic
def doubles_at(typingctx: Any, address: Any) -> Any:
    """Take an address as a pointer to doubles, for ``numba.carray``."""

    def codegen(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        return builder.inttoptr(arguments[0], context.get_value_type(types.CPointer(types.float64)))

    return types.CPointer(types.float64)(types.int64), codegen


@intrinsic
def words_at(typingctx: Any, address: Any) -> Any:
    """Take an address as a pointer to 64-bit integers, for ``numba.carray``."""

    def codegen(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        return builder.inttoptr(arguments[0], context.get_value_type(types.CPointer(types.int64)))

    return types.CPointer(types.int64)(types.int64), codegen


__all__ = ["call_steps", "doubles_at", "words_at"]
