"""The table of dipole coefficients against the published file of the IGRF."""

from __future__ import annotations

from importlib.util import find_spec
from pathlib import Path

import numpy as np
import pytest
from tolerances import bound

from fields.magnetic.dipole import Dipole
from fields.magnetic.igrf import COEFFICIENTS, EPOCHS, dipole_axis, dipole_field_nT


def published() -> dict[float, tuple[float, float, float]]:
    """(g10, g11, h11) by epoch from IGRF14.shc, the coefficients of IAGA Working Group V-MOD.

    doi:10.5281/zenodo.14012302; a data file of the `ppigrf` wheel, which is not imported.
    """
    spec = find_spec("ppigrf")
    assert spec is not None, "the test dependency ppigrf is not installed"
    assert spec.origin
    rows = [line.split() for line in (Path(spec.origin).parent / "IGRF14.shc").read_text("ascii").splitlines()]
    rows = [row for row in rows if row[0] != "#"]
    epochs = [float(year) for year in rows[1]]
    found = {(int(n), int(m)): [float(v) for v in values] for n, m, *values in rows[2:]}
    g10, g11, h11 = found[1, 0], found[1, 1], found[1, -1]
    return dict(zip(epochs, zip(g10, g11, h11, strict=True), strict=True))


def test_table_is_the_published_one() -> None:
    assert published() == COEFFICIENTS
    assert tuple(np.arange(1900.0, 2031.0, 5.0)) == EPOCHS


def test_surface_field_at_an_epoch() -> None:
    # g10 -29350.0, g11 -1410.3, h11 4545.5 nT for 2025.0
    assert dipole_field_nT(2025.0) == pytest.approx(29733.4, abs=0.05)
    for epoch, coefficients in published().items():
        assert dipole_field_nT(epoch) == pytest.approx(np.linalg.norm(coefficients), rel=1e-15)


def test_coefficients_are_linear_between_epochs() -> None:
    table = published()
    middle = 0.5 * (np.array(table[2000.0]) + np.array(table[2005.0]))
    assert dipole_field_nT(2002.5) == pytest.approx(np.linalg.norm(middle), rel=1e-14)
    assert dipole_field_nT(2001.0) == pytest.approx(
        np.linalg.norm(0.8 * np.array(table[2000.0]) + 0.2 * np.array(table[2005.0])), rel=1e-14
    )


@pytest.mark.parametrize("epoch", [1899.9, 2030.1, np.nan])
def test_epochs_outside_the_table_are_refused(epoch: float) -> None:
    with pytest.raises(ValueError, match="1900"):
        dipole_field_nT(epoch)


def test_the_dipole_takes_its_field_from_an_epoch() -> None:
    assert Dipole(epoch=2025.0).reference_b0_nT() == dipole_field_nT(2025.0)


# Geomagnetic north pole (geodetic latitude, east longitude): World Data Center for Geomagnetism, Kyoto, to one decimal,
# and for 2020 the paper of the IGRF-13 (Alken et al. 2021, Earth Planets Space 73, 49); from memory.
FLATTENING = 1.0 / 298.257223563  # WGS 84
PUBLISHED_POLES = {1900.0: (78.7, -68.8), 2000.0: (79.6, -71.6), 2020.0: (80.65, -72.68)}


@pytest.mark.parametrize("epoch", PUBLISHED_POLES)
def test_the_axis_leads_to_the_published_pole(epoch: float) -> None:
    x, y, z = dipole_axis(epoch)
    place = np.degrees([np.arctan2(z, np.hypot(x, y) * (1.0 - FLATTENING) ** 2), np.arctan2(y, x)])
    assert place == pytest.approx(PUBLISHED_POLES[epoch], abs=bound("pole position deg"))


def test_the_axis_is_opposite_to_the_published_moment() -> None:
    for epoch, (g10, g11, h11) in published().items():
        axis = dipole_axis(epoch)
        assert np.linalg.norm(axis) == pytest.approx(1.0, rel=bound("rounding"))
        moment = np.array([g11, h11, g10])
        assert axis == pytest.approx(-moment / np.linalg.norm(moment), rel=bound("rounding"))


def test_axes_of_many_epochs_at_once() -> None:
    epochs = np.array([[1900.0, 1999.5], [2027.2, 2030.0]])
    axes = dipole_axis(epochs)
    assert axes.shape == (2, 2, 3)
    assert axes[1, 0] == pytest.approx(dipole_axis(2027.2), rel=bound("rounding"))
    with pytest.raises(ValueError, match=r"2030\.1"):
        dipole_axis([2000.0, 2030.1])
