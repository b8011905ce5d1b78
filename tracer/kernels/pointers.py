"""Calling compiled code by its address: who calls need not be compiled together with what is called.

A search for stationary points or a walk along a level curve asks a field for one value after another, where a call
costs little beside the answer. So the code of such a search is compiled once on a machine, and not again for every
combination of models as the drift kernel is, whose lanes need the field inlined.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, cast

from llvmlite import ir
from numba import cfunc, types
from numba.extending import intrinsic

from tracer.kernels.arith import OPTIONS

NUMBERS = types.CPointer(types.float64)  # type: ignore[no-untyped-call]
AT_POINT = types.void(types.float64, types.float64, NUMBERS, NUMBERS, NUMBERS)
"""(x, phi, constants, particle, out)"""
ALONG_CIRCLE = types.void(types.float64, types.int64, NUMBERS, NUMBERS, NUMBERS)
"""(x, n, constants, particle, out)"""


def by_address(signature: Any) -> Callable[[Callable[..., Any]], Any]:
    """Compile a function for calls by its ``address``; kept on disk."""
    return cast(Callable[[Callable[..., Any]], Any], cfunc(signature, cache=True, **OPTIONS))


def _caller(signature: Any) -> Any:
    """An intrinsic ``(address, *arguments)`` that calls a function of `signature`; arrays are passed as pointers."""

    def typed(typingctx, address, first, second, constants, particle, out):  # type: ignore[no-untyped-def]
        arrays = (constants, particle, out)

        def generate(context, builder, sig, arguments):  # type: ignore[no-untyped-def]
            values = list(arguments[1:3])
            for kind, value in zip(arrays, arguments[3:], strict=True):
                values.append(context.make_array(kind)(context, builder, value).data)
            function = ir.FunctionType(ir.VoidType(), [value.type for value in values])
            builder.call(builder.inttoptr(arguments[0], function.as_pointer()), values)
            return context.get_dummy_value()

        return types.void(types.int64, *signature.args[:2], *arrays), generate

    return intrinsic(typed)


call_at_point = _caller(AT_POINT)
call_along_circle = _caller(ALONG_CIRCLE)
