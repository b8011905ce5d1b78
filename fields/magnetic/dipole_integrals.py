"""The bounce integrals T and Y of a dipole, as quadratures, and the mirror point they belong to.

With x the sine of magnetic latitude, x_m its value at the mirror point and x = x_m sin(theta), both integrands are
smooth and even about both ends of 0 <= theta <= pi/2, so the midpoint rule converges exponentially. The factor that
vanishes at the mirror point is divided out by hand: no digit is lost near 90 degrees.

T(y) = integral of dx sqrt(1 + 3 x^2) / sqrt(1 - B/B_m),  Y(y) = 2 * integral of dx sqrt(1 + 3 x^2) sqrt(1 - B/B_m),
both from 0 to x_m: Hamlin et al. (1961), J. Geophys. Res. 66, 1; Schulz & Lanzerotti (1974), Particle Diffusion in
the Radiation Belts.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np
from numpy.typing import NDArray

from fields.units import Floats

Indices = NDArray[np.intp]

BLOCK = 4096  # lines integrated at once, of the fewest nodes: bounds the memory of a long array
LEAST_POINTS = 32
NEWTON_STEPS = 8  # quadratic from a start within a factor 1.5: five reach the last digit
DIGITS = 18.0  # exponent of the wanted quadrature error, natural units


def mirror_latitude(cot2: Floats) -> tuple[Floats, Floats]:
    """(sin^2, cos^2) of the mirror latitude, each with full relative accuracy.

    Solves ``ln(B_m/B_eq) = ln(1 + cot2)`` by Newton's method, near the equator in ``-ln(cos^2)``, far from it in
    ``ln(cos^2)`` itself.

    Parameters
    ----------
    cot2 : ndarray
        cot^2 of the equatorial pitch angle, 0 or more.
    """
    target = np.log1p(cot2)
    # u = -ln(cos^2 latitude): ln(B/B_eq) = 3 u + ln(1 + 3 sin^2) / 2, slope 4.5 at the equator, 3 far out
    u = target / 4.5
    for _ in range(NEWTON_STEPS):
        x2 = -np.expm1(-u)
        value = 3.0 * u + 0.5 * np.log1p(3.0 * x2)
        u = u - (value - target) / (3.0 + 1.5 * np.exp(-u) / (1.0 + 3.0 * x2))
    return np.asarray(-np.expm1(-u)), np.asarray(np.exp(-u))


def node_doublings(x2m: Floats, c2m: Floats) -> NDArray[np.int64]:
    """How often `LEAST_POINTS` nodes must be doubled to serve each mirror point, shape (n,)."""
    # the integrand's nearest singularity lies asinh(sqrt(c2m / x2m)) off the real axis
    width = np.arcsinh(np.sqrt(c2m / np.maximum(x2m, 1e-300)))
    wanted = 2.5 * DIGITS / (4.0 * np.minimum(width, 1.0))
    return np.asarray(np.ceil(np.log2(np.maximum(wanted / LEAST_POINTS, 1.0))), dtype=np.int64)


def latitude_nodes(x2m: Floats, c2m: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Midpoint nodes in theta along the lines with mirror points `x2m`, `c2m` of shape (n,).

    Returns
    -------
    c2, above, path, depth : ndarray, shape (n, n_node)
        ``c2`` is cos^2 of latitude and ``above`` its excess over the mirror point's; ``path`` is sqrt(1 + 3 x^2);
        ``depth`` is the smooth part of sqrt(1 - B/B_m), which equals ``sqrt(above) depth``.
    """
    count = LEAST_POINTS << int(node_doublings(x2m, c2m).max())
    cos2_theta = np.cos((np.arange(count) + 0.5) * (np.pi / 2 / count)) ** 2
    cm = c2m[:, None]
    above = x2m[:, None] * cos2_theta
    c = cm + above
    # B^2 / B_eq^2 = (4 - 3c) / c^6, so B_m^2 - B^2 has the factor c - cm = x2m cos^2(theta); the rest of it:
    s4 = c**4 + cm * (c**3 + cm * (c**2 + cm * (c + cm)))
    s5 = c**5 + cm * s4
    rest = (4.0 * s5 - 3.0 * c * cm * s4) / (c**6 * cm**6)
    b = np.sqrt(4.0 - 3.0 * c) / c**3
    bm = np.sqrt(4.0 - 3.0 * cm) / cm**3
    return c, above, np.sqrt(4.0 - 3.0 * c), np.sqrt(rest / ((bm + b) * bm))


def bounce_integrals(cot2: Floats) -> tuple[Floats, Floats]:
    """T and Y of a dipole.

    Parameters
    ----------
    cot2 : ndarray, shape (n,)
        cot^2 of the equatorial pitch angle, 0 or more.

    Returns
    -------
    T, Y : ndarray, shape (n,)
        Relative error about 1e-14; Y is proportional to cot2 near 90 degrees and keeps its digits there.
    """
    T, Y = np.empty(cot2.shape), np.empty(cot2.shape)
    for part, x2m, c2m in mirror_blocks(cot2):
        T[part], Y[part] = integrals_to_mirror(x2m, c2m)
    return T, Y


def integrals_to_mirror(x2m: Floats, c2m: Floats) -> tuple[Floats, Floats]:
    """T and Y for mirror points given by sin^2 and cos^2 of their latitude, shape (n,)."""
    _, above, path, depth = latitude_nodes(x2m, c2m)
    return np.pi / 2 * np.mean(path / depth, axis=1), np.pi * np.mean(path * depth * above, axis=1)


def average_along(cot2: Floats, value: Callable[[Indices, Floats], Floats]) -> Floats:
    """Bounce average of ``value(indices, cos2_latitude)`` with arrays of shape (n_part,), (n_part, n_node)."""
    mean = np.empty(cot2.shape)
    for part, x2m, c2m in mirror_blocks(cot2):
        c2, _, path, depth = latitude_nodes(x2m, c2m)
        weight = path / depth
        mean[part] = np.mean(weight * value(part, c2), axis=1) / np.mean(weight, axis=1)
    return mean


def mirror_blocks(cot2: Floats) -> Iterator[tuple[Indices, Floats, Floats]]:
    """(indices, x2m, c2m) by blocks that need the same number of nodes.

    A line's nodes, and with them the last bits of its integrals, then depend on it alone and not on the others of the
    call.
    """
    x2m, c2m = mirror_latitude(cot2)
    doublings = node_doublings(x2m, c2m)
    for grade in np.unique(doublings):
        members = np.flatnonzero(doublings == grade)
        size = max(1, BLOCK >> int(grade))
        for start in range(0, members.size, size):
            part = members[start : start + size]
            yield part, x2m[part], c2m[part]
