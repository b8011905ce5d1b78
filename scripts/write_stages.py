"""Write tracer/kernels/source/stages.py: the stages of the method for all lanes at once, from the constants in
tableau.py.

Straight-line code in which a constant that is zero costs nothing; by hand it would be copied a dozen times.
"""

from __future__ import annotations

import re
import textwrap
from pathlib import Path

SOURCE = Path(__file__).resolve().parent.parent / "tracer" / "kernels" / "source"
HEAD = '''\
"""The stages of one step, each for all lanes before the next: written by ``scripts/write_stages.py`` from tableau.py.

Within a stage the lanes are independent, so that the processor works on several registers full of them at once; a step
that went through all stages of one register before the next would wait for itself.
"""

from __future__ import annotations

from typing import Any

from tracer.kernels.arith import inlined, prefer_widest_vectors

from . import tableau as tb
from .drift import slope
from .field import drivers
from .layout import (
    D0, K, {names}
    LANES, M, MU, PHI, Q, R, STEP, T,
)  # fmt: skip
'''
STAGE = '''

@inlined
def stage_{i}(W: Any, C: Any) -> None:
    """Slopes of stage {i}."""
    prefer_widest_vectors()
    for lane in range(LANES):
        h = W[STEP + lane]
        p = (W[MU + lane], W[K + lane], W[Q + lane], W[M + lane])
{r}
{p}
        W[K{i} + lane], W[L{i} + lane] = slope(W[T + lane] + tb.C{i} * h, r, phi, p, C, drivers(W, D0 + lane, LANES))
'''


def constants() -> set[str]:
    text = (SOURCE / "tableau.py").read_text(encoding="utf-8")
    return set(re.findall(r"^(\w+) = ", text, flags=re.M))


def sum_of(target: str, base: str, letter: str, stage: int, known: set[str]) -> str:
    terms = [f"tb.A{stage}_{j} * W[{letter}{j} + lane]" for j in range(1, stage) if f"A{stage}_{j}" in known]
    line = f"{target} = W[{base} + lane] + h * ({' + '.join(terms)})"
    return "\n".join(textwrap.wrap(line, 116, initial_indent=" " * 8, subsequent_indent=" " * 12))


def text() -> str:
    """The module, whole."""
    known = constants()
    stages = [*range(2, 13), 14, 15, 16]
    rows = [f"{letter}{i}" for letter in "KL" for i in range(1, 17)]
    names = "\n    ".join(textwrap.wrap(", ".join(rows) + ",", 110))
    module = HEAD.replace("{names}", names)
    for i in stages:
        module += STAGE.format(i=i, r=sum_of("r", "R", "K", i, known), p=sum_of("phi", "PHI", "L", i, known))
    return module


if __name__ == "__main__":
    (SOURCE / "stages.py").write_text(text(), encoding="utf-8")
