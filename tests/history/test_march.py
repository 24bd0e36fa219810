"""What must hold of the march for physical reasons (*analytic*), whatever the module."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.errors import InputError, NoStableTemperature
from mission.device import load_module
from mission.history import EnvelopeBuilder

from .marching import march, network, points

A_UP, A_LO, B_UP, B_LO, C_UP, C_LO = range(6)

CHIP_NAMES = load_module("heron-300").chip_names()


def test_the_hottest_chip_at_standstill_is_the_one_that_carries_the_peak():
    """Phase a at +I (theta 90 deg): upper switch of a and lower diode of a; b and c share -I/2 in their lower switches."""
    run = march(points(4, frequency_hz=0.0, i_peak_a=260.0, mod_index=0.05, phi_rad=0.0), 1.0, theta_rad=np.pi / 2)
    hot = run.rows.t_max_c[-1]
    assert CHIP_NAMES[int(hot[:6].argmax())] == "S-a-up"
    assert CHIP_NAMES[6 + int(hot[6:].argmax())] == "D-a-lo"
    assert hot[A_UP] > hot[B_LO] + 10.0
    assert hot[B_LO] == pytest.approx(hot[C_LO], abs=1e-9)
    # chips without current are only warmed by the sink they share
    assert hot[A_LO] == pytest.approx(hot[B_UP], abs=1e-6)


def test_the_angle_is_carried_into_the_standstill():
    """A third of a turn after phase a stood at its peak, phase b does."""
    op = points(2, frequency_hz=[1.0, 0.0], i_peak_a=260.0, mod_index=0.05, phi_rad=0.0)
    run = march(op, [1.0 / 3.0, 3.0], theta_rad=np.pi / 2)
    assert CHIP_NAMES[int(run.rows.t_max_c[-1][:6].argmax())] == "S-b-up"
    back = march(points(2, frequency_hz=[1.0, 0.0], direction=[-1.0, 1.0], i_peak_a=260.0, mod_index=0.05, phi_rad=0.0), [1.0 / 3.0, 3.0], theta_rad=np.pi / 2)
    assert CHIP_NAMES[int(back.rows.t_max_c[-1][:6].argmax())] == "S-c-up"


def test_rotating_again_spreads_the_load():
    op = points(40, frequency_hz=np.repeat([0.0, 30.0], [20, 20]), i_peak_a=240.0, mod_index=0.3, phi_rad=0.2)
    run = march(op, 1.0, theta_rad=np.pi / 2)
    spread = np.ptp(run.rows.t_max_c[:, :6], axis=1)
    assert spread[19] > 30.0
    assert spread[-1] < 0.2


def test_no_current_no_heat():
    run = march(points(5, frequency_hz=10.0, i_peak_a=0.0, mod_index=0.2, phi_rad=0.0), 60.0, coolant_c=25.0)
    np.testing.assert_allclose(run.rows.t_max_c, 25.0, atol=1e-5)
    assert run.rows.loss_j.max() < 1e-5


def test_coolant_step_is_followed():
    """Without heat every chip ends at the coolant, and never passes it."""
    run = march(points(60, frequency_hz=0.0, i_peak_a=0.0, mod_index=0.0, phi_rad=0.0), 10.0, coolant_c=np.repeat([20.0, 50.0], [10, 50]))
    assert run.rows.t_max_c[9].max() == pytest.approx(20.0, abs=1e-5)
    assert run.rows.t_max_c.max() < 50.01
    np.testing.assert_allclose(run.rows.t_min_c[-1], 50.0, atol=0.01)


def test_steady_mean_is_the_resistance_matrix_times_the_losses():
    """Analytic: T = T_coolant + R p in steady state; the light sink settles within seconds."""
    run = march(points(30, frequency_hz=60.0, i_peak_a=280.0, mod_index=0.7, phi_rad=0.4), 2.0, sink="light")
    p = run.rows.loss_j[-1] / 2.0
    rise = network("heron-300", "light").r_th_k_per_w() @ p
    mid = 0.5 * (run.rows.t_min_c[-1] + run.rows.t_max_c[-1])
    np.testing.assert_allclose(mid, 40.0 + rise, atol=3.0)  # the ripple is not symmetric about its mean
    assert np.all(run.rows.t_min_c[-1] < 40.0 + rise) and np.all(run.rows.t_max_c[-1] > 40.0 + rise)


def random_duty(seed, n=60):
    rng = np.random.default_rng(seed)
    f = rng.choice([0.0, 0.3, 1.0, 4.0, 7.0, 30.0, 60.0], n)
    return points(n, frequency_hz=f, i_peak_a=rng.choice([0.0, 120.0, 300.0], n), mod_index=np.minimum(0.9, 0.05 + f / 70.0),
                  phi_rad=rng.choice([0.3, 2.8], n), direction=np.where(f > 0.0, rng.choice([-1.0, 1.0], n), 1.0)), rng.choice([0.25, 1.0, 2.5], n)


@settings(max_examples=12, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6), cuts=st.lists(st.integers(1, 59), max_size=5, unique=True).map(sorted))
def test_blocks_change_nothing(seed, cuts):
    """A mission cut into blocks anywhere gives the same rows and the same turning points, bit by bit."""
    op, dt = random_duty(seed)
    whole, cut = march(op, dt), march(op, dt, blocks=cuts)
    np.testing.assert_array_equal(whole.rows.t_max_c, cut.rows.t_max_c)
    np.testing.assert_array_equal(whole.rows.loss_j, cut.rows.loss_j)
    for signal, columns in whole.turning.items():
        for a, b in zip(columns, cut.turning[signal]):
            np.testing.assert_array_equal(a, b)


@settings(max_examples=8, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10**6))
def test_points_lie_within_the_envelope_and_touch_it(seed):
    op, dt = random_duty(seed)
    run = march(op, dt)
    for chip in range(12):
        t = run.turning[chip][0]
        assert np.all(np.diff(t)[1:] * np.diff(t)[:-1] < 0.0), "neighbours that are no turning points"
        assert t.max() == pytest.approx(run.rows.t_max_c[:, chip].max(), abs=1e-9)
        assert t.min() == pytest.approx(min(run.rows.t_min_c[:, chip].min(), 40.0), abs=1e-9)


def test_both_regimes_agree_where_they_meet():
    """*Independent path*: the same rows once by mean and ripple, once along the angle."""
    op = points(40, frequency_hz=8.0, i_peak_a=300.0, mod_index=0.4, phi_rad=0.5)
    fast, slow = march(op, 1.0), march(op, 1.0, f_slow_hz=1e9)
    np.testing.assert_allclose(fast.rows.t_max_c[-1], slow.rows.t_max_c[-1], atol=0.15)
    np.testing.assert_allclose(fast.rows.t_min_c[-1], slow.rows.t_min_c[-1], atol=0.15)
    assert fast.rows.loss_j.sum() == pytest.approx(slow.rows.loss_j.sum(), rel=1e-3)


def test_ripple_cycles_are_counted_once_per_period():
    """f dt cycles a row, one of them carried by the turning points."""
    run = march(points(20, frequency_hz=25.0, i_peak_a=300.0, mod_index=0.5, phi_rad=0.4), 2.0)
    total = sum(count[:, 0].sum() for _, _, count, _ in run.ripple)
    in_points = (run.turning[0][0].size - 1) / 2
    assert total + in_points == pytest.approx(25.0 * 40.0, rel=0.01)


def test_short_rows_share_a_period():
    """Rows of 5 ms at 20 Hz: a period lasts ten rows, and is not counted ten times."""
    run = march(points(2000, frequency_hz=20.0, i_peak_a=300.0, mod_index=0.5, phi_rad=0.4), 0.005)
    total = sum(count[:, 0].sum() for _, _, count, _ in run.ripple)
    in_points = (run.turning[0][0].size - 1) / 2
    assert total + in_points == pytest.approx(20.0 * 10.0, rel=0.02)


def test_runaway_is_said_not_marched():
    with pytest.raises(NoStableTemperature, match=r"no stable temperature exists: \S+ passes 500 degC at .* \(coolant 140 degC"):
        march(points(200, frequency_hz=30.0, i_peak_a=1100.0, mod_index=0.9, phi_rad=0.2), 1.0, coolant_c=140.0)


def test_a_current_beyond_the_tables_is_refused():
    with pytest.raises(InputError, match=r"operating point 2 of the block: found a peak current of 1500 A; allowed: at most 1200 A"):
        march(points(3, frequency_hz=30.0, i_peak_a=[100.0, 1500.0, 0.0], mod_index=0.5, phi_rad=0.2), 1.0)


def test_envelope_keeps_extremes_whatever_the_buckets():
    """Buckets shorter than a row and longer than many keep peaks, energy and time."""
    op, dt = random_duty(7)
    run = march(op, dt)
    for n in (5, 60, 4000):
        builder = EnvelopeBuilder(float(run.rows.end_s[-1]), CHIP_NAMES, ("all",), (25.0, 150.0), n_buckets=n)
        builder.add(run.rows)
        history = builder.finish()
        np.testing.assert_array_equal(history.t_max_c.max(axis=0), run.rows.t_max_c.max(axis=0))
        np.testing.assert_array_equal(history.peak_c, run.rows.t_max_c.max(axis=0))
        assert (history.loss_w * np.diff(history.edge_s)[:, None]).sum() == pytest.approx(run.rows.loss_j.sum(), rel=1e-9)
        assert history.edge_s[-1] == pytest.approx(run.rows.end_s[-1])
