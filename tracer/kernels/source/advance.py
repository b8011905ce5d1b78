"""Particles from release to end, one after another: the entry points of a compiled field."""

from __future__ import annotations

from typing import Any

import numpy as np

from tracer.kernels.arith import compiled, entry_point
from tracer.status import Cause

from .crossing import (
    CONE,
    INNER,
    NEVER,
    OUTER,
    first_crossing,
    initial_step,
    may_cross,
    may_enter_cone,
    polished,
)
from .drift import depth_in_cone, slope, state
from .step import along, interpolant, trial

DRIFTING, FAILED = int(Cause.DRIFTING), int(Cause.FAILED)
CONE_OFF, CONE_STOP = 0, 2
MOST_STEPS = 20_000_000
LEAST_STEP = 1e-13  # hours
TWO_PI = 2.0 * np.pi


@compiled
def write_state(row: Any, r: Any, phi: Any, p: Any, C: Any) -> None:
    """r in R_E, local time in hours, energy in keV, pitch in degrees."""
    energy, cot2 = state(r, phi, p, C)
    mlt = (12.0 + phi * (12.0 / np.pi)) % 24.0
    row[0] = r
    row[1] = 0.0 if mlt >= 24.0 else mlt
    row[2] = energy
    cot = np.sqrt(cot2)
    row[3] = 90.0 - np.arctan(cot) * (180.0 / np.pi) if cot < 1.0 else np.arctan(1.0 / cot) * (180.0 / np.pi)


@compiled
def segment_at(edges: Any, t: Any, sign: Any) -> Any:
    """Index of the driver segment that is entered at `t`."""
    i = np.searchsorted(edges, t, side="right") - 1 if sign > 0 else np.searchsorted(edges, t) - 1
    return min(max(i, 0), edges.size - 2)


@compiled
def save(
    times: Any, j: Any, sign: Any, t: Any, step: Any, stop: Any, rn: Any, pn: Any, F: Any, p: Any, C: Any, rows: Any
) -> Any:
    """Write the saved times up to `stop` from the interpolant; returns the index of the next one."""
    while j < times.size and sign * (times[j] - stop) <= 0.0:
        if times[j] == t + step:
            write_state(rows[j], rn, pn, p, C)
        else:
            x = (times[j] - t) / step
            write_state(rows[j], along(F, 0, x), along(F, 8, x), p, C)
        j += 1
    return j


@compiled
def follow(P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, F: Any, end: Any, rows: Any) -> None:
    """Integrate one particle.

    `P` is (r, phi, release, mu, k, 1/q, 2/(m c^2)); `rules` is (end of run, +-1, outer, inner, foot radius, cone
    mode, tolerance); `end` takes (time, r, mlt, energy, pitch, cause, turns, first time in the cone, accepted
    steps, rejected steps).
    """
    t_end, sign, outer, inner, foot_re, cone, tolerance = rules
    r, phi, t = P[0], P[1], P[2]
    p = (P[3], P[4], P[5], P[6])
    start, turns, cone_h = phi, 0.0, np.nan
    accepted, rejected = 0, 0
    cause = DRIFTING
    seg = segment_at(edges, t, sign)
    D = segments[seg]
    k1, l1 = slope(t, r, phi, p, C, D)
    j = np.searchsorted(sign * times, sign * t)
    if j < times.size and times[j] == t:
        write_state(rows[j], r, phi, p, C)
        j += 1
    g = -1.0
    if cone != CONE_OFF:
        g = depth_in_cone(r, phi, p, foot_re, C)
        if g >= 0.0:
            cone_h = t
            if cone == CONE_STOP:
                cause = CONE
    if (r >= outer and sign * k1 > 0.0) or r > outer:
        cause = OUTER
    if (r <= inner and sign * k1 < 0.0) or r < inner:
        cause = INNER
    h = initial_step(k1, l1, tolerance)
    while cause == DRIFTING and t != t_end:
        limit = edges[seg + 1] if sign > 0.0 else edges[seg]
        limit = limit if sign * (t_end - limit) > 0.0 else t_end
        left = abs(limit - t)
        clipped = h > 0.5 * left
        step = sign * (left if h >= left else (0.5 * left if clipped else h))
        tn = limit if h >= left else t + step
        rn, pn, error, stages = trial(t, r, phi, step, k1, l1, p, C, D)
        q = error / tolerance
        if not q <= 1.0:  # a NaN is a rejection too
            rejected += 1
            h = abs(step) * (max(0.2, 0.9 * q**-0.125) if q < 1e30 else 0.1)
            if h < LEAST_STEP:
                cause = FAILED
            continue
        accepted += 1
        grown = abs(step) * min(6.0, 0.9 * (q + 1e-30) ** -0.125)
        h = max(h, grown) if clipped else grown
        kn, ln = slope(tn, rn, pn, p, C, D)
        gn = g
        crossing = may_cross(r, rn, step, k1, kn, outer, inner)
        watching = cone != CONE_OFF and np.isnan(cone_h)
        entering = False
        if watching:
            gn = depth_in_cone(rn, pn, p, foot_re, C)
            entering = may_enter_cone(g, gn, r, rn, phi, pn, step, k1, l1, kn, ln, foot_re, p, C)
        stop, which = tn, DRIFTING
        if crossing or entering or (j < times.size and sign * (times[j] - tn) <= 0.0):
            interpolant(t, r, phi, step, rn, pn, k1, l1, kn, ln, stages, p, C, D, F)
        if crossing or entering:
            x = NEVER
            for candidate in (OUTER, INNER, CONE):
                if candidate == CONE and not entering:
                    continue
                if candidate != CONE and not crossing:
                    continue
                found = first_crossing(candidate, F, outer, inner, foot_re, p, C)
                if candidate == CONE and cone != CONE_STOP:
                    if found < NEVER and found <= x:
                        at, _, _ = polished(CONE, found, t, r, phi, step, k1, l1, outer, inner, foot_re, p, C, D)
                        cone_h = t + at
                elif found < x:
                    x, which = found, candidate
            if which != DRIFTING:
                at, rn, pn = polished(which, x, t, r, phi, step, k1, l1, outer, inner, foot_re, p, C, D)
                rn = outer if which == OUTER else (inner if which == INNER else rn)
                stop = t + at
                if which == CONE:
                    cone_h = stop
        j = save(times, j, sign, t, step, stop, rn, pn, F, p, C, rows)
        cause = which
        t, r, phi, k1, l1, g = stop, rn, pn, kn, ln, gn
        if phi > np.pi:
            phi -= TWO_PI
            turns += 1.0
        elif phi < -np.pi:
            phi += TWO_PI
            turns -= 1.0
        if t == limit and t != t_end:
            seg += 1 if sign > 0.0 else -1
            D = segments[seg]
            k1, l1 = slope(t, r, phi, p, C, D)
        if accepted > MOST_STEPS:
            cause = FAILED
    end[0] = t
    write_state(end[1:5], r, phi, p, C)
    end[5], end[6], end[7] = cause, turns + (phi - start) / TWO_PI, cone_h
    end[8], end[9] = accepted, rejected


@entry_point
def advance(P: Any, C: Any, edges: Any, segments: Any, rules: Any, times: Any, end: Any, track: Any) -> None:
    """Integrate the particles `P`, shape (n, 7), into `end`, shape (n, 10), and `track`, shape (n, n_time, 4)."""
    F = np.empty(16)
    for i in range(P.shape[0]):
        follow(P[i], C, edges, segments, rules, times, F, end[i], track[i])
