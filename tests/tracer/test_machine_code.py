"""What LLVM made of the lanes: packed arithmetic, and no call out of a step.

A call would mean a function of a mathematical library, one particle at a time; a lane loop that stayed scalar would be
right and eight times slower. Read off the assembly of the functions that run in every step, in a field whose
shielding exponent is no integer.
"""

from __future__ import annotations

import re
from types import ModuleType
from typing import Any

import numpy as np
import pytest
import storm_runs
from numba import njit

from fields import Corotation, Dipole, VollandStern, compose
from tracer.kernels import arith
from tracer.kernels.build import Kernel, kernel_for

LANES, STAGES = "lanes", "stages"
RULES = (1.0, 10.0, 1.0, 1.0, 1, 1e-9)
# body, its module, what it takes beside the work array: C are the constants of the field
BODIES = {
    "begin": (LANES, (1.0,)),
    "slopes": (LANES, "C"),
    "stage_2": (STAGES, ()),
    "stage_12": (STAGES, ()),
    "judge": (LANES, (RULES, 1e9)),
    "watch": (LANES, ("C", 1.0)),
    "interpolate": (LANES, ()),
    "point": (LANES, ()),
    "accept": (LANES, ()),
}
PACKED_MULTIPLY = re.compile(r"^\s+v?(mulpd|fn?m(add|sub)\d+pd)\b", flags=re.M)


@pytest.fixture(scope="module")
def kernel() -> Kernel:
    return kernel_for(compose(Dipole(b0_nT=30000.0), [Corotation(), VollandStern(gamma=1.7, amplitude_kV=2.0)]))


def own_code(assembly: str, name: str) -> str:
    """The lines of the function itself, without those that let Python call it."""
    lines = assembly.splitlines()
    (start,) = [i for i, line in enumerate(lines) if re.match(rf"_ZN\S*{name}\S*:$", line) and "cpython" not in line]
    length = next(i for i, line in enumerate(lines[start:]) if line.startswith(".Lfunc_end"))
    return "\n".join(lines[start : start + length])


def compiled_loop(kernel: Kernel, body: str) -> str:
    """Assembly of a loop over all lanes that does `body` alone."""
    where, given = BODIES[body]
    part: ModuleType = storm_runs.part(kernel, where)
    function, layout = getattr(part, body), storm_runs.part(kernel, "layout")
    count = layout.LANES
    others = tuple(kernel.constants if value == "C" else value for value in given)
    over_lanes: Any = arith.over_lanes

    def looped_over(arguments: Any) -> None:
        over_lanes(function, count, 2, arguments)

    loop = njit(**arith.OPTIONS)(looped_over)
    loop((np.ones(layout.SIZE), *others))
    (assembly,) = loop.inspect_asm().values()
    return own_code(assembly, "looped_over")


@pytest.mark.parametrize("body", BODIES)
def test_a_step_is_packed_and_calls_nothing(kernel: Kernel, body: str) -> None:
    code = compiled_loop(kernel, body)
    assert not re.findall(r"^\s+call.*", code, flags=re.M)
    if body != "begin":  # which only compares and adds
        assert PACKED_MULTIPLY.search(code)


def test_a_call_would_be_found(kernel: Kernel) -> None:
    """The same look at a loop that does call a library, so that the check can fail."""

    def looped_over(values: Any) -> None:
        for i in range(values.size):
            values[i] = values[i] ** 1.7

    loop = njit(**arith.OPTIONS)(looped_over)
    loop(np.ones(32))
    (assembly,) = loop.inspect_asm().values()
    assert re.findall(r"^\s+call.*", own_code(assembly, "looped_over"), flags=re.M)
