"""Cold plasma in steady fields: open and closed on either side of the last closed equipotential, in closed form.

Corotation Phi = -C/r and shielded convection Phi = -A r^gamma sin(phi): the stagnation point lies at dusk,
r_s^(gamma + 1) = C / (gamma A), and the curve through it obeys Phi(r, phi) = Phi(r_s, dusk) (Volland 1973; Stern 1975;
in x = r / r_s: gamma / x + s x^gamma = gamma + 1, with s the sine of the azimuth from noon).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from access_runs import START
from physics import made
from scipy import constants as codata
from scipy.optimize import brentq
from tolerances import bound

import tracer
from tracer.access_records import AccessResult
from tracer.outcomes import Outcome

HOURS = 480.0  # within 2 % of the curve a path may linger for days
E0 = 0.4  # mV/m
KP = 4.0
C_KV = 2.0 * np.pi / codata.day * made.B0_NT * 1e-9 * 6371.2e3**2 * 1e-3
# Maynard & Chen (1975), constants from memory, as in the model; what is tested here does not depend on them
A2_KV = 0.045 / (1.0 - 0.159 * KP + 0.0093 * KP**2) ** 3
FIELDS: dict[float, tuple[dict[str, Any], float]] = {
    1.0: ({"model": "uniform", "e0_mV_per_m": E0}, E0 * 1e-6 * 6371.2e3),
    2.0: ({"model": "volland-stern", "kp": KP}, A2_KV),
}


def stagnation_re(gamma: float) -> float:
    return float((C_KV / (gamma * FIELDS[gamma][1])) ** (1.0 / (gamma + 1.0)))


def last_closed(gamma: float, mlt_h: float) -> float:
    """The curve's distance over that of the stagnation point."""
    s = np.sin((mlt_h - 12.0) * np.pi / 12.0)
    return float(brentq(lambda x: gamma / x + s * x**gamma - gamma - 1.0, 0.1, 1.0))


def potential(gamma: float, r: Any, mlt_h: Any) -> Any:
    return -C_KV / r - FIELDS[gamma][1] * r**gamma * np.sin((np.asarray(mlt_h) - 12.0) * np.pi / 12.0)


def access(gamma: float, **places: Any) -> AccessResult:
    given = {
        "time": {"start": START, "hours": HOURS},
        "magnetic": {"model": "dipole", "b0_nT": made.B0_NT},
        "electric": [{"model": "corotation"}, FIELDS[gamma][0]],
        "access": {
            "species": "H+",
            "energy_keV": 0.0,
            "pitch_deg": 90.0,
            "time_h": HOURS,
            "back_hours": HOURS,
            **places,
        },
    }
    return tracer.access(tracer.build(given))


def test_the_curve_is_the_known_one() -> None:
    # gamma 1: noon and midnight r_s / 2, dawn (sqrt 2 - 1) r_s; gamma 2: 2 / 3 and 0.5960716
    assert [last_closed(1.0, t) for t in (0.0, 6.0, 12.0)] == pytest.approx([0.5, 2**0.5 - 1.0, 0.5], rel=1e-12)
    assert [last_closed(2.0, t) for t in (0.0, 6.0, 12.0)] == pytest.approx([2 / 3, 0.5960716, 2 / 3], rel=1e-7)


@pytest.mark.parametrize("gamma", [1.0, 2.0])
def test_open_outside_and_closed_inside(gamma: float) -> None:
    for mlt in np.arange(0.5, 24.0, 2.0):
        curve = stagnation_re(gamma) * last_closed(gamma, mlt)
        inside, outside = np.array([0.5, 0.9, 0.98]) * curve, np.array([1.02, 1.1, 1.3]) * curve
        found = access(gamma, r_re=[*inside, *outside], mlt_h=mlt)
        region = found.access["region"][0, 0, 0, 0, :, 0]
        assert region.tolist() == [Outcome.BEFORE_RECORD] * 3 + [Outcome.OPEN] * 3, mlt
        # it came in along its equipotential, on the night side, still cold
        entry = found.access["entry_mlt_h"][0, 0, 0, 0, 3:, 0]
        np.testing.assert_allclose(
            potential(gamma, 10.0, entry), potential(gamma, outside, mlt), rtol=bound("two runs of a path")
        )
        assert (np.cos((entry - 12.0) * np.pi / 12.0) < 0.0).all()
        assert (found.access["entry_energy_keV"][0, 0, 0, 0, 3:, 0] == 0.0).all()


@pytest.mark.parametrize("gamma", [1.0, 2.0])
def test_the_plasmapause_of_a_map(gamma: float) -> None:
    r_re, mlt_h = np.linspace(1.5, 9.5, 81), np.arange(0.5, 24.0, 3.0)
    found = access(gamma, r_re=r_re.tolist(), mlt_h=mlt_h.tolist()).boundary
    curve = np.array([stagnation_re(gamma) * last_closed(gamma, mlt) for mlt in mlt_h])
    open_, closed = (found[name][0, 0, 0, 0] for name in ("innermost_re", "next_inward_re"))
    assert (closed < curve).all()
    assert (curve < open_).all()
    np.testing.assert_allclose(open_ - closed, 0.1)
