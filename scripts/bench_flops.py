"""How many double-precision operations a compiled function carries out, counted by itself.

The optimised code that numba makes is taken as text, and a counter is added to every block of it that holds
floating-point arithmetic: each addition, multiplication, division and square root counts one, a fused
multiply-add two, times the width of its vector. The counting twin is compiled beside the original and called once.
Comparisons, selects, conversions and integer arithmetic do not count, although they take time too.
"""

from __future__ import annotations

import ctypes
import re
from collections.abc import Callable, Iterator
from typing import Any

import llvmlite.binding as llvm
import numba
from numba.core import compiler_lock

COUNTER = "counted_flops"
PLAIN = re.compile(r"= (?:f(?:add|sub|mul|div)) [^%<d]*(?:<(\d+) x double>|double) ")
CALLED = re.compile(r"call [^@]*?(?:<(\d+) x double>|double) @(?:llvm\.)?(fma|fmuladd|sqrt)\b")
FUSED = {"fma": 2, "fmuladd": 2, "sqrt": 1}
LABEL = re.compile(r'^("[^"]*"|[-\w.$]+):')


def flops_of_line(line: str) -> int:
    """Operations of one instruction."""
    if found := PLAIN.search(line):
        return int(found[1] or 1)
    if found := CALLED.search(line):
        return int(found[1] or 1) * FUSED[found[2]]
    return 0


def blocks(body: list[str]) -> Iterator[list[str]]:
    """The lines of a function, block by block."""
    block: list[str] = []
    for line in body:
        if LABEL.match(line) and any(not LABEL.match(known) for known in block):
            yield block
            block = []
        block.append(line)
    yield block


def counting(block: list[str], number: int) -> list[str]:
    """The block with its operations added to the counter."""
    flops = sum(map(flops_of_line, block))
    if not flops:
        return block
    at = next(i for i, line in enumerate(block) if not LABEL.match(line) and line.strip() and " = phi " not in line)
    name = f"%{COUNTER}.{number}"
    added = [
        f"  {name} = load i64, ptr @{COUNTER}",
        f"  {name}.more = add i64 {name}, {flops}",
        f"  store i64 {name}.more, ptr @{COUNTER}",
    ]
    return [*block[:at], *added, *block[at:]]


def instrumented(text: str) -> str:
    """A module of LLVM code that counts."""
    out, body, number = [f"@{COUNTER} = global i64 0"], None, 0
    for line in text.splitlines():
        if body is None:
            out.append(line)
            body = [] if line.startswith("define ") else None
        elif line == "}":
            for block in blocks(body):
                out += counting(block, number)
                number += 1
            out.append(line)
            body = None
        else:
            body.append(line)
    head = next(i for i, line in enumerate(out) if line.startswith("target triple"))
    return "\n".join([*out[1 : head + 1], out[0], *out[head + 1 :]])


def counter(function: Any, *arguments: Any) -> Callable[[], int]:
    """A call of the compiled `function` that returns how many operations it took.

    Parameters
    ----------
    function : numba dispatcher
        Its arguments are passed as they are; what it writes, it writes.
    """
    options = {name: value for name, value in function.targetoptions.items() if name not in ("cache", "nopython")}
    fresh = numba.njit(**options)(function.py_func)
    fresh.compile(tuple(numba.typeof(argument) for argument in arguments))
    (made,) = fresh.overloads.values()
    with compiler_lock.global_compiler_lock:
        module = llvm.parse_assembly(instrumented(made.library.get_llvm_str()))
        target = llvm.Target.from_default_triple().create_target_machine(
            cpu=llvm.get_host_cpu_name(), features=llvm.get_host_cpu_features().flatten(), opt=1, jit=True
        )
        engine = llvm.create_mcjit_compiler(module, target)
        engine.finalize_object()
    environment = ctypes.c_void_p.from_address(engine.get_global_value_address(made.fndesc.env_name))
    environment.value = id(made.environment)
    kind = ctypes.PYFUNCTYPE(ctypes.py_object, ctypes.py_object, ctypes.py_object, ctypes.c_void_p)
    call = kind(engine.get_function_address(made.fndesc.llvm_cpython_wrapper_name))
    total = ctypes.c_int64.from_address(engine.get_global_value_address(COUNTER))

    def count() -> int:
        total.value = 0
        call(fresh, arguments, None)
        return total.value if engine else 0  # the engine must outlive the call

    return count
