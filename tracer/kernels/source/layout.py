"""The work array: one row for each quantity, one column for each lane, flat, so that no two rows can alias.

``W[R + lane]``: the names are the offsets of the rows. The rows of the drivers come last: the start of the segment,
then value there and slope of each.
"""

from __future__ import annotations

from .field import DRIVERS

LANES = 32  # a few times the doubles in a vector register

(
    R, PHI, T, H, TURNS,  # the particle: place, time, next step, whole turns
    MU, K, Q, M,  # what it is: invariants, 1/charge, 2/(m c^2)
    LIVE, ACCEPTED, REJECTED,  # 1 while a particle rides here; its steps so far
    UNTIL, LIMIT,  # its last time; that or the end of the segment, whichever comes first
    NEXT, WATCH,  # next time to save; 1 while the loss cone is watched for
    STEP, TN, RN, PN, OK, HN, STOP,  # the trial; up to where its times are to be saved
    LAND,  # length of the next step where it is to end on a limit, else 0
    BM, BT,  # mirror field and the rate of that, at the start of the step
    TS, RS, PS, KS, LS, BS, BTS,  # the stage: time, place, slopes, mirror field and the rate of that
    CALL,  # what scalar code is called for
    K1, K2, K3, K4, K5, K6, K7, K8, K9, K10, K11, K12, K13, K14, K15,  # slopes of r by stage
    L1, L2, L3, L4, L5, L6, L7, L8, L9, L10, L11, L12, L13, L14, L15,  # slopes of phi
    F0, F1, F2, F3, F4, F5, F6, F7,  # the interpolant of r
    F8, F9, F10, F11, F12, F13, F14, F15,  # and of phi
    SR, SP,  # a saved point
    D0,  # the first of the drivers
) = range(0, 83 * LANES, LANES)  # fmt: skip
SIZE = D0 + (1 + 2 * DRIVERS) * LANES
