"""Tolerances of the tests, each with its reason. A test names the row it uses."""

from __future__ import annotations

from typing import NamedTuple


class Tolerance(NamedTuple):
    """A relative bound, unless the reason says otherwise."""

    bound: float
    reason: str


TABLE = {
    "rounding": Tolerance(1e-14, "the same formula in another order of operations"),
    "point function": Tolerance(1e-14, "numpy's array and scalar loops may differ in the last bits of power and cbrt"),
    "sin and cos": Tolerance(
        2e-15, "absolute: the angle is doubled twice, which multiplies a rounding of 1e-16 by a few"
    ),
    "power": Tolerance(5e-15, "exp(y ln x): a rounding of 1e-16 times y ln x, which is up to 24"),
    "rough root": Tolerance(1e-15, "iterated by multiplications: the last digit may be off, squared twice as much"),
    "mirror ratio": Tolerance(1e-13, "what the polynomial of degree 26 promises at all pitch angles"),
    "mirror ratio slope": Tolerance(1e-12, "its derivative, where the last coefficients count 26 times"),
    "bounce integral": Tolerance(1e-10, "what is asked of T and Y from 1 to 89.9 degrees, and of Y / cos^2 above"),
    "slow approximation T": Tolerance(1e-2, "Schulz & Lanzerotti (1974): their closed form of T is good to 1 %"),
    "fast approximation T": Tolerance(3e-2, "Hamlin et al. (1961): their line through T is good to 3 %"),
    "traced line": Tolerance(1e-11, "tracing at rtol 1e-13; near 90 degrees the fit of B about the equator adds 4e-12"),
    "traced slope": Tolerance(1e-10, "eighth-order differences in steps of 2 %: 64 h^8 = 2e-12, and traced k over h"),
    "referee line": Tolerance(1e-9, "adaptive quadrature with algebraic weights along a second, independent tracing"),
    "difference of slopes": Tolerance(1e-9, "central differences of a quantity known to 1e-12, steps of 2 %"),
    "potential slope": Tolerance(1e-10, "eighth-order differences of a closed form, steps of 1 %"),
    "field derivative": Tolerance(1e-9, "eighth-order differences of B in steps of 1 % of r, relative to B / r"),
    "drift terms": Tolerance(1e-10, "what the kernel fits of the bounce integrals may add, against traced lines"),
    "frame round trip": Tolerance(1e-9, "what is asked; rotations by matrices lose 1e-15 each"),
    "earth orientation deg": Tolerance(
        0.0038, "absolute: |UT1 - UTC| below 0.9 s by definition, at 15 seconds of arc a second"
    ),
    "almanac sun deg": Tolerance(0.01, "absolute: what the formula promises, 1950-2050"),
    "shorter almanac sun deg": Tolerance(0.011, "absolute: it promises two decimals; measured 0.0107"),
    "pole position deg": Tolerance(0.06, "absolute: published to one decimal, from other generations of the IGRF"),
    "published rotation km": Tolerance(1e-3, "absolute: the example uses Earth orientation of 2004, later revised"),
    "two-line set km": Tolerance(
        2e-7, "absolute: the verification output has eight decimals; sgp4's own tests take this"
    ),
    "first order in J2": Tolerance(3e-3, "secular rates of second order are J2 times those of first, here times a few"),
    "interpolating polynomial": Tolerance(1e-12, "the same polynomial by another algorithm, seven nodes or less"),
    "two runs of a path": Tolerance(1e-5, "each is asked to end within 1e-6 R_E; entries are divided by the drift"),
    "boundary curve re": Tolerance(1e-8, "absolute, R_E: what is asked outside 0.01 R_E of a saddle"),
    "entry by integration h": Tolerance(
        1e-6, "absolute: 1e-11 R_E a step, magnified where paths part and where they enter along the boundary"
    ),
    "closed form": Tolerance(1e-9, "root finding on closed-form potentials"),
}


def bound(name: str) -> float:
    """The bound of a row."""
    return TABLE[name].bound
