"""Physical and planetary constants. The only literals of their kind in the project.

The CODATA 2022 values are written out so that ``import fields`` loads no scipy; a test holds them equal to
``scipy.constants``.
"""

from __future__ import annotations

import math

SPEED_OF_LIGHT_M_S = 299792458.0  # CODATA 2022, exact
ELEMENTARY_CHARGE_C = 1.602176634e-19  # CODATA 2022, exact
ATOMIC_MASS_KG = 1.66053906892e-27  # CODATA 2022
ELECTRON_MASS_KG = 9.1093837139e-31  # CODATA 2022
PROTON_MASS_KG = 1.67262192595e-27  # CODATA 2022
ALPHA_MASS_KG = 6.644657345e-27  # CODATA 2022
VACUUM_PERMEABILITY = 1.25663706127e-06  # N A^-2, CODATA 2022

EARTH_RADIUS_KM = 6371.2  # geomagnetic reference radius of the IGRF (Alken et al. 2021)
EARTH_RADIUS_M = EARTH_RADIUS_KM * 1e3

# Orbits: IERS Conventions (2010), Technical Note 36, table 1.1 (from memory; held against sgp4's WGS 84 by a test)
EARTH_GM_KM3_S2 = 398600.4418
EARTH_J2 = 1.0826359e-3
EARTH_EQUATOR_KM = 6378.1366

SOLAR_DAY_H = 24.0
ROTATION_RAD_PER_H = 2.0 * math.pi / SOLAR_DAY_H  # the solar-magnetic frame follows the Sun

# (1 kV / R_E) / (1 nT) is a speed; in R_E per hour: 1e12 / R_E[m]^2 per second.
KV_PER_NT_RE2_TO_PER_H = 1e12 / EARTH_RADIUS_M**2 * 3600.0

# (1 mV/m) * (1 R_E) in kV
MV_PER_M_RE_TO_KV = EARTH_RADIUS_M * 1e-6
