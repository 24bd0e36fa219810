"""Gate, overshoot, crossing and current sharing of parallel chips."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import (
    current_sharing,
    load_module,
    module_from_dict,
    on_state_crossing_a,
    on_state_voltage_v,
    temperature_coefficient_v_per_k,
    turn_off_peak_v,
)
from mission.errors import InputError, RangeError

from .factories import straight_line_data

HERON = load_module("heron-300")


def test_overshoot_is_l_di_dt():
    """*Analytic*: 90 to 10 % of the current in the fall time."""
    assert turn_off_peak_v(800.0, 400.0, 25e-9, 80e-9) == pytest.approx(800.0 + 25e-9 * 0.8 * 400.0 / 80e-9)
    with pytest.raises(RangeError, match="fall_time_s"):
        turn_off_peak_v(800.0, 400.0, 25e-9, 0.0)


def test_crossing_is_where_the_temperature_coefficient_changes_sign():
    crossing = on_state_crossing_a(HERON.switch.on_state)
    cold, hot = (float(on_state_voltage_v(HERON.switch.on_state, crossing, t)) for t in (25.0, 150.0))
    assert cold == pytest.approx(hot, abs=1e-12)
    assert float(on_state_voltage_v(HERON.switch.on_state, 0.5 * crossing, 150.0)) < float(on_state_voltage_v(HERON.switch.on_state, 0.5 * crossing, 25.0))
    assert float(temperature_coefficient_v_per_k(HERON.switch.on_state, 300.0, 125.0)) == pytest.approx((2.0 - 1.941) / 25.0)
    straight = module_from_dict(straight_line_data())
    assert on_state_crossing_a(straight.switch.on_state) is None  # the same line at both temperatures


def straight(tc_v_per_k, v0=0.9, r=6e-3):
    """v0 + r i at 25 degC, shifted by ``tc_v_per_k`` a kelvin."""
    data = straight_line_data()
    data["switch"]["on_state"] = {"line": [
        {"t_vj_c": t, "v0_v": v0 + tc_v_per_k * (t - 25.0), "r_ohm": r, "current_end_a": 600.0} for t in (25.0, 125.0)]}
    return module_from_dict(data).switch.on_state


@settings(derandomize=True, max_examples=60, deadline=None)
@given(st.integers(2, 6), st.floats(0.0, 0.2), st.floats(50.0, 500.0))
def test_sharing_without_temperature_is_a_resistor_divider(n, spread, current):
    """*Analytic*: chips v0 + n r i each; one of them lower by the spread: i_1 = I/n + spread (n - 1)/(n n r)."""
    found = current_sharing(straight(0.0), n, spread, current_a=current, t_vj_c=80.0, local_rise_k=0.0)
    want = 1.0 + spread * (n - 1) / (n * 6e-3 * current)
    if want < n:
        assert found.share == pytest.approx(want, rel=1e-6) and found.settles and found.hotter_k == pytest.approx(0.0, abs=1e-9)


def test_a_positive_coefficient_pulls_together_a_negative_one_drives_apart():
    """*Analytic* for two chips: share - 1 = spread/(2 r I - 2 tc' rise), tc' = coefficient of the whole position seen by both chips."""
    r, current, rise, spread = 6e-3, 300.0, 40.0, 0.05
    for tc in (1e-3, -1e-3):
        found = current_sharing(straight(tc), 2, spread, current_a=current, t_vj_c=100.0, local_rise_k=rise)
        want = 1.0 + spread / (2.0 * r * current + 2.0 * tc * rise)
        assert found.share == pytest.approx(want, rel=1e-4)
        assert found.hotter_k == pytest.approx((want - 1.0) * rise, rel=1e-3)
    even = current_sharing(straight(0.0), 2, spread, current_a=current, t_vj_c=100.0, local_rise_k=rise).share
    assert current_sharing(straight(1e-3), 2, spread, current_a=current, t_vj_c=100.0, local_rise_k=rise).share < even


def test_strong_negative_coefficient_hogs_the_current():
    found = current_sharing(straight(-4e-3, r=1e-4), 2, 0.05, current_a=200.0, t_vj_c=100.0, local_rise_k=60.0)
    assert not found.settles and found.share > 1.9


def test_no_spread_no_difference_and_no_current_neither():
    assert current_sharing(HERON.switch.on_state, 4, 0.0, current_a=300.0, t_vj_c=120.0, local_rise_k=40.0).share == pytest.approx(1.0, abs=1e-5)
    assert current_sharing(HERON.switch.on_state, 4, 0.1, current_a=0.0, t_vj_c=120.0, local_rise_k=0.0).share == 1.0


def test_lines_alone_are_two_point_curves_and_lines_beside_points_do_not_count():
    line = straight(0.0)
    np.testing.assert_allclose(on_state_voltage_v(line, [0.0, 150.0, 900.0], 60.0), [0.9, 1.8, 6.3])
    data = straight_line_data()
    data["switch"]["on_state"]["line"] = [{"t_vj_c": t, "v0_v": 5.0, "r_ohm": 1.0, "current_end_a": 600.0} for t in (25.0, 125.0)]
    both = module_from_dict(data).switch.on_state
    assert both.points == both.curve and len(both.line) == 2
    assert float(on_state_voltage_v(both, 150.0, 60.0)) == pytest.approx(1.8)


@pytest.mark.parametrize(("change", "words"), [
    (lambda d: d["ratings"].update(t_vj_overload_c=175.0), "all three or none"),
    (lambda d: d["ratings"].update(t_vj_overload_c=100.0, overload_longest_s=10.0, overload_share=0.2), "above the continuous one"),
    (lambda d: d.update(kind="mosfet"), "no section diode.thermal with kind = 'mosfet'"),
    (lambda d: d.update(arrangement="npc-leg"), "a section inner_switch"),
    (lambda d: d.update(kind="mosfet", arrangement="t-type-leg"), "igbt or igbt-schottky in three-level legs"),
    (lambda d: d["diode"].pop("recovery"), "recovery energies with kind = 'igbt'"),
    (lambda d: d["switch"].update(reverse=d["switch"]["on_state"]), "reverse curves with kind = 'mosfet' only"),
    (lambda d: d.update(clamp_diode=d["diode"]), "no section clamp_diode"),
    (lambda d: d["switch"]["turn_on"].update(gate_resistor={"r_ref_ohm": 9.0, "r_ohm": [1.0, 4.0], "energy_j": [0.01, 0.02]}), "where the curve runs"),
    (lambda d: d["switch"]["turn_on"].update(gate_resistor={"r_ref_ohm": 3.0, "r_ohm": [2.5, 4.0], "energy_j": [0.01, 0.02]}), "gate.r_on_ohm"),
    (lambda d: d["switch"]["turn_on"].update(gate_resistor={"r_ref_ohm": 3.0, "r_ohm": [2.0, 2.0], "energy_j": [0.01, 0.02]}), "rise from point to point"),
    (lambda d: d["switch"].update(parallel={"chips": 1, "on_state_spread_v": 0.1}), "chips"),
    (lambda d: d.update(switching={"stray_inductance_h": 20.0, "fall_time_s": 1e-7}), "stray_inductance_h"),
])
def test_what_a_file_gets_wrong_about_the_new_parts(change, words):
    data = straight_line_data()
    change(data)
    with pytest.raises(InputError) as caught:
        module_from_dict(data)
    assert words in str(caught.value)
