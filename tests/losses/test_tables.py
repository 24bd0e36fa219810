"""Loss tables and their kernels against the functions they were built from, compiled and as plain Python."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import load_module, module_from_dict
from mission.errors import InputError
from mission.losses import Modulation, build_tables, kernels, mean_losses_w, phase_reference

from ..device.factories import straight_line_data, straight_line_module
from .factories import curve_value, reference

MODULES = {name: load_module(name) for name in ("heron-300", "kite-300")}
TABLES = {(name, kind): build_tables(module, kind) for name, module in MODULES.items() for kind in Modulation}
COMPILED = (kernels.period_mean_corners, kernels.instant_corners, kernels.to_hinges, kernels.at_temperature)
PLAIN = tuple(k.py_func for k in COMPILED)


@pytest.fixture(params=["compiled", "plain"])
def look_up(request):
    mean, instant, to_hinges, at_temperature = COMPILED if request.param == "compiled" else PLAIN

    def at(tables, kind, t_c, scale, *, i, m=None, phi=None, share=None):
        k = tables.knot_c.size
        corner, hinge = np.empty(k), np.full(k, np.nan)
        if share is None:
            mean(kind, i, m, phi, scale, tables.i_step_a, tables.conduction_w, tables.energy_mean_j, tables.order, tables.amount, corner)
        else:
            instant(kind, i, share, scale, tables.i_step_a, tables.voltage_v, tables.energy_j, corner)
        to_hinges(corner, tables.knot_c, k, hinge)
        return at_temperature(hinge, tables.knot_c, k - 1, t_c)

    return at


CURRENT = st.one_of(st.floats(0.0, 30.0), st.floats(0.0, 1200.0))
TEMPERATURE = st.one_of(st.floats(-60.0, 220.0), st.sampled_from([25.0, 125.0, 150.0, 175.0]))


@settings(derandomize=True, max_examples=150, deadline=None)
@given(
    st.sampled_from(list(TABLES)), CURRENT, st.floats(0.0, 1.0), st.floats(-np.pi, np.pi), TEMPERATURE, st.sampled_from([0.0, 2e3, 16e3]),
    st.floats(200.0, 900.0), st.integers(0, 1), st.booleans(),
)
def test_period_means(which, i, m, phi, t_c, f_hz, v_dc_v, kind, compiled):
    mean, _, to_hinges, at_temperature = COMPILED if compiled else PLAIN
    tables = TABLES[which]
    m *= which[1].mod_index_max
    want = mean_losses_w(MODULES[which[0]], which[1], i_peak_a=i, mod_index=m, phi_rad=phi, t_switch_c=t_c, t_diode_c=t_c,
                         switching_frequency_hz=f_hz, v_dc_v=v_dc_v)
    name = ("switch", "diode")[kind]
    want_w = (want[f"{name}_conduction"] + want[f"{name}_switching"])[0]
    k = tables.knot_c.size
    corner, hinge = np.empty(k), np.empty(k)
    mean(kind, i, m, phi, tables.energy_scale(v_dc_v, f_hz)[:, 0], tables.i_step_a, tables.conduction_w, tables.energy_mean_j,
         tables.order, tables.amount, corner)
    to_hinges(corner, tables.knot_c, k, hinge)
    # 0.1 %. Table currents lie 2 A apart, so the first cells, where power bends with the square of the
    # current, are off by up to 4 mW: 6 % of next to nothing at 1 A.
    assert at_temperature(hinge, tables.knot_c, k - 1, t_c) == pytest.approx(want_w, rel=1e-3, abs=6e-3)


@settings(derandomize=True, max_examples=150, deadline=None)
@given(st.sampled_from(list(TABLES)), CURRENT, st.floats(0.0, 1.0), TEMPERATURE, st.sampled_from([0.0, 2e3, 16e3]), st.floats(200.0, 900.0),
       st.integers(0, 1), st.booleans())
def test_instants(which, i, share, t_c, f_hz, v_dc_v, kind, compiled):
    _, instant, to_hinges, at_temperature = COMPILED if compiled else PLAIN
    module, tables = MODULES[which[0]], TABLES[which]
    side = (module.switch, module.diode)[kind]
    energies = ((module.switch.turn_on, module.switch.turn_off), (module.diode.recovery,))[kind]
    want_w = curve_value(side.on_state, i, t_c) * i * share
    want_w += sum(f_hz * curve_value(e, i, t_c) * (v_dc_v / e.v_ref_v) ** e.voltage_exponent for e in energies)
    k = tables.knot_c.size
    corner, hinge = np.empty(k), np.empty(k)
    instant(kind, i, share, tables.energy_scale(v_dc_v, f_hz)[:, 0], tables.i_step_a, tables.voltage_v, tables.energy_j, corner)
    to_hinges(corner, tables.knot_c, k, hinge)
    # 0.1 %, and 30 mW in the few cells of 2 A that hold a corner of a curve (25, 75, 225 A): there 0.15 % was measured
    assert at_temperature(hinge, tables.knot_c, k - 1, t_c) == pytest.approx(max(want_w, 0.0), rel=1e-3, abs=0.03)


@pytest.mark.parametrize("modulation", list(Modulation))
def test_mean_of_the_instants_is_the_period_mean(modulation, look_up):
    """The two kernels look at the same bridge: sweep the angle with the duty of the zero-sequence kernel."""
    tables = TABLES["heron-300", modulation]
    i, m, phi, t_c = 380.0, 0.93, np.radians(-140.0), 97.0
    scale = tables.energy_scale(650.0, 6e3)[:, 0]
    n = 2000
    theta = (np.arange(n) + 0.5) * np.pi / n
    a, b, c = (m * np.sin(theta + phi + shift) for shift in (0.0, -2 * np.pi / 3, 2 * np.pi / 3))
    duty = [0.5 * (1 + x + kernels.zero_sequence.py_func(modulation.code, x, y, z)) for x, y, z in zip(a, b, c)]
    for kind in (0, 1):
        instants = [look_up(tables, kind, t_c, scale, i=i * np.sin(x), share=d if kind == 0 else 1 - d) for x, d in zip(theta, duty)]
        assert 0.5 * np.mean(instants) == pytest.approx(look_up(tables, kind, t_c, scale, i=i, m=m, phi=phi), rel=2e-4)


# Analytic: one phase at +I, two at -I/2, duty 0.5 (all voltage references near zero). Ratio to the mean over a turn: pi for
# an offset alone, 4 for a slope alone, pi for a switching energy linear in current.
@pytest.mark.parametrize(("change", "stall_w", "ratio"), [
    ({}, 135.0, 3.51921), ({"r_t_ohm": 0.0}, 0.9 * 150 / 2, np.pi), ({"v_t0_v": 1e-12}, 6e-3 * 150**2 / 2, 4.0),
])
def test_standstill_against_rotation(change, stall_w, ratio, look_up):
    module = straight_line_module(**change)
    tables = build_tables(module, Modulation.SINE)
    nothing = np.zeros(3)
    stall = look_up(tables, 0, 80.0, nothing, i=150.0, share=0.5)
    turning = mean_losses_w(module, Modulation.SINE, i_peak_a=150.0, mod_index=0.0, phi_rad=0.0, t_switch_c=80.0, t_diode_c=80.0,
                            switching_frequency_hz=0.0, v_dc_v=600.0)["switch_conduction"][0]
    assert stall == pytest.approx(stall_w, rel=1e-9)
    assert stall / turning == pytest.approx(ratio, rel=2e-6)
    assert look_up(tables, 0, 80.0, nothing, i=75.0, share=0.5) < 0.51 * stall


def test_standstill_switching_ratio_is_pi(look_up):
    tables = build_tables(straight_line_module(), Modulation.SINE)
    scale = tables.energy_scale(600.0, 8e3)[:, 0]
    stall = look_up(tables, 0, 80.0, scale, i=150.0, share=0.0)
    assert stall == pytest.approx(8e3 * 0.030, rel=1e-12)  # analytic: f (Eon + Eoff)
    without = look_up(tables, 0, 80.0, np.zeros(3), i=150.0, m=0.0, phi=0.0)
    assert stall / (look_up(tables, 0, 80.0, scale, i=150.0, m=0.0, phi=0.0) - without) == pytest.approx(np.pi, rel=1e-6)


@settings(derandomize=True, max_examples=200, deadline=None)
@given(st.sampled_from(list(Modulation)), st.floats(-20.0, 20.0), st.floats(0.0, 1.0))
def test_zero_sequence_and_reference(modulation, x, share):
    m = share * modulation.mod_index_max
    legs = [m * np.sin(x), m * np.sin(x - 2 * np.pi / 3), m * np.sin(x + 2 * np.pi / 3)]
    want = float(phase_reference(modulation, x, m))
    assert want == pytest.approx(float(reference(modulation.value, x, m)), abs=1e-12)
    assert abs(want) <= 1.0 + 1e-12
    for zero_sequence in (_zero_sequence, kernels.zero_sequence.py_func):
        assert legs[0] + zero_sequence(modulation.code, *legs) == pytest.approx(want, abs=1e-9)


def _zero_sequence(code, a, b, c):
    from numba import njit

    global _compiled
    if _compiled is None:
        kernel = kernels.zero_sequence
        _compiled = njit(lambda code, a, b, c: kernel(code, a, b, c))
    return _compiled(code, a, b, c)


_compiled = None


@settings(derandomize=True, max_examples=100, deadline=None)
@given(st.lists(st.floats(0.0, 100.0), min_size=2, max_size=5), st.floats(-100.0, 400.0))
def test_hinges_are_the_broken_line(values, t_c):
    knots = np.array([25.0, 60.0, 125.0, 150.0, 175.0])[: len(values)]
    n = knots.size
    k = min(max(int(np.searchsorted(knots, t_c)) - 1, 0), n - 2)
    want = values[k] + (values[k + 1] - values[k]) * (t_c - knots[k]) / (knots[k + 1] - knots[k])
    for to_hinges, at_temperature in ((kernels.to_hinges, kernels.at_temperature), (kernels.to_hinges.py_func, kernels.at_temperature.py_func)):
        hinge = np.empty(n)
        to_hinges(np.array(values), knots, n, hinge)
        assert at_temperature(hinge, knots, n - 1, t_c) == pytest.approx(max(want, 0.0), abs=1e-9)


def test_a_single_corner_is_a_constant():
    for to_hinges, at_temperature in ((kernels.to_hinges, kernels.at_temperature), (kernels.to_hinges.py_func, kernels.at_temperature.py_func)):
        hinge = np.full(2, np.nan)
        to_hinges(np.array([7.0]), np.array([25.0]), 1, hinge)
        assert [at_temperature(hinge, np.array([25.0]), 1, t) for t in (-40.0, 25.0, 200.0)] == [7.0, 7.0, 7.0]


def test_table_describes_itself():
    tables = TABLES["heron-300", Modulation.SPACE_VECTOR]
    assert tables.knot_c.tolist() == [25.0, 125.0, 150.0]
    assert tables.i_max_a == pytest.approx(1200.0) and tables.current_data_end_a == 600.0 and tables.temperature_data_c == (25.0, 150.0)
    np.testing.assert_allclose(tables.energy_scale(300.0, [1e3, 2e3]), np.outer(0.5 ** np.array([1.35, 1.35, 0.6]), [1e3, 2e3]))


def uneven(hot_only_from=125.0):
    """Energies at other temperatures than voltages, falling so that their extension to 25 degC is negative."""
    data = straight_line_data()
    curve = data["diode"]["recovery"]["curve"]
    curve[0]["t_vj_c"], curve[1]["t_vj_c"] = hot_only_from, hot_only_from + 25.0
    curve[1]["energy_j"] = [3 * e for e in curve[1]["energy_j"]]
    return module_from_dict(data)


def test_curves_at_different_temperatures_share_one_set_of_corners(look_up):
    data = straight_line_data()
    data["switch"]["turn_off"]["curve"][0]["t_vj_c"] = 60.0
    data["switch"]["turn_off"]["curve"][0]["energy_j"] = [0.8 * e for e in data["switch"]["turn_off"]["curve"][0]["energy_j"]]
    module = module_from_dict(data)
    tables = build_tables(module, Modulation.SINE)
    assert tables.knot_c.tolist() == [25.0, 60.0, 125.0] and tables.temperature_data_c == (60.0, 125.0)
    for t_c in (0.0, 25.0, 40.0, 60.0, 90.0, 125.0, 170.0):
        want = mean_losses_w(module, Modulation.SINE, i_peak_a=200.0, mod_index=0.7, phi_rad=0.4, t_switch_c=t_c, t_diode_c=t_c,
                             switching_frequency_hz=8e3, v_dc_v=600.0)
        found = look_up(tables, 0, t_c, tables.energy_scale(600.0, 8e3)[:, 0], i=200.0, m=0.7, phi=0.4)
        assert found == pytest.approx((want["switch_conduction"] + want["switch_switching"])[0], rel=1e-3)


def test_negative_extension_is_refused_and_the_curve_is_named():
    with pytest.raises(InputError, match="diode.recovery: found a value below zero at .* A and 25 degC") as caught:
        build_tables(uneven(), Modulation.SINE)
    assert "Straight line" in str(caught.value)


def test_negative_extension_names_curve_and_temperature():
    """Message quality: five sets of curves may be at fault, and the remedy needs to know which, and at what temperature."""
    with pytest.raises(InputError) as caught:
        build_tables(uneven(), Modulation.SINE)
    text = str(caught.value)
    assert "recovery" in text and "25" in text
