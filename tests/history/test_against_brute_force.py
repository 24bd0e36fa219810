"""The march against an independent time-resolved run (tests/brute_force), which shares no code with the package.

All expected numbers here are *independent code*: dense matrix exponentials on the
physical nodes, every chip, steps of 100 microseconds (halving them changes peaks by
less than 1e-4 K).
"""

from __future__ import annotations

import numpy as np
import pytest

from mission.cycles import CycleCounter, CycleTable
from mission.device import load_module
from mission.lifetime import load_model
from tests.brute_force import reference

from .marching import COOLANT_C, F_SW_HZ, SINK_R, SINK_TAU, V_DC_V, march, points

MODULATIONS = ("sine", "third-harmonic", "space-vector")


def brute(module, modulation, sink_r=0.017, sink_tau=0.51):
    return reference.params_from_module(load_module(module), sink_r, sink_tau, COOLANT_C, F_SW_HZ, V_DC_V, modulation)


@pytest.mark.parametrize("frequency_hz", [0.5, 1.0, 2.0, 5.0, 10.0, 20.0, 50.0])
@pytest.mark.parametrize("mod_index, phi_rad", [(0.1, 0.3), (0.5, 0.6), (0.95, 0.45), (0.1, 2.6), (0.5, 2.9), (0.95, 2.7)])
def test_steady_extremes(frequency_hz, mod_index, phi_rad):
    """Lowest and highest temperature of each of the twelve chips in steady operation, within 0.3 K."""
    number = [0.5, 1.0, 2.0, 5.0, 10.0, 20.0, 50.0].index(frequency_hz) + round(10 * mod_index)
    modulation = MODULATIONS[number % 3]
    module = ("heron-300", "kite-300")[number % 2]
    # a light sink (30 J/K) settles soon: time constant R C = 0.51 s
    run = march(points(12, frequency_hz=frequency_hz, i_peak_a=330.0, mod_index=mod_index, phi_rad=phi_rad), 4.0,
                module=module, modulation=modulation, sink="light")
    want = reference.steady_extremes(brute(module, modulation), frequency_hz, 330.0, mod_index, phi_rad)
    np.testing.assert_allclose(run.rows.t_max_c[-1], want["max_c"], atol=0.3)
    np.testing.assert_allclose(run.rows.t_min_c[-1], want["min_c"], atol=0.3)
    np.testing.assert_allclose(run.rows.loss_j[-1] / 4.0, want["loss_w"], rtol=3e-3)


def damage(run):
    """Damage per chip by the package's own counting and lifetime stages."""
    counter = CycleCounter(24)
    for signal, (t, time, half, ripple) in run.turning.items():
        counter.push(signal, t, time, None, half, ripple)
    closed = counter.finish("repeat", period_s=float(run.rows.end_s[-1]))
    tables = [closed.select(closed.signal < 12)]
    for range_k, mean_c, count, half in run.ripple:
        w = half.size
        tables.append(CycleTable.ripple(
            signal=np.tile(np.arange(12), w), range_k=range_k.ravel(), mean_c=mean_c.ravel(), heating_s=np.repeat(half, 12),
            start_s=np.zeros(12 * w), end_s=np.zeros(12 * w), phase_id=np.zeros(12 * w, int), count=count.ravel()))
    table = CycleTable.concat(tables)
    n_f, _ = load_model("lesit-1997-refit").cycles_to_failure(table.range_k, table.mean_c, table.min_c, table.max_c, table.heating_s)
    return np.bincount(table.signal, weights=table.count / n_f, minlength=12)


@pytest.mark.slow
@pytest.mark.parametrize("modulation", MODULATIONS)
def test_transient(modulation):
    """300 s of start, ramp, cruise, generative stop and standstill, forwards and backwards."""
    rows = reference.issue_transient_rows()
    want = reference.transient(brute("heron-300", modulation, SINK_R, SINK_TAU), rows)
    n = len(rows.dt_s)
    op = points(n, frequency_hz=rows.f_hz, direction=rows.direction, i_peak_a=rows.i_peak_a, mod_index=rows.mod_index, phi_rad=rows.phi_rad,
                current_angle_rad=rows.current_angle_rad)
    run = march(op, rows.dt_s, modulation=modulation)
    np.testing.assert_allclose(run.rows.t_max_c.max(axis=0), want["peak_c"], atol=0.5)
    np.testing.assert_allclose(run.rows.t_min_c.min(axis=0), want["lowest_c"], atol=0.5)
    assert run.rows.loss_j.sum() == pytest.approx(want["energy_j"].sum(), rel=3e-3)
    np.testing.assert_allclose(run.rows.loss_j.sum(axis=0), want["energy_j"], rtol=5e-3)
    np.testing.assert_allclose(damage(run), reference.damage_per_chip(want), rtol=0.03)


def test_case_points():
    """Case peaks of the same duty, first minute."""
    rows = reference.issue_transient_rows().cut(0, 120)
    want = reference.transient(brute("heron-300", "space-vector", SINK_R, SINK_TAU), rows)
    op = points(120, frequency_hz=rows.f_hz, direction=rows.direction, i_peak_a=rows.i_peak_a, mod_index=rows.mod_index, phi_rad=rows.phi_rad,
                current_angle_rad=rows.current_angle_rad)
    run = march(op, rows.dt_s)
    np.testing.assert_allclose(run.rows.case_max_c.max(axis=0), np.broadcast_to(want["case_peak_c"], 12), atol=0.3)


@pytest.mark.parametrize("theta_deg", [90.0, 30.0, 200.0])
def test_standstill(theta_deg):
    """Three phases carry different direct currents; each chip gets its own temperature."""
    theta = np.radians(theta_deg)
    run = march(points(40, frequency_hz=0.0, i_peak_a=250.0, mod_index=0.05, phi_rad=0.0), 2.0, sink="light", theta_rad=theta)
    want = reference.steady_extremes(brute("heron-300", "space-vector"), 0.0, 250.0, 0.05, 0.0, theta0_rad=theta)
    np.testing.assert_allclose(run.rows.t_max_c[-1], want["max_c"], atol=0.3)
