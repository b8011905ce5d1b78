"""Write tracer/kernels/source/stages.py: where each stage of the method is evaluated, from the constants in tableau.py.

Straight-line code in which a constant that is zero costs nothing; by hand it would be copied a dozen times.
"""

from __future__ import annotations

import re
import textwrap
from pathlib import Path

SOURCE = Path(__file__).resolve().parent.parent / "tracer" / "kernels" / "source"
HEAD = '''\
"""Where the stages of a step are evaluated: written by ``scripts/write_stages.py`` from tableau.py.

Each keeps the slopes of the stage before and makes way for its own. Those are computed by the same machine code for all
stages (`advance.slopes_all`): twelve copies of it would not fit into the processor's store of decoded instructions.
"""

from __future__ import annotations

from typing import Any

from tracer.kernels.arith import inlined

from . import tableau as tb
from .layout import (
    {names}
    KS, LS, PHI, PS, R, RS, STEP, T, TS,
)  # fmt: skip
'''
STAGE = '''

@inlined
def stage_{i}(lane: Any, W: Any) -> None:
    """Time and place of stage {i}."""
    h = W[STEP + lane]
    k, w = W[KS + lane], W[LS + lane]
    W[K{last} + lane], W[L{last} + lane] = k, w
    W[TS + lane] = W[T + lane] + tb.C{i} * h
{r}
{p}
'''


def constants() -> set[str]:
    text = (SOURCE / "tableau.py").read_text(encoding="utf-8")
    return set(re.findall(r"^(\w+) = ", text, flags=re.M))


def sum_of(target: str, base: str, letter: str, stage: int, known: set[str]) -> str:
    terms = [f"tb.A{stage}_{j} * W[{letter}{j} + lane]" for j in range(1, stage) if f"A{stage}_{j}" in known]
    terms[-1] = f"tb.A{stage}_{stage - 1} * {'k' if letter == 'K' else 'w'}"
    # two sums side by side take half as long as one behind the other
    half = (len(terms) + 1) // 2 if len(terms) > 3 else len(terms)
    parts = [" + ".join(part) for part in (terms[:half], terms[half:]) if part]
    total = parts[0] if len(parts) == 1 else f"({parts[0]}) + ({parts[1]})"
    line = f"W[{target} + lane] = W[{base} + lane] + h * ({total})"
    return "\n".join(textwrap.wrap(line, 116, initial_indent=" " * 4, subsequent_indent=" " * 8))


def text() -> str:
    """The module, whole."""
    known = constants()
    stages = [*range(2, 13), 14, 15, 16]
    rows = [f"{letter}{i}" for letter in "KL" for i in range(1, 16)]
    names = "\n    ".join(textwrap.wrap(", ".join(rows) + ",", 110))
    module = HEAD.replace("{names}", names)
    for i in stages:
        r, phi = sum_of("RS", "R", "K", i, known), sum_of("PS", "PHI", "L", i, known)
        module += STAGE.format(i=i, last=i - 1, r=r, p=phi)
    return module


if __name__ == "__main__":
    (SOURCE / "stages.py").write_text(text(), encoding="utf-8")
