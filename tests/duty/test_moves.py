"""Moves: closed form against integration, against a search for the fastest move, and what rows keep of them."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from scipy.optimize import brentq, linprog

from mission.duty import ramp, s_curve
from mission.duty.moves import EVEN, FALL, RISE
from mission.errors import RangeError

LIMITS = {
    "full speed": (10.0, 2.0, 1.0, 2.0), "just full speed": (5.0, 2.0, 1.0, 2.0), "full acceleration only": (3.0, 2.0, 1.0, 2.0), "just full acceleration": (0.5, 2.0, 1.0, 2.0),
    "almost full acceleration": (0.45, 2.0, 1.0, 2.0), "jerk only": (0.1, 2.0, 1.0, 2.0), "speed before acceleration": (4.0, 0.3, 2.0, 1.0), "backwards": (-3.0, 2.0, 1.0, 2.0), "no jerk limit": (7.0, 1.5, 0.5, None),
    "no jerk limit, short": (1.0, 1.5, 0.5, None),
}
POSITIVE = st.floats(0.01, 100.0)


@pytest.mark.parametrize("limits", LIMITS.values(), ids=LIMITS)
def test_ends_at_rest_where_it_should_and_keeps_the_limits(limits):
    """Independent: the jerk alone (without a jerk limit the acceleration), integrated by a Runge-Kutta method over each piece."""
    way, speed, acceleration, jerk = limits
    move = s_curve(*limits)
    state = np.zeros(3)
    for length, a0, j in zip(move.lasts_s, move.acceleration, move.jerk):
        if jerk is None:
            state[2] = a0
        assert state[2] == pytest.approx(a0, abs=1e-9)
        found = solve_ivp(lambda t, y, j=j: [y[1], y[2], j], (0.0, length), state, rtol=1e-10, atol=1e-12, max_step=length / 20)
        assert np.abs(found.y[1]).max() <= speed * (1 + 1e-9) and np.abs(found.y[2]).max() <= acceleration * (1 + 1e-9)
        state = found.y[:, -1]
    assert state[:2] == pytest.approx([way, 0.0], abs=1e-8)
    assert jerk is None or (state[2] == pytest.approx(0.0, abs=1e-8) and np.abs(move.jerk).max() <= jerk)


@pytest.mark.parametrize("limits", LIMITS.values(), ids=LIMITS)
def test_between_the_pieces_it_is_the_integral(limits):
    move = s_curve(*limits)
    t = np.linspace(0.0, move.duration_s, 20001)
    way, speed, _ = move.at(t)
    middle = move.at((t[1:] + t[:-1]) / 2)
    np.testing.assert_allclose(np.diff(way), middle[1] * np.diff(t), atol=1e-9)
    off = np.abs(np.diff(speed) - middle[2] * np.diff(t)) > 1e-6
    assert off.sum() <= (3 if limits[3] is None else 0)  # the steps in which the acceleration jumps
    assert way[-1] == pytest.approx(limits[0], rel=1e-12)


# analytic: durations worked out by hand
@pytest.mark.parametrize("limits, seconds", [
    ((10.0, 2.0, 1.0, 2.0), 10 / 2 + 2 / 1 + 1 / 2), ((10.0, 2.0, 1.0, None), 10 / 2 + 2 / 1), ((1.0, 9.0, 1.0, None), 2.0),
    ((0.1, 2.0, 1.0, 2.0), 4 * (0.1 / (2 * 2.0)) ** (1 / 3)), ((4.0, 0.3, 2.0, 1.0), 4 / 0.3 + 2 * (0.3 / 1.0) ** 0.5)])
def test_durations_by_hand(limits, seconds):
    assert s_curve(*limits).duration_s == pytest.approx(seconds, rel=1e-12)


def test_a_middling_way_is_solved_for_its_speed():
    """Independent: the top speed v at which two ramps of v / a + a / j cover the way, by a root search."""
    way, a, j = 3.0, 1.0, 2.0
    top = brentq(lambda v: v * (v / a + a / j) - way, 0.5, 2.0, xtol=1e-14)
    assert s_curve(way, 2.0, a, j).speed.max() == pytest.approx(top, rel=1e-12)


@pytest.mark.parametrize("limits", [LIMITS[n] for n in ("full speed", "full acceleration only", "jerk only", "speed before acceleration")])
def test_no_move_is_faster(limits):
    """Independent: on a fine grid of constant jerks a linear program covers the way in the same time, and the most it covers in that time is the way."""
    way, speed, acceleration, jerk = limits
    n = 240
    dt = s_curve(*limits).duration_s / n
    to_a = dt * np.tril(np.ones((n, n)))  # at the ends of the steps
    to_v = np.zeros((n, n))
    to_x = np.zeros((n, n))
    for k in range(n):
        rest = dt * (np.arange(k, n) - k)
        to_v[k:, k] = dt * (rest + dt / 2)
        to_x[k:, k] = dt * (rest**2 / 2 + rest * dt / 2 + dt**2 / 6)
    found = linprog(-to_x[-1], A_ub=np.vstack([to_a, -to_a, to_v]), b_ub=np.concatenate([np.full(2 * n, acceleration), np.full(n, speed)]),
                    A_eq=np.vstack([to_a[-1], to_v[-1]]), b_eq=[0.0, 0.0], bounds=[(-jerk, jerk)] * n, method="highs")
    assert -found.fun == pytest.approx(way, rel=2e-3)
    assert -found.fun <= way * (1 + 1e-6)


@pytest.mark.parametrize("limits", LIMITS.values(), ids=LIMITS)
def test_every_row_is_the_mean_of_its_stretch(limits):
    """Analytic: mean speed is way over time, mean acceleration change of speed over time."""
    move = s_curve(*limits)
    dt, v, a, _ = move.rows(0.13)
    edges = np.minimum(np.concatenate([[0.0], np.cumsum(dt)]), move.duration_s)
    way, speed, _ = move.at(edges)
    np.testing.assert_allclose(v, np.diff(way) / dt, rtol=1e-9, atol=1e-10)
    np.testing.assert_allclose(a, np.diff(speed) / dt, rtol=1e-9, atol=1e-10)


@given(POSITIVE, POSITIVE, POSITIVE, st.one_of(st.none(), POSITIVE), st.floats(0.001, 1.0))
@settings(max_examples=200, deadline=None)
def test_rows_keep_way_and_speed(way, speed, acceleration, jerk, step):
    move = s_curve(way, speed, acceleration, jerk)
    step = max(step, move.duration_s / 2000)
    dt, v, a, part = move.rows(step)
    assert dt.sum() == pytest.approx(move.duration_s, rel=1e-9)
    assert dt @ v == pytest.approx(way, rel=1e-9, abs=2e-7 * speed)
    assert dt @ a == pytest.approx(0.0, abs=1e-6 * max(1.0, speed, acceleration))
    assert (dt[part != EVEN] <= step * (1 + 1e-9)).all() and (part == EVEN).sum() <= 1
    assert (v > 0.0).all() and v.max() <= speed * (1 + 1e-9) and np.abs(a).max() <= acceleration * (1 + 1e-9)
    assert (a[part == RISE] > 0.0).all() and (a[part == FALL] < 0.0).all()


@given(POSITIVE, POSITIVE, POSITIVE)
@settings(max_examples=100, deadline=None)
def test_duration_has_no_step_where_the_kind_of_move_changes(speed, acceleration, jerk):
    for way in (2.0 * acceleration**3 / jerk**2, speed * (speed / acceleration + acceleration / jerk)):
        below, above = (s_curve(way * f, speed, acceleration, jerk).duration_s for f in (1 - 1e-7, 1 + 1e-7))
        assert above == pytest.approx(below, rel=1e-6) and above >= below * (1 - 1e-12)


def test_peaks_of_rows():
    """Analytic: a held acceleration is kept exactly; one that only touches its top loses half a row times the jerk."""
    assert s_curve(10.0, 2.0, 1.0, 2.0).rows(0.07)[2].max() == 1.0
    touched = s_curve(0.1, 2.0, 1.0, 2.0)
    dt, _, a, _ = touched.rows(0.05)
    assert touched.acceleration.max() - a.max() == pytest.approx(2.0 * dt[0] / 2, rel=1e-9)


def test_ramp_between_speeds():
    move = ramp(3.0, 1.0, 0.5, 1.0)
    assert move.duration_s == pytest.approx(2 / 0.5 + 0.5 / 1.0)
    assert [float(x) for x in move.at(move.duration_s)[:2]] == pytest.approx([2.0 * move.duration_s, 1.0])  # symmetric about the mean speed
    assert set(move.part) == {FALL}
    assert ramp(1.0, 1.0, 1.0).duration_s == 0.0 and ramp(1.0, 1.0, 1.0, 1.0).rows(0.1)[0].size == 0


@pytest.mark.parametrize("call, match", [
    (lambda: s_curve(0.0, 1.0, 1.0), "way: found 0; allowed: above 0"), (lambda: s_curve(1.0, -1.0, 1.0), "speed: found -1"), (lambda: s_curve(1.0, 1.0, 0.0), "acceleration: found 0"),
    (lambda: s_curve(1.0, 1.0, 1.0, 0.0), "jerk: found 0"), (lambda: s_curve(float("nan"), 1.0, 1.0), "way: found nan"), (lambda: ramp(1.0, -1.0, 1.0), "reverse by two ramps"),
    (lambda: s_curve(1.0, 1.0, 1.0).rows(0.0), "step_s: found 0"), (lambda: s_curve(1.0, 1.0, 1.0).at(5.0), "time_s: found 5")])
def test_refusals(call, match):
    with pytest.raises(RangeError, match=match):
        call()
