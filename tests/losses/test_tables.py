"""Loss tables and their kernels against the functions they were built from, compiled and as plain Python."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from mission.device import load_module, module_from_dict, shipped_modules
from mission.errors import InputError
from mission.losses import MOD_INDEX_SIX_STEP, Modulation, build_tables, kernels, leg_losses_at_angle_w, leg_losses_w, phase_reference, reference_for

from ..device.factories import straight_line_data, straight_line_module
from .factories import reference

MODULES = {name: load_module(name) for name in shipped_modules()}
TABLES = {}
DEAD = {"dead_time_s": 2e-6, "dead_time_compensated": False}


def tables_of(name, modulation, dead=False):
    key = name, modulation, dead
    if key not in TABLES:
        TABLES[key] = build_tables(MODULES[name], modulation, **(DEAD if dead else {}))
    return TABLES[key]


class Reader:
    """The kernels of one table set, at one operating point."""

    def __init__(self, tables, *, i, m, phi, f_sw=8e3, v_dc=600.0, f=50.0, direction=1.0):
        self.tables = tables
        drive, self.conduction, self.switching, self.knot, self.step, self.voltage, self.energy, v_ref, exponent, gate = tables.kernel_arrays()
        self.drive, self.point = drive, np.zeros(kernels.SCALE + v_ref.size)
        size, first, last = (v[0] for v in reference_for(tables.modulation, m))
        kernels.set_point(self.point, drive, i, size, phi, direction, first, last, f_sw, f, v_dc, v_ref, exponent, gate)
        self.shape = (len(tables.plan.positions), self.knot.size)
        self.border = np.empty(kernels.MOST_BORDERS)

    def means(self, kernel=kernels.period_means):
        out, half = np.empty(self.shape), np.empty(self.shape)
        kernel(self.point, self.drive, self.conduction, self.switching, self.step, self.voltage, self.energy, half, self.border, out)
        return out

    def nodes(self, count=128, kernel=kernels.angle_nodes):
        out = np.zeros((count + 1, self.shape[0], max(self.shape[1], 2)))
        kernel(count, self.point, self.drive, self.conduction, self.switching, self.knot, self.step, self.voltage, self.energy,
               np.empty(self.shape), self.border, out)
        return out

    def at(self, corners, t_c):
        """Corner values (positions, k) read at one temperature."""
        hinge = np.empty(max(self.knot.size, 2))
        out = []
        for row in corners:
            kernels.to_hinges(row, self.knot, self.knot.size, hinge)
            out.append(kernels.at_temperature(hinge, self.knot, self.knot.size - 1, t_c))
        return np.array(out)

    def instant(self, theta, t_c, kernel=kernels.add_losses):
        corner = np.zeros(self.shape)
        kernel(theta, 1.0, self.point, self.drive, self.conduction, self.switching, self.step, self.voltage, self.energy, corner)
        return self.at(corner, t_c)


CASES = st.tuples(st.sampled_from(sorted(MODULES)), st.sampled_from(list(Modulation)), st.booleans())
SHARE, PHI = st.floats(0.02, 1.0), st.floats(-np.pi, np.pi)
TEMPERATURE = st.one_of(st.floats(20.0, 180.0), st.sampled_from([25.0, 125.0, 150.0]))


def exact(name, modulation, dead, **point):
    return leg_losses_w(MODULES[name], modulation, **point, **(DEAD if dead else {}))


@settings(derandomize=True, max_examples=300, deadline=None)
@given(CASES, SHARE, SHARE, PHI, TEMPERATURE, st.sampled_from([0.0, 2e3, 16e3]), st.sampled_from([-1.0, 1.0]), st.booleans())
def test_period_means_are_the_exact_means(case, current, m, phi, t_c, f_sw, direction, beyond):
    """*Independent code*: the NumPy reckoning cuts the period at every kink; the kernel reads tables at a few points."""
    name, modulation, dead = case
    i = current * MODULES[name].ratings.i_peak_repetitive_a
    beyond = beyond and not modulation.holds
    limit = modulation.mod_index_max
    m = limit + m * (MOD_INDEX_SIX_STEP - limit) if beyond else m * limit
    want = exact(name, modulation, dead, i_peak_a=i, mod_index=m, phi_rad=phi, t_vj_c=t_c, switching_frequency_hz=f_sw, v_dc_v=600.0,
                 frequency_hz=60.0, overmodulation=beyond).total_w[:, 0]
    read = Reader(tables_of(*case), i=i, m=m, phi=phi, f_sw=f_sw, f=60.0, direction=direction)
    found = read.at(read.means(), t_c)
    # at the edge of the linear range itself the reference touches the rail, and pulses shorter than the dead time come or do not come by rounding
    share = 3e-3 if dead and m >= limit * (1.0 - 1e-9) else 1e-3
    np.testing.assert_allclose(found, want, atol=share * want.max() + 0.01)
    # along the angle: linear between 128 nodes, so its area is that of a trapezoid rule
    nodes = read.nodes()
    mean = [np.mean([kernels.at_temperature(n[p], read.knot, read.knot.size - 1, t_c) for n in nodes[:-1]]) for p in range(nodes.shape[1])]
    np.testing.assert_allclose(mean, want, atol=2e-3 * want.max() + 0.01)


@settings(derandomize=True, max_examples=200, deadline=None)
@given(CASES, SHARE, SHARE, PHI, TEMPERATURE, st.floats(0.0, 6.28), st.booleans())
def test_instants(case, current, m, phi, t_c, theta, compiled):
    name, modulation, dead = case
    i = current * MODULES[name].ratings.i_peak_repetitive_a
    point = {"i_peak_a": i, "mod_index": m * modulation.mod_index_max, "phi_rad": phi, "t_vj_c": t_c, "switching_frequency_hz": 8e3, "v_dc_v": 600.0,
             "frequency_hz": 50.0}
    around = [leg_losses_at_angle_w(MODULES[name], modulation, [theta - d, theta + d], **point, **(DEAD if dead else {})).total_w for d in (1e-7,)][0]
    if np.abs(around[:, 0] - around[:, 1]).max() > 1e-3 * around.max() + 0.01:
        return  # a jump: either side is right
    read = Reader(tables_of(*case), i=i, m=m * modulation.mod_index_max, phi=phi)
    found = read.instant(theta, t_c, kernels.add_losses if compiled else kernels.add_losses.py_func)
    # cells of a few ampere that hold a corner of a curve are off by up to 0.2 %
    np.testing.assert_allclose(found, around[:, 0], atol=2e-3 * around.max() + 0.03)


def test_reference_kernel_is_the_reference():
    for modulation in Modulation:
        for x in np.linspace(-7.0, 7.0, 321):
            for m in (0.3, 1.0):
                size, phi = m * modulation.mod_index_max, 0.3
                want = float(phase_reference(modulation, x, size, phi))
                shift = float(modulation.shift_rad(phi))
                for kernel in (kernels.reference_at.py_func,):
                    assert kernel(modulation.code, x, size, shift)[0] == pytest.approx(want, abs=1e-9)
                if modulation.value in ("sine", "third-harmonic", "space-vector"):
                    assert want == pytest.approx(float(reference(modulation.value, x, size)), abs=1e-12)
                assert abs(want) <= 1.0 + 1e-9


# Analytic: one phase at +I, two at -I/2, duty 0.5 (all voltage references near zero). Ratio to the mean over a turn: pi for
# an offset alone, 4 for a slope alone, pi for a switching energy linear in current.
@pytest.mark.parametrize(("change", "stall_w", "ratio"), [
    ({}, 135.0, 3.51921), ({"r_t_ohm": 0.0}, 0.9 * 150 / 2, np.pi), ({"v_t0_v": 1e-12}, 6e-3 * 150**2 / 2, 4.0),
])
def test_standstill_against_rotation(change, stall_w, ratio):
    module = straight_line_module(**change)
    read = Reader(build_tables(module, Modulation.SINE), i=150.0, m=0.0, phi=0.0, f_sw=0.0, f=0.0)
    stall = read.instant(np.pi / 2, 80.0)[0]
    turning = leg_losses_w(module, Modulation.SINE, i_peak_a=150.0, mod_index=0.0, phi_rad=0.0, t_vj_c=80.0, switching_frequency_hz=0.0,
                           v_dc_v=600.0).conduction_w[0, 0]
    assert stall == pytest.approx(stall_w, rel=1e-9)
    assert stall / turning == pytest.approx(ratio, rel=2e-6)
    # the other two phases carry half of it in their lower switches
    assert read.instant(np.pi / 2 + 2 * np.pi / 3, 80.0)[1] < 0.51 * stall


def test_standstill_switching_ratio_is_pi():
    tables = build_tables(straight_line_module(), Modulation.SINE)
    switched, still = (Reader(tables, i=150.0, m=0.0, phi=0.0, f_sw=f, f=0.0) for f in (8e3, 0.0))
    stall = switched.instant(np.pi / 2, 80.0)[0] - still.instant(np.pi / 2, 80.0)[0]
    assert stall == pytest.approx(8e3 * 0.030, rel=1e-12)  # analytic: f (Eon + Eoff)
    assert stall / (switched.at(switched.means(), 80.0) - still.at(still.means(), 80.0))[0] == pytest.approx(np.pi, rel=1e-6)


def test_a_node_beside_a_jump_keeps_the_area():
    """*Analytic*: held for 60 degrees at each peak; the mean of the nodes must not depend on where the grid falls."""
    tables = tables_of("heron-300", Modulation.CLAMP_60_VOLTAGE)
    for phi in np.linspace(0.0, 2 * np.pi / 128, 7):
        read = Reader(tables, i=300.0, m=0.8, phi=phi)
        nodes = read.nodes()
        mean = np.mean([kernels.at_temperature(n[0], read.knot, read.knot.size - 1, 125.0) for n in nodes[:-1]])
        assert mean == pytest.approx(read.at(read.means(), 125.0)[0], rel=5e-4)


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
    tables = tables_of("heron-300", Modulation.SPACE_VECTOR)
    assert tables.knot_c.tolist() == [25.0, 125.0, 150.0]
    assert tables.i_max_a == pytest.approx(1200.0) and tables.current_data_end_a == 600.0 and tables.temperature_data_c == (25.0, 150.0)
    point = Reader(tables, i=1.0, m=0.5, phi=0.0, f_sw=2e3, v_dc=300.0).point
    np.testing.assert_allclose(point[kernels.SCALE:], 2e3 * 0.5 ** np.array([1.35, 1.35, 0.6]))


def uneven(hot_only_from=125.0):
    """Energies at other temperatures than voltages, falling so that their extension to 25 degC is negative."""
    data = straight_line_data()
    curve = data["diode"]["recovery"]["curve"]
    curve[0]["t_vj_c"], curve[1]["t_vj_c"] = hot_only_from, hot_only_from + 25.0
    curve[1]["energy_j"] = [3 * e for e in curve[1]["energy_j"]]
    return module_from_dict(data)


def test_curves_at_different_temperatures_share_one_set_of_corners():
    data = straight_line_data()
    data["switch"]["turn_off"]["curve"][0]["t_vj_c"] = 60.0
    data["switch"]["turn_off"]["curve"][0]["energy_j"] = [0.8 * e for e in data["switch"]["turn_off"]["curve"][0]["energy_j"]]
    module = module_from_dict(data)
    tables = build_tables(module, Modulation.SINE)
    assert tables.knot_c.tolist() == [25.0, 60.0, 125.0] and tables.temperature_data_c == (60.0, 125.0)
    for t_c in (0.0, 25.0, 40.0, 60.0, 90.0, 125.0, 170.0):
        want = leg_losses_w(module, Modulation.SINE, i_peak_a=200.0, mod_index=0.7, phi_rad=0.4, t_vj_c=t_c,
                            switching_frequency_hz=8e3, v_dc_v=600.0).total_w[0, 0]
        read = Reader(tables, i=200.0, m=0.7, phi=0.4)
        assert read.at(read.means(), t_c)[0] == pytest.approx(want, rel=1e-3)


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


def test_a_far_end_of_a_line_does_not_coarsen_the_table():
    """Straight lines said to hold up to a kiloampere or to a megaampere: the same losses at the same current."""
    data = straight_line_data()
    means = []
    for end in (600.0, 1e6):
        data["switch"]["on_state"] = {"line": [{"t_vj_c": t, "v0_v": 0.9, "r_ohm": 6e-3, "current_end_a": end} for t in (25.0, 125.0)]}
        read = Reader(build_tables(module_from_dict(data), Modulation.SINE), i=100.0, m=0.8, phi=0.5)
        means.append(read.at(read.means(), 100.0))
    np.testing.assert_allclose(means[1], means[0], rtol=1e-3)


def test_the_peak_switches_at_the_edge_of_the_linear_range():
    """At m = 1 as at m = 0.9999: the highest current must not lose its switching."""
    tables = tables_of("heron-300", Modulation.SINE)
    for phi in (0.0, np.pi):
        edge, below = (Reader(tables, i=130.0, m=m, phi=phi, f_sw=16e3) for m in (1.0, 0.9999))
        np.testing.assert_allclose(edge.nodes(64)[:, 0], below.nodes(64)[:, 0], rtol=1e-3, atol=0.3)


def test_a_three_level_leg_at_zero_voltage_does_not_switch():
    point = {"i_peak_a": 200.0, "mod_index": 0.0, "phi_rad": 0.3, "t_vj_c": 125.0, "switching_frequency_hz": 8e3, "v_dc_v": 800.0}
    exact = leg_losses_w(MODULES["curlew-300"], Modulation.SINE, **point)
    assert not exact.switching_w.any()
    read = Reader(tables_of("curlew-300", Modulation.SINE), i=200.0, m=0.0, phi=0.3, v_dc=800.0)
    np.testing.assert_allclose(read.at(read.means(), 125.0), exact.total_w[:, 0], rtol=1e-3, atol=1e-9)
