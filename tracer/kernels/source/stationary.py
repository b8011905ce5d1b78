"""All places where the drift stands still: grad H = 0, extrema (O points) and saddles (X points) of H.

A grid is searched for patches in which both slopes change sign; from each Newton's method sets out. The partner of a
point that is nearly degenerate is looked for where the soft curvature should change sign. The count is then held to
the index theorem: along the boundaries of the annulus grad H turns as often as extrema outnumber saddles.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled

from .circles import BEND, RISE, SIDE
from .energy import NEAR, curvature, energy, sample_circle, wrapped

PHI_SAMPLES = 96
REFINEMENTS = 3  # of the grid, each twice as fine, until the index theorem holds
LEVEL_FLAT = 1e-11  # variation with azimuth below this, of the terms of H: none
SAME, CLOSE = 1e-7, 3e-4  # distances within which two roots are one; two points are not told apart
SOFT = 1e-9  # ratio of curvatures below which a point is degenerate
RADIUS = 2e-3  # within it a separatrix is its tangent
# columns of the points; kinds
X, P, H, KIND, NEARBY, XX, XP, PP = range(8)
DEGENERATE, MINIMUM, MAXIMUM, SADDLE = range(4)


@compiled
def principal(xx: Any, xp: Any, pp: Any) -> Any:
    """Eigenvalues of a symmetric matrix, the softer one first, and the direction of that."""
    mean, half = 0.5 * (xx + pp), 0.5 * (xx - pp)
    root = np.sqrt(half * half + xp * xp)
    big = mean + root if mean >= 0.0 else mean - root
    small = (xx * pp - xp * xp) / big if big != 0.0 else 0.0
    # the big one's direction is (big - pp, xp) or (xp, big - xx), whichever is longer; the soft one's is across
    ex, ey = (big - pp, xp) if abs(big - pp) > abs(big - xx) else (xp, big - xx)
    n = np.sqrt(ex * ex + ey * ey)
    return (small, big, -ey / n, ex / n) if n > 0.0 else (small, big, 1.0, 0.0)


@compiled
def root_near(x: Any, phi: Any, edges: Any, reach: Any, F: Any) -> Any:
    """A zero of grad H within `reach`, by Newton's method along the principal directions; and whether there is one."""
    x0, phi0, away = x, phi, 1.0
    for _ in range(40):
        _, gx, gp, _ = energy(x, phi, F)
        h = 1e-5
        _, a, b, _ = energy(x + h, phi, F)
        _, c, d, _ = energy(x - h, phi, F)
        _, _, e, _ = energy(x, phi + h, F)
        _, _, f, _ = energy(x, phi - h, F)
        small, big, ex, ey = principal(0.5 * (a - c) / h, 0.5 * (b - d) / h, 0.5 * (e - f) / h)
        if big == 0.0:
            return x, phi, False
        soft = -(gx * ex + gp * ey) / small if small != 0.0 else 0.0
        stiff = -(gp * ex - gx * ey) / big
        soft, stiff = min(max(soft, -0.1), 0.1), min(max(stiff, -0.1), 0.1)
        x, phi = x + soft * ex - stiff * ey, phi + soft * ey + stiff * ex
        away = max(abs(soft), abs(stiff))
        if max(abs(x - x0), abs(phi - phi0)) > reach or not (edges[0] - 0.1 < x < edges[1] + 0.1):
            return x, phi, False
        if away <= 1e-12:
            break
    return x, phi, away <= 1e-7 and edges[0] < x < edges[1]


@compiled
def keep_root(x: Any, phi: Any, found: Any, count: Any) -> Any:
    """Append a root that is not there yet; returns the number then, -1 if too many."""
    phi = wrapped(phi)
    for j in range(count):
        if abs(found[j, X] - x) < SAME and abs(wrapped(found[j, P] - phi)) < SAME:
            return count
    if count < 0 or count >= found.shape[0]:
        return -1
    found[count, X], found[count, P] = x, phi
    return count + 1


@compiled
def search(edges: Any, rows: Any, columns: Any, F: Any, found: Any) -> Any:
    """Roots of grad H from a grid; their number, -1 if there are too many, -2 if H is the same all round."""
    W = np.empty(3 * columns)
    signs = np.zeros((rows, columns), np.uint8)
    step = 2.0 * np.pi / columns
    rise = (edges[1] - edges[0]) / (rows - 1)
    flat = True
    for i in range(rows):
        sample_circle(edges[0] + rise * i, columns, W, F)
        for j in range(columns):
            gx, gp = W[j], W[columns + j]
            sign = (1 if gx >= 0.0 else 0) | (2 if gx <= 0.0 else 0) | (4 if gp >= 0.0 else 0) | (8 if gp <= 0.0 else 0)
            signs[i, j] = sign
            flat = flat and abs(gp) <= LEVEL_FLAT * W[2 * columns + j]
    if flat:
        return -2
    count, reach = np.int64(0), 4.0 * max(step, rise)  # a plain 0 would be a type of its own
    for i in range(rows - 1):
        for j in range(columns):
            # the cell and its neighbours: a patch of 4 x 4 places
            seen = 0
            for a in range(max(i - 1, 0), min(i + 3, rows)):
                for b in range(j - 1, j + 3):
                    seen |= signs[a, b % columns]
            if seen == 15:
                x, phi, there = root_near(edges[0] + rise * (i + 0.5), step * (j + 0.5) - np.pi, edges, reach, F)
                if there:
                    count = keep_root(x, phi, found, count)
    return partners(edges, F, found, count)


@compiled
def softness(x: Any, phi: Any, F: Any) -> Any:
    """Soft and stiff curvature of a root, the soft direction, and how far along it its partner stands, to first order:
    twice as far as where the soft curvature changes sign; 1e300 if it does not."""
    xx, xp, pp = curvature(x, phi, NEAR, F)
    small, big, ex, ey = principal(xx, xp, pp)
    change, h = 0.0, 0.01
    for way in (1.0, -1.0):
        a, b, c = curvature(x + way * h * ex, phi + way * h * ey, NEAR, F)
        change += way * 0.5 / h * (a * ex * ex + 2.0 * b * ex * ey + c * ey * ey)
    return small, big, ex, ey, -2.0 * small / change if abs(change) > 1e-9 * abs(big) else 1e300


@compiled
def partners(edges: Any, F: Any, found: Any, count: Any) -> Any:
    """Look beside every root with one soft curvature for the root it is about to merge with."""
    j = 0
    while 0 <= j < count:
        x, phi = found[j, X], found[j, P]
        small, big, ex, ey, far = softness(x, phi, F)
        if abs(small) < 0.05 * abs(big) and SAME < abs(far) < 0.3:
            nx, nphi, there = root_near(x + far * ex, phi + far * ey, edges, 0.1 + abs(far), F)
            if there:
                count = keep_root(nx, nphi, found, count)
        j += 1
    return count


@compiled
def describe(found: Any, count: Any, edges: Any, F: Any) -> Any:
    """Fill in what is known of each root; roots that lie too close to be told apart become one degenerate point.
    Returns the number left."""
    kept = 0
    for j in range(count):
        twin = -1
        for i in range(kept):
            if abs(found[i, X] - found[j, X]) < CLOSE and abs(wrapped(found[i, P] - found[j, P])) < CLOSE:
                twin = i
        if twin >= 0:
            found[twin, KIND] = DEGENERATE
            continue
        x, phi = found[j, X], found[j, P]
        xx, xp, pp = curvature(x, phi, NEAR, F)
        small, big, _, _, far = softness(x, phi, F)
        kind = SADDLE if small * big < 0.0 else (MINIMUM if big > 0.0 else MAXIMUM)
        found[kept, X], found[kept, P], found[kept, H] = x, phi, energy(x, phi, F)[0]
        found[kept, KIND] = kind if abs(small) > SOFT * abs(big) and abs(far) > CLOSE else DEGENERATE
        found[kept, XX], found[kept, XP], found[kept, PP] = xx, xp, pp
        kept += 1
    for j in range(kept):
        radius = min(RADIUS, 0.5 * (found[j, X] - edges[0]), 0.5 * (edges[1] - found[j, X]))
        for i in range(kept):
            if i != j:
                dx, dp = found[i, X] - found[j, X], wrapped(found[i, P] - found[j, P])
                radius = min(radius, 0.2 * np.sqrt(dx * dx + dp * dp))
        found[j, NEARBY] = radius
    return kept


@compiled
def index_of(x: Any, phi: Any, radius: Any, F: Any) -> Any:
    """How often grad H turns on a small circle round a place, in the sense of the circle."""
    total, before, n = 0.0, 0.0, 128
    for j in range(n + 1):
        angle = 2.0 * np.pi * j / n
        _, gx, gp, _ = energy(x + radius * np.cos(angle), phi + radius * np.sin(angle), F)
        direction = np.arctan2(gp, gx)
        if j > 0:
            total += wrapped(direction - before)
        before = direction
    return np.rint(total / (2.0 * np.pi))


@compiled
def balanced(found: Any, count: Any, circles: Any, n_circle: Any, F: Any) -> Any:
    """Whether the indices of all points add up to the turns of grad H along the outer circle, less those on the inner.

    Along a circle grad H turns once for every net passage of dH/dphi through zero with dH/dx > 0.
    """
    total = 0.0
    for j in range(n_circle):
        if circles[j, RISE] > 0.0:
            total += circles[j, SIDE] * circles[j, BEND]
    for j in range(count):
        if found[j, KIND] == DEGENERATE:
            total -= index_of(found[j, X], found[j, P], found[j, NEARBY], F)
        else:
            total -= -1.0 if found[j, KIND] == SADDLE else 1.0
    return abs(total) < 0.5


@compiled
def stationary_points(edges: Any, circles: Any, n_circle: Any, F: Any, found: Any) -> Any:
    """All stationary points inside the annulus into `found`; their number (-2 if H is the same all round), and
    whether the index theorem holds."""
    rows = int(np.ceil((edges[1] - edges[0]) * PHI_SAMPLES / (2.0 * np.pi))) + 2
    count = np.int64(0)
    for finer in range(REFINEMENTS):
        count = search(edges, rows << finer, PHI_SAMPLES << finer, F, found)
        if count == -2:
            return count, True
        if count >= 0:
            count = describe(found, count, edges, F)
            if n_circle >= 0 and balanced(found, count, circles, n_circle, F):
                return count, True
    return max(count, 0), False
