"""A storm traced at three tolerances against an independent solution by scipy's DOP853 at its finest.

The referee (referee.py) has its own equations, bounce integrals and constants. A particle whose referee does not agree
with itself is one that nobody can follow to the asked digit: it is left out, and the count of those is bounded.
"""

from __future__ import annotations

from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from physics import made, referee
from textbook import t_and_y

import tracer
from tracer.records import Result

KP = (1.0, 2.333, 4.0, 5.667, 4.333, 3.0, 3.667, 2.0)  # invented
HOURS = 24.0
OUTER_RE, INNER_RE = 10.0, 1.02
EACH = 150
TOLERANCES = (1e-4, 1e-6, 1e-8)
WITHIN = {1e-4: 0.99, 1e-6: 0.99, 1e-8: 0.95}
MOST_EXCLUDED = 0.1
LEAST_FALL = 30.0  # of the errors, per hundredfold tolerance
REFEREE, SECOND_REFEREE = 2.3e-14, 1e-13  # rtol; scipy takes none below 100 rounding errors


def storm(
    tolerance: float, every_min: float = 0.0, populations: list[dict[str, Any]] | None = None, **given: Any
) -> Result:
    both = [made.drawn("H+", EACH, 1), made.drawn("e-", EACH, 101)]
    electric = [{"model": "corotation"}, {"model": "volland-stern", "kp": "series:kp"}]
    return tracer.trace(
        tracer.build(
            made.tables(
                electric,
                populations or both,
                series={"kp": made.three_hourly(KP)},
                domain={"outer_re": OUTER_RE, "inner_re": INNER_RE},
                tolerance_re=tolerance,
                every_min=every_min,
                **given,
            )
        )
    )


@pytest.fixture(scope="module")
def results() -> dict[float, Result]:
    return {tolerance: storm(tolerance) for tolerance in TOLERANCES}


@pytest.fixture(scope="module")
def referees(results: dict[float, Result]) -> tuple[referee.Ends, referee.Ends]:
    start = results[TOLERANCES[0]].particle
    model = referee.Storm(made.B0_NT, KP, OUTER_RE, INNER_RE)
    given = {name: np.asarray(start[name], dtype=float) for name in ("energy_keV", "pitch_deg", "mass_kg")}
    given |= {"r": start["r_re"], "phi": made.azimuth(start["mlt_h"]), "charge": start["charge_e"].astype(float)}
    return referee.solve(model, HOURS, REFEREE, **given), referee.solve(model, HOURS, SECOND_REFEREE, **given)


def apart(r: np.ndarray, phi: np.ndarray, cause: np.ndarray, other: referee.Ends) -> np.ndarray:
    """Distance of end positions, R_E; infinite when they ended for different causes. A lost turn counts."""
    return np.where(cause == other.cause, np.hypot(r - other.r, other.r * (phi - other.phi)), np.inf)


def errors(result: Result, ends: referee.Ends) -> np.ndarray:
    return apart(result.end["r_re"], made.end_azimuth(result), result.end["cause"], ends)


def known(referees: tuple[referee.Ends, referee.Ends], tolerance: float) -> np.ndarray:
    """Which particles the referee follows to a tenth of the tolerance."""
    first, second = referees
    return apart(second.r, second.phi, second.cause, first) <= 0.1 * tolerance


def test_referee_knows_the_bounce_integrals() -> None:
    table = referee.table()
    for pitch_deg in (0.3, 2.0, 12.0, 45.0, 80.0, 89.9):
        t, y, _ = t_and_y(float(np.tan(np.radians(90.0 - pitch_deg)) ** 2))
        kappa = float(referee.kappa_of_lift(referee.lift_of_pitch(np.array([pitch_deg])))[0])
        log_mirror, slope = referee.mirror(kappa, table)
        assert kappa == pytest.approx(y / np.sin(np.radians(pitch_deg)), rel=1e-13)
        assert np.exp(log_mirror) * np.sin(np.radians(pitch_deg)) ** 2 == pytest.approx(1.0, rel=1e-13)
        assert slope == pytest.approx(-(6.0 * t - y) / (2.0 * t), rel=1e-13)


def test_the_storm_is_a_hard_one(results: dict[float, Result], referees: tuple[referee.Ends, referee.Ends]) -> None:
    cause = referees[0].cause
    assert np.sum(cause == 0) > EACH / 2
    assert np.sum(cause == referee.OUTER) > EACH / 2
    assert np.abs(results[1e-8].end["turns"]).max() > 10.0


@pytest.mark.parametrize("tolerance", TOLERANCES)
def test_ends_lie_within_the_tolerance(
    tolerance: float, results: dict[float, Result], referees: tuple[referee.Ends, referee.Ends]
) -> None:
    kept = known(referees, tolerance)
    found = errors(results[tolerance], referees[0])[kept]
    print(
        f"asked {tolerance:g}: {np.sum(~kept)} left out, {np.mean(found <= tolerance):.4f} within; 50, 95, 99, 100 %: ",
        *(f"{q:.1e}" for q in np.quantile(found, (0.5, 0.95, 0.99, 1.0), method="higher")),
    )
    assert np.mean(~kept) <= MOST_EXCLUDED
    assert np.mean(found <= tolerance) >= WITHIN[tolerance]


def test_errors_fall_with_the_tolerance(
    results: dict[float, Result], referees: tuple[referee.Ends, referee.Ends]
) -> None:
    kept = known(referees, TOLERANCES[-1])
    quantiles = [np.quantile(errors(results[t], referees[0])[kept], (0.5, 0.99), method="higher") for t in TOLERANCES]
    for (coarse, fine), tolerance in zip(pairwise(quantiles), TOLERANCES):
        print(f"{tolerance:g} to {tolerance / 100:g}: 50 and 99 % fall {coarse / fine}-fold")
        assert np.all(coarse >= LEAST_FALL * fine)


def test_times_of_leaving(results: dict[float, Result], referees: tuple[referee.Ends, referee.Ends]) -> None:
    left = (referees[0].cause == referee.OUTER) & known(referees, 1e-6)
    late = np.abs(results[1e-6].end["time_h"] - referees[0].time)[left]
    # drifts at 10 R_E run at 0.1 R_E/h and more, hence ten tolerances
    assert np.mean(late <= 1e-5) >= 0.99
    assert np.all(results[1e-6].end["r_re"][left] == OUTER_RE)


@pytest.mark.parametrize("tolerance", [1e-4, 1e-6])
def test_forward_then_backward_returns(tolerance: float, results: dict[float, Result]) -> None:
    forward = results[tolerance]
    still = np.flatnonzero(forward.end["cause"] == 0)
    names = ("r_re", "mlt_h", "energy_keV", "pitch_deg")
    ends = [
        made.single(
            f"n{i}",
            forward.species_names[forward.particle["species"][i]],
            release_h=0.0,
            **{name: float(forward.end[name][i]) for name in names},
        )
        for i in still
    ]
    start = made.START + made.timedelta(hours=HOURS)
    back = storm(tolerance, populations=ends, time={"start": start, "hours": HOURS, "backward": True})
    turned = 2.0 * np.pi * (back.end["turns"] + forward.end["turns"][still])
    r = forward.particle["r_re"][still]
    missed = np.hypot(back.end["r_re"] - r, r * turned)
    print(f"asked {tolerance:g}: 50, 99, 100 % return within", np.quantile(missed, (0.5, 0.99, 1.0), method="higher"))
    assert np.mean(np.where(back.end["cause"] == 0, missed, np.inf) <= 10.0 * tolerance) >= 0.99
    for name in ("energy_keV", "pitch_deg"):
        change = np.abs(back.end[name] / forward.particle[name][still] - 1.0)
        assert np.mean(change <= 100.0 * tolerance) >= 0.99


@pytest.mark.parametrize("every_min", [7.0, 60.0])
def test_saving_more_or_less_often_changes_no_bit_of_the_end(every_min: float, results: dict[float, Result]) -> None:
    other = storm(1e-6, every_min)
    assert other.time_h.size > HOURS
    for name, column in results[1e-6].end.items():
        np.testing.assert_array_equal(other.end[name], column, err_msg=name)
