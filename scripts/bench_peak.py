"""The most double-precision operations that one core of this machine carries out in a second, measured.

Independent chains of fused multiply-adds in the widest registers that the processor has, and nothing else.
"""

from __future__ import annotations

import ctypes
from functools import lru_cache
from typing import Any

import llvmlite.binding as llvm
from bench_timing import core_seconds

CHAINS = 24  # enough to hide the latency of two units; fits into 32 registers
WIDTHS = (("avx512f", 8), ("avx", 4), ("", 2))  # doubles in a register, by feature
LOOPS = 20_000_000


def width() -> int:
    """Doubles in the widest register."""
    features = llvm.get_host_cpu_features()
    return next(doubles for feature, doubles in WIDTHS if not feature or features.get(feature))


def source(doubles: int) -> str:
    """A function of the number of rounds, each of `CHAINS` multiply-adds of `doubles`, and of the sum's address."""
    kind = f"<{doubles} x double>"
    constant = {x: "<" + ", ".join([f"double {x}"] * doubles) + ">" for x in ("0.5", "1.0")}
    head = [f"  %a{i} = phi {kind} [ {constant['1.0']}, %start ], [ %b{i}, %loop ]" for i in range(CHAINS)]
    name = f"@llvm.fma.v{doubles}f64"
    half, one = (f"{kind} {constant[x]}" for x in ("0.5", "1.0"))
    body = [f"  %b{i} = call {kind} {name}({kind} %a{i}, {half}, {one})" for i in range(CHAINS)]
    sums = [f"  %s{i} = fadd {kind} %{'b0' if i == 1 else f's{i - 1}'}, %b{i}" for i in range(1, CHAINS)]
    return "\n".join(
        [
            f"declare {kind} {name}({kind}, {kind}, {kind})",
            'define void @peak(i64 %n, ptr %out) "prefer-vector-width"="512" {',
            *("start:", "  br label %loop", "loop:", "  %i = phi i64 [ 0, %start ], [ %j, %loop ]"),
            *(*head, *body, "  %j = add i64 %i, 1", "  %more = icmp slt i64 %j, %n"),
            *("  br i1 %more, label %loop, label %end", "end:", *sums),
            f"  store {kind} %s{CHAINS - 1}, ptr %out, align 8",
            *("  ret void", "}"),
        ]
    )


@lru_cache(maxsize=1)
def compiled() -> tuple[Any, Any]:
    """The function, and what must live as long as it."""
    llvm.initialize_native_target()
    llvm.initialize_native_asmprinter()
    target = llvm.Target.from_default_triple().create_target_machine(
        cpu=llvm.get_host_cpu_name(), features=llvm.get_host_cpu_features().flatten(), opt=3, jit=True
    )
    engine = llvm.create_mcjit_compiler(llvm.parse_assembly(source(width())), target)
    engine.finalize_object()
    kind = ctypes.CFUNCTYPE(None, ctypes.c_int64, ctypes.c_void_p)
    return kind(engine.get_function_address("peak")), engine


def gflops() -> float:
    """Billions of operations a second, once; a fused multiply-add is two."""
    run, _ = compiled()
    out = (ctypes.c_double * width())()
    took = core_seconds(lambda: run(LOOPS, ctypes.addressof(out)))
    return 2.0 * CHAINS * width() * LOOPS / took / 1e9
