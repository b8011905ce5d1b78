"""Following a level curve of H: predicted along the tangent, corrected along the gradient, never integrated in time.

A step is taken back when the curve turned too far or the correction was large. Two neighbouring branches of one level
run in opposite directions, so a step that jumped from one to the other is seen by its turn.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled

from .energy import energy, wrapped

FAILED, OUTER, INNER, JOINED, ROUND = range(5)  # how a walk ends
SHORTEST = 1e-10  # step below which a walk is given up
MOST = 4000  # steps
ROUNDING = 2e-15  # of the terms of H
FINE, QUICK = (0.02, 0.05), (0.15, 0.2)  # longest step and turn in a step: of a curve to draw; of one only followed


@compiled
def polished(x: Any, phi: Any, level: Any, F: Any) -> Any:
    """The point of the level near (x, phi), found along the gradient, and whether it was."""
    for _ in range(30):
        h, gx, gp, size = energy(x, phi, F)
        n2 = gx * gx + gp * gp
        if not n2 > 0.0:
            return x, phi, False
        off = (level - h) / n2
        away = abs(off) * np.sqrt(n2)
        if away > 0.1:
            return x, phi, False
        x, phi = x + off * gx, phi + off * gp
        if away <= 1e-13 + ROUNDING * size / np.sqrt(n2):
            return x, phi, True
    return x, phi, False


@compiled
def on_edge(edge: Any, guess: Any, one: Any, other: Any, level: Any, F: Any) -> Any:
    """Where the level meets the circle x = `edge` between or near the azimuths `one` and `other`, and whether it does.

    Newton's method, kept within a bracket where there is one.
    """
    low, high = min(one, other), max(one, other)
    at_low = energy(edge, low, F)[0] - level
    bracketed = at_low * (energy(edge, high, F)[0] - level) <= 0.0
    margin = 0.0 if bracketed else high - low + 1e-3
    first, last, phi = low - margin, high + margin, min(max(guess, low), high)
    for _ in range(80):
        h, _, gp, size = energy(edge, phi, F)
        f = h - level
        if bracketed:
            if f * at_low > 0.0:
                first = phi
            else:
                last = phi
        step = -f / gp if gp != 0.0 else 1e300
        new = phi + step
        if not (first <= new <= last):
            if not bracketed:
                return phi, False
            new = 0.5 * (first + last)
        if abs(new - phi) <= 1e-14 or abs(f) <= 0.1 * ROUNDING * size:
            return new, True
        phi = new
    return phi, bracketed


@compiled
def leaving(x: Any, phi: Any, nx: Any, nphi: Any, level: Any, F: Any, edges: Any, touches: Any) -> Any:
    """Whether the step from (x, phi) to (nx, nphi) leaves the domain: how, at which azimuth, and if that was found.

    A step whose ends both lie inside left the domain in between just when a point where H is stationary along the
    circle lies between, and the level passes it on the far side. `touches` has rows (side, phi, H, dH/dx).
    """
    for side in (1.0, -1.0):
        edge = edges[1] if side > 0.0 else edges[0]
        how = OUTER if side > 0.0 else INNER
        if side * (nx - edge) > 0.0:
            guess = phi + (edge - x) / (nx - x) * (nphi - phi)
            at, found = on_edge(edge, guess, phi, nphi, level, F)
            return how, at, found
        reach = abs(nphi - phi) + abs(nx - x)
        if max(side * x, side * nx) < side * edge - reach:
            continue
        for j in range(touches.shape[0]):
            if touches[j, 0] != side:
                continue
            ahead = wrapped(touches[j, 1] - phi)
            lift = side * (level - touches[j, 2]) / touches[j, 3]
            if ahead * (ahead - (nphi - phi)) < 0.0 and 1e-12 < lift < reach:
                at, found = on_edge(edge, phi + 0.5 * ahead, phi, phi + ahead, level, F)
                return how, at, found
    return FAILED, phi, True


@compiled
def passes(dx: Any, dp: Any, tx: Any, tp: Any, ux: Any, up: Any, sx: Any, sp: Any) -> Any:
    """Whether a step (dx, dp) with tangents (tx, tp) and (ux, up) at its ends passes through the point (sx, sp) of its
    own level: about as far beside the chord as the cubic with those tangents."""
    v2 = dx * dx + dp * dp
    share = (dx * sx + dp * sp) / v2
    if not 0.0 < share <= 1.0:
        return False
    first = (tp * dx - tx * dp) / (tx * dx + tp * dp)
    last = (up * dx - ux * dp) / (ux * dx + up * dp)
    aside = share * (1.0 - share) * ((1.0 - share) * first - share * last)
    return abs((sp * dx - sx * dp) / v2 - aside) <= 0.5 * (abs(first) + abs(last)) + 1e-4


@compiled
def walk(
    x: Any, phi: Any, level: Any, way: Any, h: Any, F: Any, edges: Any, pace: Any, touches: Any, anchors: Any, kept: Any
) -> Any:
    """Follow the level curve through (x, phi) until it leaves the domain, joins an anchor or returns to its start.

    Parameters
    ----------
    way : +-1
        With +1 larger H lies on the right hand; a positive charge drifts that way.
    h : float
        First step.
    edges, pace : tuple of 2 float
        ln r of the boundaries; longest step and turn in a step.
    touches, anchors : (n, 4), (n, 3)
        See `leaving`; and the nodes of this level, as (x, phi, radius within which they are joined).
    kept : (n, 2)
        Takes the points, the first and the last included, unless it is empty.

    Returns
    -------
    end, x, phi, count, node
        How it ended and where (phi unwrapped), the points kept, the anchor joined.
    """
    longest, turn = pace
    keeping = kept.shape[0] > 0
    if keeping:
        kept[0, 0], kept[0, 1] = x, phi
    count, ox, op, before = 1, 0.0, 0.0, 0.0
    _, gx, gp, size = energy(x, phi, F)
    n = np.sqrt(gx * gx + gp * gp)
    if not n > 0.0:
        return FAILED, x, phi, count, -1
    tx, tp = -way * gp / n, way * gx / n
    if x >= edges[1] and tx > 0.0:
        return OUTER, x, phi, count, -1
    if x <= edges[0] and tx < 0.0:
        return INNER, x, phi, count, -1
    x0, phi0, tx0, tp0 = x, phi, tx, tp
    for _ in range(MOST):
        step = h
        for j in range(anchors.shape[0]):
            dx, dp = anchors[j, 0] - x, wrapped(anchors[j, 1] - phi)
            distance = np.sqrt(dx * dx + dp * dp)
            ahead = dx * tx + dp * tp
            if distance < 1.5 * anchors[j, 2] and ahead > 0.5 * distance:
                if keeping:
                    kept[count, 0], kept[count, 1] = anchors[j, 0], phi + dp
                return JOINED, anchors[j, 0], phi + dp, count + 1, j
            if ahead > 0.0:
                step = min(step, 0.7 * distance)
        end, at, nx, nphi, ux, up, turned = FAILED, phi, x, phi, tx, tp, 0.0
        while True:
            bend = 0.5 * step / before if before > 0.0 else 0.0
            nx = x + step * (tx + bend * (tx - ox))
            nphi = phi + step * (tp + bend * (tp - op))
            good, moved = False, 0.0
            for _ in range(6):
                value, gx, gp, size = energy(nx, nphi, F)
                n = np.sqrt(gx * gx + gp * gp)
                off = (level - value) / (n * n)
                nx, nphi = nx + off * gx, nphi + off * gp
                away = abs(off) * n
                moved += away
                if not moved <= 0.3 * step:
                    break
                if away <= 1e-6 * step + min(ROUNDING * size / n, 0.01 * step):
                    good = True
                    break
            if good:
                ux, up = -way * gp / n, way * gx / n
                turned = abs(tx * up - tp * ux)
                good = tx * ux + tp * up > 0.0 and turned <= 2.5 * turn
            if good:
                end, at, good = leaving(x, phi, nx, nphi, level, F, edges, touches)
            if good:
                break
            step *= 0.5
            if step < SHORTEST:
                return FAILED, x, phi, count, -1
        if end != FAILED:
            x = edges[1] if end == OUTER else edges[0]
            if keeping:
                kept[count, 0], kept[count, 1] = x, at
            return end, x, at, count + 1, -1
        sx, sp = x0 - x, wrapped(phi0 - phi)
        if anchors.shape[0] == 0 and passes(nx - x, nphi - phi, tx, tp, ux, up, sx, sp) and tx * tx0 + tp * tp0 > 0.5:
            if keeping:
                kept[count, 0], kept[count, 1] = x0, phi + sp
            return ROUND, x0, phi + sp, count + 1, -1
        ox, op, before = tx, tp, step
        x, phi, tx, tp = nx, nphi, ux, up
        if keeping:
            kept[count, 0], kept[count, 1] = x, phi
        count += 1
        h = min(longest, step * min(max(turn / (turned + 1e-9), 0.4), 2.0))
        if keeping and count >= kept.shape[0] - 1:
            break
    return FAILED, x, phi, count, -1
