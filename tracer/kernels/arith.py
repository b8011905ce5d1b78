"""How point functions are compiled: the flags, and vectorisable code for what has no plain arithmetic.

Importing this module makes numba know every function that `fields.arith.pointwise` has marked.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any, TypeVar, cast

import numpy as np
from numba import njit, types
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


def entry_point(function: Function) -> Function:
    """Compile `function` for calls from Python: kept on disk, and other threads run meanwhile."""
    return cast(Function, njit(nogil=True, cache=True, **OPTIONS)(function))


def _widest_vectors(context):  # type: ignore[no-untyped-def]
    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        # llvmlite knows only some attributes by name; this is a documented string attribute of LLVM's
        set.add(builder.function.attributes, '"prefer-vector-width"="512"')
        return context.get_dummy_value()

    return types.void(), generate


# Asks LLVM to use the widest registers in the function that calls it. On processors with AVX-512 it keeps to half of
# their width by default, for fear of a lower clock; a step of all lanes takes 1.6 times as long then.
prefer_widest_vectors = cast(Callable[[], None], intrinsic(_widest_vectors))

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
SIN = (1.0, -1 / 6, 1 / 120, -1 / 5040, 1 / 362880, -1 / 39916800, 1 / 6227020800, -1 / 1307674368000)
COS = (-1 / 2, 1 / 24, -1 / 720, 1 / 40320, -1 / 3628800, 1 / 479001600, -1 / 87178291200, 1 / 20922789888000)


@inlined
def sincos(x: Any) -> Any:
    """sin and cos, absolute error below 2e-15 for a few turns: Taylor polynomials of a quarter of the angle."""
    u = 0.25 * (x - TWO_PI * np.rint(x * INVERSE_TWO_PI))
    z = u * u
    s, c = SIN[7], COS[7]
    for i in range(6, -1, -1):
        s = s * z + SIN[i]
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
        for _ in range(2):  # fifth order: 4 % -> 1e-6 -> below rounding
            h = 1.0 - (x * y) * (y * y)
            y = y + y * h * (1 / 3 + h * (2 / 9 + h * (14 / 81 + h * (35 / 243))))
        return y

    return implementation


@inlined
def inverse_root(x: Any) -> Any:
    """``x ** (-1/2)``: a multiply is worth twenty of a processor's square roots or divisions."""
    y = rough_power(x, -0.5)
    for _ in range(2):  # fifth order, as above
        h = 1.0 - (x * y) * y
        y = y + y * h * (1 / 2 + h * (3 / 8 + h * (5 / 16 + h * (35 / 128))))
    return y


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
