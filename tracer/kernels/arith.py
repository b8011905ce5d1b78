"""How point functions are compiled: the flags, and vectorisable code for what has no plain arithmetic.

Importing this module makes numba know every function that `fields.arith.pointwise` has marked.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any, TypeVar, cast

import numpy as np
from numba import njit
from numba.extending import overload, register_jitable

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


TWO_PI = 2.0 * math.pi
INVERSE_TWO_PI = 1.0 / TWO_PI
CUBE_ROOT_BITS = 0x553EF0FF289DD796  # 4/3 (1023 - 0.0455) 2^52, the start within 4 % of x^(-1/3)


@inlined
def sincos(x: Any) -> Any:
    """sin and cos, absolute error below 1e-15 for |x| up to a few turns: Taylor polynomials of a quarter of the
    angle."""
    u = 0.25 * (x - TWO_PI * np.rint(x * INVERSE_TWO_PI))
    z = u * u
    s = u * (
        1.0
        - z
        / 6.0
        * (
            1.0
            - z / 20.0 * (1.0 - z / 42.0 * (1.0 - z / 72.0 * (1.0 - z / 110.0 * (1.0 - z / 156.0 * (1.0 - z / 210.0)))))
        )
    )
    c = (
        -0.5
        * z
        * (
            1.0
            - z
            / 12.0
            * (
                1.0
                - z
                / 30.0
                * (1.0 - z / 56.0 * (1.0 - z / 90.0 * (1.0 - z / 132.0 * (1.0 - z / 182.0 * (1.0 - z / 240.0)))))
            )
        )
    )
    # c holds cos(u) - 1, and v = 1 - cos below: doubling that way does not amplify rounding
    s2 = 2.0 * s * (1.0 + c)
    v = 2.0 * s * s
    return 2.0 * s2 * (1.0 - v), 1.0 - 2.0 * s2 * s2


# numba compares the signatures of these to the letter, so they carry no annotations


@overload(arith.inverse_cube_root, jit_options=INLINED)
def _inverse_cube_root(x):  # type: ignore[no-untyped-def]
    def implementation(x):  # type: ignore[no-untyped-def]
        y = np.int64(CUBE_ROOT_BITS - np.float64(x).view(np.int64) // 3).view(np.float64)
        for _ in range(3):  # fourth order: 4 % -> 1e-5 -> 1e-18
            h = 1.0 - x * y * y * y
            y = y + y * h * (1.0 / 3.0 + h * (2.0 / 9.0 + h * (14.0 / 81.0)))
        return y

    return implementation


@overload(arith.square_root, jit_options=INLINED)
def _square_root(x):  # type: ignore[no-untyped-def]
    return lambda x: np.sqrt(x)


@overload(arith.power, jit_options=INLINED)
def _power(x, exponent):  # type: ignore[no-untyped-def]
    return lambda x, exponent: x**exponent


_known: set[Any] = set()


def register_pointwise() -> None:
    """Make numba know the point functions marked since the last call."""
    for function in arith.POINTWISE:
        if function not in _known:
            register_jitable(forceinline=True, **OPTIONS)(function)
            _known.add(function)


register_pointwise()
