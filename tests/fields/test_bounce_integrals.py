"""The dipole's closed-form line averages against the textbook integrals, by mpmath quadrature.

In a dipole, with y the sine of the equatorial pitch angle: k = sqrt(B0 / r) Y(y) / y and path = 4 r T(y).
"""

from __future__ import annotations

import numpy as np
import pytest
from textbook import t_and_y
from tolerances import bound

from fields.magnetic.dipole import Dipole
from fields.units import cot2_of_pitch

B0_NT = 30000.0
LINES = Dipole(b0_nT=B0_NT).lines()
R, PHI = 4.2, 0.6
PITCHES_DEG = (1.0, 1.7, 3.0, 5.0, 10.0, 20.0, 31.0, 45.0, 58.0, 70.0, 80.0, 85.0, 88.0, 89.0, 89.5, 89.9)
NEAR_90_DEG = (89.95, 89.99, 89.999, 89.9999, 89.999999)


def ours(cot2: float) -> tuple[float, float]:
    """(T, Y) from the dipole's line averages."""
    y = 1.0 / np.sqrt(1.0 + cot2)
    t = float(LINES.bounce_path(cot2, R, PHI)) / (4.0 * R)
    return t, float(LINES.second_invariant(cot2, R, PHI)) * y / np.sqrt(B0_NT / R)


@pytest.mark.parametrize("pitch_deg", PITCHES_DEG)
def test_t_and_y_agree_with_mpmath(pitch_deg: float) -> None:
    cot2 = float(cot2_of_pitch(pitch_deg))
    t, y, _ = t_and_y(cot2)
    assert ours(cot2) == pytest.approx((t, y), rel=bound("bounce integral"), abs=0)


@pytest.mark.parametrize("pitch_deg", NEAR_90_DEG)
def test_near_90_degrees_y_over_cos2_agrees_with_mpmath(pitch_deg: float) -> None:
    cot2 = float(cot2_of_pitch(pitch_deg))
    t, _, y_over_cos2 = t_and_y(cot2)
    got_t, got_y = ours(cot2)
    assert (got_t, got_y * (1.0 + cot2) / cot2) == pytest.approx((t, y_over_cos2), rel=bound("bounce integral"), abs=0)


@pytest.mark.parametrize("pitch_deg", [15.0, 40.0, 75.0])
def test_y_is_the_integral_of_t(pitch_deg: float) -> None:
    # Y(y) = 2 y * integral from y to 1 of T(u) / u^2 du (Schulz & Lanzerotti 1974)
    y = np.sin(np.radians(pitch_deg))
    nodes, weights = np.polynomial.legendre.leggauss(60)
    u = y + (1.0 - y) * 0.5 * (nodes + 1.0)
    t = LINES.bounce_path(1.0 / u**2 - 1.0, R, PHI) / (4.0 * R)
    want = 2.0 * y * np.sum(weights * t / u**2) * 0.5 * (1.0 - y)
    assert ours(1.0 / y**2 - 1.0)[1] == pytest.approx(want, rel=bound("bounce integral"))


def test_t_at_90_degrees_is_its_closed_form() -> None:
    t, y = ours(0.0)
    assert t == pytest.approx(np.pi * np.sqrt(2.0) / 6.0, rel=bound("rounding"))
    assert y == 0.0


def test_t_and_y_tend_to_the_length_of_the_line_at_0_degrees() -> None:
    # T(0) = 1.3801729981504732 = integral of sqrt(1 + 3 x^2) from 0 to 1; Y(0) = 2 T(0).
    t0 = 1.0 + np.log(2.0 + np.sqrt(3.0)) / (2.0 * np.sqrt(3.0))
    assert t0 == pytest.approx(1.3801729981504732, rel=1e-15)
    gaps = []
    for pitch_deg in (0.08, 0.01):
        t, y = ours(float(cot2_of_pitch(pitch_deg)))
        gaps.append((t0 - t, 2.0 * t0 - y))
    # What is missing falls as y^(2/3), the closest approach of the mirror point to the Earth's centre: 4 times here.
    assert np.all(np.array(gaps) > 0)
    assert np.array(gaps[0]) / np.array(gaps[1]) == pytest.approx(4.0, rel=0.02)
    assert gaps[1][0] < 2e-3


def test_drift_function_at_90_degrees() -> None:
    # D = (6 T - Y) / 12, D(1) = pi sqrt(2) / 12; at fixed k, d ln B_m / d ln r = -6 D / T
    by_r, by_phi = LINES.mirror_slopes(0.0, R, PHI)
    t, _ = ours(0.0)
    assert -float(by_r) * R * t / 6.0 == pytest.approx(np.pi * np.sqrt(2.0) / 12.0, rel=bound("rounding"))
    assert float(by_phi) == 0.0


@pytest.mark.parametrize("pitch_deg", [1.0, 12.0, 45.0, 80.0, 89.99])
def test_mirror_slope_is_that_of_the_textbook(pitch_deg: float) -> None:
    # d ln y / d ln r = -Y / (4 T) at fixed K, so d ln B_m / d ln r = -3 + Y / (2 T)
    cot2 = float(cot2_of_pitch(pitch_deg))
    t, y, _ = t_and_y(cot2)
    got = float(LINES.mirror_slopes(cot2, R, PHI)[0]) * R
    assert got == pytest.approx(-3.0 + y / (2.0 * t), rel=bound("bounce integral"))


def test_schulz_and_lanzerotti_approximation_of_t() -> None:
    # Schulz & Lanzerotti (1974): T = 1.3802 - 0.3198 (y + sqrt y)
    pitch = np.linspace(0.5, 90.0, 180)
    y = np.sin(np.radians(pitch))
    t = LINES.bounce_path(cot2_of_pitch(pitch), R, PHI) / (4.0 * R)
    np.testing.assert_allclose(1.3802 - 0.3198 * (y + np.sqrt(y)), t, rtol=bound("slow approximation T"))


def test_hamlin_approximation_of_t() -> None:
    # Hamlin et al. (1961): T = 1.30 - 0.56 y; below 3 degrees, deep in the loss cone, the line leaves T by up to 6 %.
    pitch = np.linspace(3.0, 90.0, 180)
    t = LINES.bounce_path(cot2_of_pitch(pitch), R, PHI) / (4.0 * R)
    np.testing.assert_allclose(1.30 - 0.56 * np.sin(np.radians(pitch)), t, rtol=bound("fast approximation T"))


def test_each_line_keeps_its_bits_in_any_company() -> None:
    """So that a run gives the same bits however it is cut."""
    pitch = np.concatenate([np.geomspace(0.05, 5.0, 40), np.linspace(5.0, 90.0, 40)])
    cot2 = cot2_of_pitch(np.random.default_rng(4).permutation(pitch))
    together = LINES.second_invariant(cot2, R, PHI), LINES.bounce_path(cot2, R, PHI)
    for size in (1, 7):
        parts = [cot2[first : first + size] for first in range(0, cot2.size, size)]
        for whole, function in zip(together, (LINES.second_invariant, LINES.bounce_path)):
            assert np.array_equal(np.concatenate([function(part, R, PHI) for part in parts]), whole)


@pytest.mark.parametrize("pitch_deg", [0.05, 0.3, 0.99, 1.9, 2.1])
def test_near_the_field_lines_direction_as_many_nodes_as_it_takes(pitch_deg: float) -> None:
    cot2 = float(cot2_of_pitch(pitch_deg))
    t, y, _ = t_and_y(cot2)  # mpmath
    assert ours(cot2) == pytest.approx((t, y), rel=bound("bounce integral"), abs=0)
