"""The polynomial for the mirror field of a dipole against the textbook integrals, by mpmath quadrature."""

from __future__ import annotations

import numpy as np
import pytest
from textbook import t_and_y
from tolerances import bound

from fields.magnetic.mirror_ratio import cot2_and_slope

COT2 = [
    1e-14,
    1e-9,
    1e-5,
    1e-3,
    0.01,
    0.05,
    0.2,
    0.5,
    1.0,
    2.0,
    4.0,
    9.0,
    25.0,
    80.0,
    300.0,
    1e3,
    1e4,
    1e5,
    1e6,
    1e8,
    1e10,
]


@pytest.mark.parametrize("cot2", COT2)
def test_ratio_and_slope_agree_with_mpmath(cot2: float) -> None:
    T, _, y_over_cos2 = t_and_y(cot2)
    # kappa = Y/y; cos^2 / y = cot2 / sqrt(1 + cot2). At fixed r, d(Y/y)/d cot2 = T y (Schulz & Lanzerotti 1974).
    kappa = y_over_cos2 * cot2 / np.sqrt(1.0 + cot2)
    got, slope = cot2_and_slope(np.float64(kappa))
    assert got == pytest.approx(cot2, rel=bound("mirror ratio"), abs=0)
    assert slope == pytest.approx(np.sqrt(1.0 + cot2) / T, rel=bound("mirror ratio slope"), abs=0)


def test_at_90_degrees() -> None:
    # Y/y vanishes; T(1) = pi sqrt(2) / 6
    got, slope = cot2_and_slope(np.float64(0.0))
    assert got == 0.0
    assert slope == pytest.approx(6.0 / (np.pi * np.sqrt(2.0)), rel=bound("mirror ratio"))


def test_rises_without_end() -> None:
    kappa = np.concatenate([[0.0], np.geomspace(1e-12, 1e9, 4000)])
    cot2, slope = cot2_and_slope(kappa)
    assert np.all(np.diff(cot2) > 0)
    assert np.all(slope > 0)


def test_slope_is_the_derivative() -> None:
    kappa = np.geomspace(1e-6, 1e6, 200)
    h = 1e-3 * kappa
    d = [cot2_and_slope(kappa + n * h)[0] - cot2_and_slope(kappa - n * h)[0] for n in (1, 2, 3)]
    want = (d[0] * 45 - d[1] * 9 + d[2]) / (60 * h)  # sixth-order central differences
    np.testing.assert_allclose(cot2_and_slope(kappa)[1], want, rtol=1e-11)
