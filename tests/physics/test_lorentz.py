"""Drift theory against full Lorentz orbits: how its error falls with the gyroradius.

Guiding-centre theory is an expansion in e, the gyroradius over the scale of the field (Northrop 1963, The Adiabatic
Motion of Charged Particles). Against orbits in a dipole whose guiding centres start at (r, phi), the drift rate
averaged over gyrophase is off by order e^2, at 90 degrees by e^4; that of one gyrophase by order e, at 90 degrees by
e^2.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from physics.lorentz import drift_rates, of_gyroradius

import fields
import tracer
from fields.units import RAD_PER_MLT_HOUR
from tracer.scenario import SPECIES

B0_NT = 30000.0
R_RE = 6.6
FIELD = fields.compose(fields.Dipole(b0_nT=B0_NT))
RATIOS = (0.08, 0.04, 0.02)  # gyroradius / equatorial curvature radius: H+ of 41 to 660 keV, electrons of 8 to 35 MeV
BOUNCES = 40
STEPS_PER_GYRATION = {90.0: 36, 60.0: 36, 45.0: 48}  # by the equatorial field; off the equator it gyrates faster
ENERGY_ERROR = 1e-6  # relative, of the integrator over all its steps: as small as the least effect at 45 degrees

# pitch angle: orders in e of the average over gyrophase and of one gyrophase, and how near the measured exponents come.
# The next order of the expansion adds 0.25 to the average at 45 degrees, whose leading term is small, 0.1 to one phase.
ORDERS = {90.0: (4, 2, 0.05, 0.05), 60.0: (2, 1, 0.1, 0.15), 45.0: (2, 1, 0.35, 0.15)}


def relative_errors(species: str, pitch_deg: float, ratio: float) -> tuple[float, float]:
    """Error of `tracer.drift_rate` against orbits: of the mean over gyrophases, and the largest of one."""
    kind = SPECIES[species]
    who = of_gyroradius(kind.charge_e, kind.mass_kg, ratio, R_RE, B0_NT)
    bounce_s = float(tracer.periods(FIELD, species, who.energy_keV, pitch_deg, R_RE, 0.0).bounce_s)
    orbits = drift_rates(who, pitch_deg, R_RE, B0_NT, BOUNCES * bounce_s, STEPS_PER_GYRATION[pitch_deg], ENERGY_ERROR)
    rate = tracer.drift_rate(FIELD, species, who.energy_keV, pitch_deg, R_RE, 0.0)
    theory = float(rate.dmlt_per_h) * RAD_PER_MLT_HOUR / 3600.0
    return float(abs(orbits.mean() / theory - 1.0)), float(np.max(np.abs(orbits / theory - 1.0)))


@pytest.mark.parametrize("pitch_deg", ORDERS)
@pytest.mark.parametrize("species", ["H+", "e-"])
def test_orders_in_the_gyroradius(species: str, pitch_deg: float) -> None:
    mean_order, single_order, mean_margin, single_margin = ORDERS[pitch_deg]
    errors = [relative_errors(species, pitch_deg, ratio) for ratio in RATIOS]
    for (coarse, fine), (e, e_fine) in zip(pairwise(errors), pairwise(RATIOS)):
        mean, single = np.log(np.divide(coarse, fine)) / np.log(e / e_fine)
        print(
            f"{species} {pitch_deg:g} deg, e {e:g} to {e_fine:g}: exponents {mean:.3f} and {single:.3f}, errors", *fine
        )
        assert mean == pytest.approx(mean_order, abs=mean_margin)
        assert single == pytest.approx(single_order, abs=single_margin)
    assert errors[-1][0] < RATIOS[-1] ** mean_order
    assert errors[-1][1] < 10.0 * RATIOS[-1] ** single_order


def test_orbits_turn_the_other_way_for_the_other_charge() -> None:
    rates = {}
    for species in ("H+", "e-"):
        kind = SPECIES[species]
        who = of_gyroradius(kind.charge_e, kind.mass_kg, 0.04, R_RE, B0_NT)
        period = float(tracer.periods(FIELD, species, who.energy_keV, 60.0, R_RE, 0.0).bounce_s)
        rates[species] = drift_rates(who, 60.0, R_RE, B0_NT, 10 * period, 36, 1e-5).mean()
    assert rates["H+"] < 0.0 < rates["e-"]
