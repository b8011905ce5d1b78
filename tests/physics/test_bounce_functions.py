"""T and Y of the public interface against mpmath, by pitch angle in degrees."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from textbook import t_and_y
from tolerances import bound

import tracer

PITCHES_DEG = (1.0, 2.5, 10.0, 45.0, 75.0, 89.0, 89.9)


def exact_cot2(pitch_deg: float) -> float:
    with mpmath.workdps(40):
        return float(mpmath.cot(mpmath.radians(mpmath.mpf(pitch_deg))) ** 2)


@pytest.mark.parametrize("pitch_deg", PITCHES_DEG)
def test_t_and_y_agree_with_mpmath(pitch_deg: float) -> None:
    t, y, _ = t_and_y(exact_cot2(pitch_deg))
    assert float(tracer.bounce_T(pitch_deg)) == pytest.approx(t, rel=bound("bounce integral"))
    assert float(tracer.bounce_Y(pitch_deg)) == pytest.approx(y, rel=bound("bounce integral"), abs=0)


@pytest.mark.parametrize("pitch_deg", [89.99, 89.9999, 89.999999])
def test_near_90_degrees_y_over_cos2_agrees_with_mpmath(pitch_deg: float) -> None:
    cot2 = exact_cot2(pitch_deg)
    got = float(tracer.bounce_Y(pitch_deg)) * (1.0 + cot2) / cot2
    assert got == pytest.approx(t_and_y(cot2)[2], rel=bound("bounce integral"))


def test_at_90_degrees() -> None:
    # T(1) = pi sqrt(2) / 6, Y(1) = 0 (Schulz & Lanzerotti 1974)
    assert float(tracer.bounce_T(90.0)) == pytest.approx(np.pi * np.sqrt(2.0) / 6.0, rel=bound("rounding"))
    assert float(tracer.bounce_Y(90.0)) == 0.0


def test_arrays_keep_their_shape() -> None:
    pitch = np.linspace(5.0, 90.0, 6).reshape(2, 3)
    assert tracer.bounce_T(pitch).shape == (2, 3)
    assert tracer.bounce_Y(pitch).shape == (2, 3)
    assert tracer.bounce_T(pitch)[1, 0] == pytest.approx(float(tracer.bounce_T(pitch[1, 0])), rel=bound("rounding"))


@pytest.mark.parametrize("pitch_deg", [0.0, -5.0, 90.1, 180.0, np.nan, np.inf])
def test_pitch_angles_outside_0_to_90_are_refused(pitch_deg: float) -> None:
    for function in (tracer.bounce_T, tracer.bounce_Y):
        with pytest.raises(tracer.InputError, match="pitch_deg"):
            function([45.0, pitch_deg])
