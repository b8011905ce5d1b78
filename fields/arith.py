"""Arithmetic that a point function may call: plain numpy here, vectorisable code once compiled.

A point function is written once, in straight-line Python arithmetic. On arrays numpy evaluates it; the drift
kernel compiles the very same source. `pointwise` marks what may be compiled, and the functions of this module are
those whose compiled form is not their source (see ``tracer/kernels/arith.py``).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar

import numpy as np

Function = TypeVar("Function", bound=Callable[..., Any])

POINTWISE: list[Callable[..., Any]] = []


def pointwise(function: Function) -> Function:
    """Mark `function` as compilable: scalars or arrays in, straight-line arithmetic, module-level name."""
    POINTWISE.append(function)
    return function


def power(x: Any, exponent: Any) -> Any:
    """``x ** exponent`` for positive `x`."""
    return x**exponent


def inverse_cube_root(x: Any) -> Any:
    """``x ** (-1/3)`` for positive `x`."""
    return 1.0 / np.cbrt(x)


def inverse_square_root(x: Any) -> Any:
    """``x ** (-1/2)`` for positive `x`."""
    return 1.0 / np.sqrt(x)


def square_root(x: Any) -> Any:
    """``x ** (1/2)`` for positive `x`."""
    return np.sqrt(x)


def reciprocal(x: Any) -> Any:
    """``1 / x`` for positive `x`."""
    return 1.0 / x
