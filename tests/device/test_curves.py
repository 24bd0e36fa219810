"""Interpolation, extension beyond the data, gate drive."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from mission.device import (
    gate_drive_power_w,
    gate_peak_current_a,
    load_module,
    module_from_dict,
    on_state_voltage_v,
    outside_data,
    switching_energy_j,
)
from mission.errors import RangeError

from .factories import straight_line_data, straight_line_module


def module_with(**curves_of_switch):
    data = straight_line_data()
    data["switch"]["on_state"]["curve"] = [
        {"t_vj_c": t, "current_a": i, "voltage_v": v} for t, i, v in curves_of_switch["on_state"]
    ]
    return module_from_dict(data)


def by_hand(curves, current_a, t_c):
    """One value, one number at a time: the twin of the array code."""

    def at(curve):
        x, y = curve.current_a, curve.values
        k = 0
        while k < len(x) - 2 and current_a >= x[k + 1]:
            k += 1
        value = y[k] + (y[k + 1] - y[k]) * (current_a - x[k]) / (x[k + 1] - x[k])
        return max(0.0, value)

    k = 0
    while k < len(curves.curve) - 2 and t_c >= curves.curve[k + 1].t_vj_c:
        k += 1
    cold, hot = curves.curve[k : k + 2]
    share = (t_c - cold.t_vj_c) / (hot.t_vj_c - cold.t_vj_c)
    return (1 - share) * at(cold) + share * at(hot)


HERON = load_module("heron-300")


@given(st.floats(0.0, 1500.0), st.floats(-60.0, 220.0), st.sampled_from(["on", "d", "eon", "err"]))
def test_array_code_against_single_numbers(current_a, t_c, which):
    curves = {
        "on": HERON.switch.on_state,
        "d": HERON.diode.on_state,
        "eon": HERON.switch.turn_on,
        "err": HERON.diode.recovery,
    }[which]
    function = on_state_voltage_v if which in ("on", "d") else switching_energy_j
    # independent code
    assert float(function(curves, current_a, t_c)) == pytest.approx(
        by_hand(curves, current_a, t_c), rel=1e-9, abs=1e-15
    )


@pytest.mark.parametrize("name", ["heron-300", "kite-300"])
def test_every_point_of_the_data_sheet_is_met(name):
    m = load_module(name)
    for curves in m.on_state_curves().values():
        for c in curves.curve:
            assert on_state_voltage_v(curves, c.current_a, c.t_vj_c) == pytest.approx(c.voltage_v, rel=1e-12)
    for curves in m.energy_curves().values():
        for c in curves.curve:
            assert switching_energy_j(curves, c.current_a, c.t_vj_c) == pytest.approx(c.energy_j, rel=1e-12)


def test_interpolation_and_extension_worked_out():
    m = module_with(
        on_state=[(20.0, [100.0, 200.0, 300.0], [1.0, 1.5, 1.8]), (120.0, [100.0, 200.0, 300.0], [0.9, 1.7, 2.3])]
    )
    c = m.switch.on_state
    # analytic: lines drawn by hand
    assert float(on_state_voltage_v(c, 150.0, 20.0)) == pytest.approx(1.25)
    assert float(on_state_voltage_v(c, 150.0, 70.0)) == pytest.approx((1.25 + 1.3) / 2)
    assert float(on_state_voltage_v(c, 400.0, 120.0)) == pytest.approx(2.9)  # last two points
    assert float(on_state_voltage_v(c, 50.0, 20.0)) == pytest.approx(0.75)  # first two points
    assert float(on_state_voltage_v(c, 0.0, 120.0)) == pytest.approx(0.1)
    assert float(on_state_voltage_v(c, 200.0, 170.0)) == pytest.approx(1.8)  # both temperatures, and on
    assert float(on_state_voltage_v(c, 200.0, -30.0)) == pytest.approx(1.4)


def test_extension_below_the_first_point_stops_at_zero():
    m = module_with(on_state=[(25.0, [100.0, 200.0], [0.5, 1.5]), (125.0, [100.0, 200.0], [0.5, 1.5])])
    assert on_state_voltage_v(m.switch.on_state, [0.0, 40.0, 50.0, 60.0], 80.0).tolist() == pytest.approx(
        [0.0, 0.0, 0.0, 0.1]
    )


def test_shapes_broadcast():
    m = straight_line_module()
    v = on_state_voltage_v(m.switch.on_state, np.linspace(0, 300, 7)[:, None], np.array([25.0, 80.0, 150.0]))
    assert v.shape == (7, 3)
    # analytic: 0.90 V + 6 mOhm i, whatever the temperature
    assert v == pytest.approx(np.repeat(0.90 + 6e-3 * np.linspace(0, 300, 7)[:, None], 3, axis=1), rel=1e-12)


@pytest.mark.parametrize(
    ("current", "t", "place"),
    [([1.0, -2.0], 25.0, r"current_a\[1\]"), (1.0, np.nan, "t_vj_c"), (np.inf, 25.0, "current_a")],
)
def test_bad_numbers_are_refused(current, t, place):
    with pytest.raises(RangeError, match=place):
        on_state_voltage_v(straight_line_module().switch.on_state, current, t)


def test_outside_data_names_the_side():
    m = module_with(
        on_state=[
            (25.0, [10.0, 200.0], [1.0, 1.5]),
            (125.0, [20.0, 300.0], [0.9, 2.3]),
            (150.0, [20.0, 300.0], [0.9, 2.4]),
        ]
    )
    c = m.switch.on_state
    out = outside_data(
        c,
        [5.0, 15.0, 15.0, 15.0, 250.0, 250.0, 250.0, 100.0, 100.0],
        [25.0, 25.0, 60.0, 125.0, 25.0, 60.0, 125.0, 20.0, 151.0],
    )
    assert out.current_low.tolist() == [True, False, True, True, False, False, False, False, False]
    assert out.current_high.tolist() == [False, False, False, False, True, True, False, False, False]
    assert out.temperature_low.tolist() == [False] * 7 + [True, False]
    assert out.temperature_high.tolist() == [False] * 8 + [True]
    assert out.any.tolist() == [True, False, True, True, True, True, False, True, True]


def test_reference_device_of_the_loss_checks():
    m = straight_line_module()
    # analytic: 0.95 V + 4.5 mOhm x 150 A; 30 mJ and 10 mJ at 150 A, half of it at 75 A
    assert float(on_state_voltage_v(m.diode.on_state, 150.0, 90.0)) == pytest.approx(1.625)
    for i, share in ((150.0, 1.0), (75.0, 0.5)):
        e = switching_energy_j(m.switch.turn_on, i, 40.0) + switching_energy_j(m.switch.turn_off, i, 40.0)
        assert float(e) == pytest.approx(0.030 * share, rel=1e-12)
        assert float(switching_energy_j(m.diode.recovery, i, 40.0)) == pytest.approx(0.010 * share, rel=1e-12)


def test_gate_drive():
    # analytic (P = Q dV f): 1.4 uC x 23 V x 8 kHz
    assert float(gate_drive_power_w(1.4e-6, 15.0, -8.0, 8000.0)) == pytest.approx(0.25760, abs=1e-12)
    # analytic: 23 V over 4.6 ohm
    assert float(gate_peak_current_a(15.0, -8.0, 2.5, 2.1)) == pytest.approx(5.0)
    g = HERON.gate
    peak = gate_peak_current_a(g.v_on_v, g.v_off_v, g.r_internal_ohm, g.r_on_ohm)
    assert 1.0 < peak < 20.0  # common practice: amperes, for a gate of nanofarads
    with pytest.raises(RangeError, match="v_on_v - v_off_v"):
        gate_drive_power_w(1e-6, -8.0, 15.0, 8000.0)
    with pytest.raises(RangeError, match="r_internal_ohm"):
        gate_peak_current_a(15.0, -8.0, 0.0, 0.0)
