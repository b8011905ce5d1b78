"""How point functions are compiled: the flags, and vectorisable code for what has no plain arithmetic.

Importing this module makes numba know every function that `fields.arith.pointwise` has marked.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any, TypeVar, cast

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.core import cgutils
from numba.extending import intrinsic, overload, register_jitable

from fields import arith

# contract, arcp, nsz: faster, and the same bits on every run of one machine; nothing that reorders sums.
OPTIONS: dict[str, Any] = {"error_model": "numpy", "fastmath": {"contract", "arcp", "nsz"}}

INLINED: Any = {"forceinline": True, **OPTIONS}

Function = TypeVar("Function", bound=Callable[..., Any])


def inlined(function: Function) -> Function:
    """Compile `function` into whoever calls it."""
    return cast(Function, njit(forceinline=True, **OPTIONS)(function))


def compiled(function: Function) -> Function:
    """Compile `function` by itself: code size and compile time stay small where speed is not at stake."""
    return cast(Function, njit(**OPTIONS)(function))


def _apart(context):  # type: ignore[no-untyped-def]
    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        builder.function.attributes.add("noinline")
        return context.get_dummy_value()

    return types.void(), generate


# Keeps the function that calls it out of its callers: they compile faster, and rare code stays out of the way.
stand_apart = cast(Callable[[], None], intrinsic(_apart))


def entry_point(function: Function) -> Function:
    """Compile `function` for calls from Python: kept on disk, and other threads run meanwhile."""
    return cast(Function, njit(nogil=True, cache=True, **OPTIONS)(function))


def _over_lanes(context, body, lanes, side_by_side, arguments):  # type: ignore[no-untyped-def]
    signature = body.get_call_type(context, (types.intp, *arguments), {})

    def generate(context, builder, _, values):  # type: ignore[no-untyped-def]
        # llvmlite knows only some attributes by name; this is a documented string attribute of LLVM's
        set.add(builder.function.attributes, '"prefer-vector-width"="512"')
        call = context.get_function(body, signature)
        end = context.cast(builder, values[1], lanes, types.intp)
        zero, one = (ir.Constant(end.type, n) for n in (0, 1))
        before, loop, after = builder.block, builder.append_basic_block("lane"), builder.append_basic_block("lanes.end")
        builder.cbranch(builder.icmp_signed("<", zero, end), loop, after)
        builder.position_at_end(loop)
        lane = builder.phi(zero.type)
        lane.add_incoming(zero, before)
        call(builder, [lane, *cgutils.unpack_tuple(builder, values[3])])  # type: ignore[no-untyped-call]
        following = builder.add(lane, one, flags=("nsw", "nuw"))  # so that no index may count from the end
        lane.add_incoming(following, builder.block)
        jump = builder.cbranch(builder.icmp_signed("<", following, end), loop, after)
        jump.set_metadata("llvm.loop", _loop_hints(builder.module, side_by_side.literal_value))  # type: ignore[no-untyped-call]
        builder.position_at_end(after)
        return context.get_dummy_value()

    return types.void(body, lanes, side_by_side, arguments), generate


def _loop_hints(module, interleave):  # type: ignore[no-untyped-def]
    """The documented metadata of LLVM's that asks the vectoriser for `interleave` registers side by side."""
    word = ir.IntType(32)
    wanted = module.add_metadata(
        [ir.MetaDataString(module, "llvm.loop.interleave.count"), ir.Constant(word, interleave)]
    )
    hints = ir.MDValue(module, (), str(len(module.metadata)))
    hints.operands = (hints, wanted)
    return hints


# ``over_lanes(body, count, n, arguments)`` calls ``body(lane, *arguments)`` for every lane below `count`, vectorised,
# with n registers side by side. A loop of numba's own would do the same with half of the register (on processors with
# AVX-512 LLVM keeps to that by default, for fear of a lower clock: 1.6 times as long), one after the other (1.4 times).
over_lanes = cast(Callable[..., None], intrinsic(prefer_literal=True)(_over_lanes))

TWO_PI = 2.0 * math.pi
INVERSE_TWO_PI = 1.0 / TWO_PI
MANTISSA = 2.0**52
LN2_HIGH, LN2_LOW = 0.693147180369123816490, 1.90821492927058770002e-10  # ln 2 in two parts (Cody & Waite 1980)

# Bits read as an integer are 2^52 (log2 x + 1023 + s), s between 0 and 0.0861. This s halves the largest error.
LOG2_SHIFT = 0.0450466

TAN_PI_8 = math.sqrt(2.0) - 1.0
LN2 = math.log(2.0)

# atan(z)/z in z^2 on [0, tan(pi/8)^2]: its Chebyshev interpolant, relative error 5e-18
ATAN = (
    1.0,
    -0.33333333333333126,
    0.19999999999942342,
    -0.14285714279381564,
    0.11111110751018727,
    -0.09090896974391927,
    0.07692048125814824,
    -0.06662982166188505,
    0.05847090096609891,
    -0.05036020352571326,
    0.03798774160996723,
    -0.017829184144146384,
)
# sin(u)/u and (cos(u) - 1)/u^2 in u^2 on [0, (pi/4)^2]: Chebyshev interpolants, relative errors 4e-18 and 7e-16
SIN = (
    1.0,
    -0.16666666666666616,
    0.008333333333320236,
    -0.00019841269828551933,
    2.755731334216945e-06,
    -2.5050711541431736e-08,
    1.5894416117286298e-10,
)
COS = (
    -0.49999999999999967,
    0.04166666666663058,
    -0.0013888888882075865,
    2.4801582596225317e-05,
    -2.7555849841966927e-07,
    2.0665095513234877e-09,
)


@inlined
def sincos(x: Any) -> Any:
    """sin and cos, absolute error below 2e-15 for a few turns: polynomials of a quarter of the angle."""
    u = 0.25 * (x - TWO_PI * np.rint(x * INVERSE_TWO_PI))
    z = u * u
    s, c = SIN[6], COS[5]
    for i in range(5, -1, -1):
        s = s * z + SIN[i]
    for i in range(4, -1, -1):
        c = c * z + COS[i]
    # doubled in terms of 1 - cos, which does not amplify rounding: c is cos(u) - 1
    s, c = s * u, c * z
    s2 = 2.0 * s + 2.0 * s * c
    v = 2.0 * s * s
    return 2.0 * s2 * (1.0 - v), 1.0 - 2.0 * s2 * s2


@inlined
def bits_of(x: Any) -> Any:
    """The bits of a positive number, read as an integer, as a number: about 2^52 (log2(x) + 1023)."""
    return np.float64(np.float64(x).view(np.int64))


@inlined
def from_bits(b: Any) -> Any:
    """The inverse of `bits_of`."""
    return np.int64(b).view(np.float64)


@inlined
def rough_power(x: Any, exponent: Any) -> Any:
    """``x ** exponent`` to some percent, for positive `x`: enough for a step-size controller or a first guess."""
    shift = (1023.0 - LOG2_SHIFT) * MANTISSA
    return from_bits(exponent * (bits_of(x) - shift) + shift)


# numba compares the signatures of these to the letter, so they carry no annotations


@overload(arith.inverse_cube_root, jit_options=INLINED)
def _inverse_cube_root(x):  # type: ignore[no-untyped-def]
    def implementation(x):  # type: ignore[no-untyped-def]
        y = rough_power(x, -1.0 / 3.0)
        h = 1.0 - (x * y) * (y * y)  # fifth order: 4 % -> 1e-6
        y = y + y * h * (1 / 3 + h * (2 / 9 + h * (14 / 81 + h * (35 / 243))))
        h = 1.0 - (x * y) * (y * y)  # third: below rounding
        return y + y * h * (1 / 3 + h * (2 / 9))

    return implementation


@inlined
def inverse_root(x: Any) -> Any:
    """``x ** (-1/2)``: twenty multiplies, where a division and a root would keep the divider busy for longer."""
    y = rough_power(x, -0.5)
    h = 1.0 - (x * y) * y  # fifth order, then third, as above
    y = y + y * h * (1 / 2 + h * (3 / 8 + h * (5 / 16 + h * (35 / 128))))
    h = 1.0 - (x * y) * y
    return y + y * h * (1 / 2 + h * (3 / 8))


@overload(arith.inverse_square_root, jit_options=INLINED)
def _inverse_square_root(x):  # type: ignore[no-untyped-def]
    return lambda x: inverse_root(x)


@overload(arith.square_root, jit_options=INLINED)
def _square_root(x):  # type: ignore[no-untyped-def]
    return lambda x: x * inverse_root(x)


@overload(arith.reciprocal, jit_options=INLINED)
def _reciprocal(x):  # type: ignore[no-untyped-def]
    def implementation(x):  # type: ignore[no-untyped-def]
        y = inverse_root(x)
        return y * y

    return implementation


@inlined
def logarithm(x: Any) -> Any:
    """ln of a positive normal number: ``2 atanh(s)`` of the mantissa, plus its exponent times ln 2."""
    b = bits_of(x)
    e = np.floor(b / MANTISSA - 1023.0 + 0.5)
    m = x * from_bits((1023.0 - e) * MANTISSA)  # between 1/sqrt(2) - a little and sqrt(2)
    s = (m - 1.0) / (m + 1.0)
    z = s * s
    a = 1 / 23
    for k in range(21, 0, -2):
        a = a * z + 1.0 / k
    return e * LN2_HIGH + (2.0 * s * a + e * LN2_LOW)


@inlined
def exponential(x: Any) -> Any:
    """exp for results within the normal numbers: Taylor polynomial of the rest after whole powers of 2."""
    n = np.rint(x / LN2)
    f = (x - n * LN2_HIGH) - n * LN2_LOW
    a = 1.0
    for k in range(14, 0, -1):
        a = 1.0 + a * f / k
    return a * from_bits((n + 1023.0) * MANTISSA)


@overload(arith.power, jit_options=INLINED)
def _power(x, exponent):  # type: ignore[no-untyped-def]
    return lambda x, exponent: exponential(exponent * logarithm(x))


@inlined
def arc_tangent(x: Any) -> Any:
    """atan of `x` >= 0, absolute error below 1e-15."""
    steep = x > 1.0
    z = 1.0 / x if steep else x
    far = z > TAN_PI_8
    u = (z - 1.0) / (z + 1.0) if far else z
    q = u * u
    a = ATAN[-1]
    for i in range(len(ATAN) - 2, -1, -1):
        a = a * q + ATAN[i]
    a = a * u + (0.25 * math.pi if far else 0.0)
    return 0.5 * math.pi - a if steep else a


_known: set[Any] = set()


def register_pointwise() -> None:
    """Make numba know the point functions marked since the last call."""
    for function in arith.POINTWISE:
        if function not in _known:
            register_jitable(forceinline=True, **OPTIONS)(function)
            _known.add(function)


register_pointwise()
