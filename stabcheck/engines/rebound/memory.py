"""Compiled primitives: call a C function by its address, and view memory by its address.

Addresses are passed as plain integers, so that the compiled code can be cached: a pointer baked into it would differ
in the next process. This is also where Numba, whose types a checker cannot follow, is let in.
"""

from typing import Any

import numba
from llvmlite import ir
from numba.extending import intrinsic

types: Any = numba.types
carray: Any = numba.carray  # type: ignore[attr-defined]


@intrinsic
def _call_steps(typingctx: Any, function: Any, simulation: Any, steps: Any) -> Any:
    """Call ``int f(void *simulation, size_t steps)`` at an address."""

    def codegen(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        word = ir.IntType(64)
        kind = ir.FunctionType(ir.IntType(32), [word, word])
        pointer = builder.inttoptr(arguments[0], kind.as_pointer())
        return builder.call(pointer, [arguments[1], arguments[2]])

    return types.int32(types.int64, types.int64, types.int64), codegen


def _pointer_to(kind: Any) -> Any:
    """Make an intrinsic that takes an address as a pointer, for ``carray``."""

    def at(typingctx: Any, address: Any) -> Any:
        def codegen(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
            return builder.inttoptr(arguments[0], context.get_value_type(types.CPointer(kind)))

        return types.CPointer(kind)(types.int64), codegen

    return intrinsic(at)


call_steps: Any = _call_steps
doubles_at: Any = _pointer_to(types.float64)
words_at: Any = _pointer_to(types.int64)
