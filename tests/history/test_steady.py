"""Steady states, loop gain and runaway (*analytic*): six like chips with straight-line losses on a symmetric network."""

from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import load_module, module_from_dict
from mission.errors import NoStableTemperature
from mission.history import ElectrothermalMarch, HeldPoint, MarchSettings
from mission.losses import Modulation, build_tables
from mission.thermal import FixedCooling, inverter_network, reduce_to_modes

from ..device.factories import straight_line_data
from .marching import march, points

OWN, SHARED = 0.12, 0.02
R = OWN + 6 * SHARED  # rise of every chip per watt in each
ANY = {"i_peak_a": 1.0, "mod_index": 0.5, "phi_rad": 0.0, "frequency_hz": 50.0, "switching_frequency_hz": 1.0, "dc_voltage_v": 1.0}


def held(knot_c, loss_w):
    """Chips with losses given at corner temperatures."""
    tables = SimpleNamespace(knot_c=np.array(knot_c, float), corner_means_w=lambda **_: np.tile(np.array(loss_w, float), (2, 1)))
    network = SimpleNamespace(n_chips=6, r_th_k_per_w=lambda: OWN * np.eye(6) + SHARED)
    return HeldPoint(tables, network, **ANY)


@settings(derandomize=True, max_examples=60, deadline=None)
@given(st.floats(10.0, 300.0), st.floats(-0.5, 0.95), st.floats(-20.0, 80.0))
def test_one_slope_has_a_closed_form(p_25, gain, coolant):
    """T = (Tc + R (P0 - s T0))/(1 - R s), where the loss stays positive."""
    slope = gain / R
    want = (coolant + R * (p_25 - slope * 25.0)) / (1.0 - gain)
    if want > 900.0 or min(p_25 + slope * (want - 25.0), p_25 + slope * (coolant - 25.0)) < 1.0:
        return
    state = held([25.0, 125.0], [p_25, p_25 + 100.0 * slope]).settle(coolant)
    assert state.exists
    np.testing.assert_allclose(state.t_vj_c, want, rtol=1e-6)
    assert state.loop_gain == pytest.approx(gain if gain > 0.0 else gain * OWN / R, abs=1e-9)


# Analytic: 200 W (1 + 0.004 (T - 25)) through 0.3 K/W over 60 degC is 150 degC; the gain is 200 x 0.004 x 0.3.
def test_two_hundred_watts_that_grow():
    tables = SimpleNamespace(knot_c=np.array([25.0, 125.0]), corner_means_w=lambda **_: np.tile([200.0, 280.0], (2, 1)))
    point = HeldPoint(tables, SimpleNamespace(n_chips=6, r_th_k_per_w=lambda: 0.3 * np.eye(6)), **ANY)
    state = point.settle(60.0)
    np.testing.assert_allclose(state.t_vj_c, 150.0, rtol=1e-9)
    assert state.loop_gain == pytest.approx(0.24) and point.runaway_coolant_c(60.0) is None
    # 4.5 K/W in place of 0.3: gain 3.6, no temperature at all
    hot = HeldPoint(tables, SimpleNamespace(n_chips=6, r_th_k_per_w=lambda: 4.5 * np.eye(6)), **ANY)
    assert not hot.settle(60.0).exists and hot.settle(60.0).loop_gain == pytest.approx(3.6)


def test_gain_above_one_has_no_steady_state():
    state = held([25.0, 125.0], [50.0, 50.0 + 100.0 * 1.05 / R]).settle(40.0)
    assert not state.exists and np.isnan(state.t_vj_c).all() and state.loop_gain == pytest.approx(1.05)


@pytest.mark.parametrize("coolant", [0.0, 40.0, 90.0])
def test_coolant_of_runaway_where_the_slope_steepens(coolant):
    """Stable up to the corner at 150 degC, steeper than 1/R beyond: it runs away when it reaches the corner, Tc = 150 - R P(150)."""
    p = [60.0, 60.0 + 125.0 * 0.4 / R]
    point = held([25.0, 150.0, 175.0], [*p, p[1] + 25.0 * 1.5 / R])
    limit = 150.0 - R * p[1]
    assert point.runaway_coolant_c(coolant) == pytest.approx(limit, abs=0.02)
    assert point.settle(limit - 0.1).exists and not point.settle(limit + 0.1).exists


def test_gain_below_one_everywhere_never_runs_away():
    assert held([25.0, 150.0], [60.0, 200.0]).runaway_coolant_c(40.0) is None


def test_settled_state_is_where_the_march_ends():
    """*Independent code*: the same point marched for an hour, 60 Hz; the mean over a period is compared."""
    module = load_module("heron-300")
    tables = build_tables(module, Modulation.SPACE_VECTOR)
    network = reduce_to_modes(inverter_network(module, FixedCooling(kind="fixed", r_th_k_per_w=0.017, heat_capacity_j_per_k=30.0)))
    state = HeldPoint(tables, network, i_peak_a=300.0, mod_index=0.8, phi_rad=0.4, frequency_hz=60.0, switching_frequency_hz=5000.0, dc_voltage_v=600.0).settle(40.0)
    run = march(points(60, frequency_hz=60.0, i_peak_a=300.0, mod_index=0.8, phi_rad=0.4), 2.0, sink="light")
    loss = run.rows.loss_j[-1] / 2.0
    np.testing.assert_allclose(state.loss_w, loss, rtol=6e-3)  # the march adds what the ripple of the temperature costs: 0.4 %
    np.testing.assert_allclose(state.t_vj_c, 40.0 + network.r_th_k_per_w() @ loss, atol=0.5)
    assert (run.rows.t_min_c[-1] < state.t_vj_c).all() and (state.t_vj_c < run.rows.t_max_c[-1]).all()


def steep(factor):
    """A module whose energies at 125 degC are ``factor`` times those at 25 degC."""
    data = straight_line_data()
    for side, name in (("switch", "turn_on"), ("switch", "turn_off"), ("diode", "recovery")):
        hot = data[side][name]["curve"][1]
        hot["energy_j"] = [factor * e for e in hot["energy_j"]]
    return module_from_dict(data)


def run_hot(module, i_peak_a, f_sw_hz):
    tables = build_tables(module, Modulation.SINE)
    network = reduce_to_modes(inverter_network(module, FixedCooling(kind="fixed", r_th_k_per_w=0.05)))
    engine = ElectrothermalMarch(tables, network, MarchSettings())
    engine.start(40.0)
    engine.add_block(points(600, frequency_hz=50.0, i_peak_a=i_peak_a, mod_index=0.8, phi_rad=0.4), dt_s=np.full(600, 5.0), phase_id=np.zeros(600, np.int16),
                     coolant_c=np.full(600, 40.0), switching_frequency_hz=f_sw_hz, dc_voltage_v=600.0)


def test_no_stable_temperature_is_told_with_its_gain():
    with pytest.raises(NoStableTemperature, match=r"no stable temperature exists: [SD]-[abc]-(up|lo) passes 500 degC .*loop gain [1-9]"):
        run_hot(steep(8.0), 150.0, 12e3)


def test_too_hot_but_stable_is_told_apart():
    with pytest.raises(NoStableTemperature, match="far too hot: .* would settle with a mean of [4-9]"):
        run_hot(steep(1.0), 300.0, 48e3)
