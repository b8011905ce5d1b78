"""The dipole part of the IGRF through time: how strong it is and where it points.

Degree-1 Gauss coefficients of the 14th generation of the International Geomagnetic Reference Field (IAGA Working
Group V-MOD; Alken et al. 2021, Earth Planets Space 73, 49, and its 2024 update), nT, every five years; 2030 by its
secular variation. A test holds the table equal to the published coefficient file.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from fields.units import Floats

# epoch: g10, g11, h11
COEFFICIENTS = {
    1900.0: (-31543.0, -2298.0, 5922.0),
    1905.0: (-31464.0, -2298.0, 5909.0),
    1910.0: (-31354.0, -2297.0, 5898.0),
    1915.0: (-31212.0, -2306.0, 5875.0),
    1920.0: (-31060.0, -2317.0, 5845.0),
    1925.0: (-30926.0, -2318.0, 5817.0),
    1930.0: (-30805.0, -2316.0, 5808.0),
    1935.0: (-30715.0, -2306.0, 5812.0),
    1940.0: (-30654.0, -2292.0, 5821.0),
    1945.0: (-30594.0, -2285.0, 5810.0),
    1950.0: (-30554.0, -2250.0, 5815.0),
    1955.0: (-30500.0, -2215.0, 5820.0),
    1960.0: (-30421.0, -2169.0, 5791.0),
    1965.0: (-30334.0, -2119.0, 5776.0),
    1970.0: (-30220.0, -2068.0, 5737.0),
    1975.0: (-30100.0, -2013.0, 5675.0),
    1980.0: (-29992.0, -1956.0, 5604.0),
    1985.0: (-29873.0, -1905.0, 5500.0),
    1990.0: (-29775.0, -1848.0, 5406.0),
    1995.0: (-29692.0, -1784.0, 5306.0),
    2000.0: (-29619.4, -1728.2, 5186.1),
    2005.0: (-29554.63, -1669.05, 5077.99),
    2010.0: (-29496.57, -1586.42, 4944.26),
    2015.0: (-29441.46, -1501.77, 4795.99),
    2020.0: (-29403.41, -1451.37, 4653.35),
    2025.0: (-29350.0, -1410.3, 4545.5),
    2030.0: (-29287.0, -1360.3, 4438.0),
}
EPOCHS = tuple(COEFFICIENTS)


def dipole_field_nT(epoch: float) -> float:
    """``B0 = sqrt(g10^2 + g11^2 + h11^2)`` at a decimal year, coefficients linear in time between epochs.

    Raises
    ------
    ValueError
        Outside 1900 to 2030.
    """
    return float(np.sqrt(sum(column**2 for column in coefficients(epoch))))


def dipole_axis(epoch: ArrayLike) -> Floats:
    """The direction of the dipole axis, from the Earth's centre to the geomagnetic north pole.

    The moment is along (g11, h11, g10); the axis is opposite to it, so that it points north.

    Parameters
    ----------
    epoch : array_like
        Decimal years.

    Returns
    -------
    ndarray, shape (..., 3)
        Unit vectors in the geographic frame: x to longitude 0, y to 90 degrees east, z to the north pole.

    Raises
    ------
    ValueError
        Outside 1900 to 2030.
    """
    g10, g11, h11 = coefficients(epoch)
    moment = np.stack([g11, h11, g10], axis=-1)
    return np.asarray(-moment / np.linalg.norm(moment, axis=-1, keepdims=True))


def coefficients(epoch: ArrayLike) -> tuple[Floats, Floats, Floats]:
    """g10, g11, h11 in nT at decimal years, linear in time between epochs.

    Raises
    ------
    ValueError
        Outside 1900 to 2030.
    """
    year = np.asarray(epoch, dtype=float)
    outside = ~((year >= EPOCHS[0]) & (year <= EPOCHS[-1]))
    if np.any(outside):
        raise ValueError(f"epoch {year[outside].flat[0]} outside {EPOCHS[0]} to {EPOCHS[-1]}")
    g10, g11, h11 = (np.asarray(np.interp(year, EPOCHS, column)) for column in zip(*COEFFICIENTS.values(), strict=True))
    return g10, g11, h11
