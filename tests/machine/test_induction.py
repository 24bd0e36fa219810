"""Induction machines against the impedances of the equivalent circuit, solved as a network, and against closed forms."""

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq, minimize_scalar

from mission.device import load_module
from mission.errors import InputError
from mission.losses import Modulation, leg_losses_w
from mission.machine import InductionMachine, InductionVf, Shortfall, SynchronousMachine, magnetising_current_a
from mission.tomlfile import parse_model

from .factories import M_MAX, V_DC, V_MAX, changed, points

CIRCUIT = dict(pole_pairs=2, r_s_ohm=0.08, r_r_ohm=0.06, l_s_sigma_h=0.6e-3, l_r_sigma_h=0.7e-3)
TABLE = {"current_a": [10.0, 20.0, 30.0, 45.0, 70.0], "l_m_h": [24e-3, 23e-3, 20e-3, 16e-3, 12e-3]}
MACHINES = {
    "linear": InductionMachine(kind="induction", **CIRCUIT, l_m_h=22e-3, magnetising_current_a=28.0),
    "flux": InductionMachine(kind="induction", **CIRCUIT, l_m_h=22e-3, rotor_flux_wb=0.8),
    "saturated": InductionMachine(kind="induction", **CIRCUIT, saturation=TABLE, magnetising_current_a=28.0),
    "warm": InductionMachine(kind="induction", **{**CIRCUIT, "pole_pairs": 3, "l_r_sigma_h": 0.0, "winding_c": 120.0}, l_m_h=15e-3, rotor_flux_wb=0.7),
}
SUPPLY = dict(rated_voltage_v=400.0, rated_frequency_hz=50.0)
VF = {
    "linear": InductionVf(kind="induction-vf", **CIRCUIT, l_m_h=22e-3, **SUPPLY, boost_v=8.0),
    "saturated": InductionVf(kind="induction-vf", **CIRCUIT, saturation=TABLE, **SUPPLY, boost_v=4.0),
    "no boost": InductionVf(kind="induction-vf", **CIRCUIT, l_m_h=22e-3, **SUPPLY),
}


def main_inductance(machine, i_m):
    """Chord inductance at a peak magnetising current, own interpolation of the flux."""
    if machine.saturation is None:
        return machine.l_m_h
    peak = np.sqrt(2.0) * np.array([0.0, *machine.saturation.current_a])
    flux = peak * np.array([1.0, *machine.saturation.l_m_h])
    return np.interp(i_m, peak, flux) / i_m if i_m > 0 else machine.saturation.l_m_h[0]


def network(machine, omega, slip, voltage):
    """Stator and rotor current of the T circuit at a peak voltage: parallel and series impedances, L_m by bisection on its own current."""
    r_s = machine.r_s_ohm * (1 + 0.00393 * (machine.winding_c - 20.0))

    def solve(l_m):
        # the rotor branch is r_r w / slip + j w L_rs; slip multiplied through so that no slip is no special case
        magnetising = 1j * omega * l_m
        y_rotor = slip / (omega * (machine.r_r_ohm + 1j * slip * machine.l_r_sigma_h))
        parallel = 1.0 / (1.0 / magnetising + y_rotor)
        i_s = voltage / (r_s + 1j * omega * machine.l_s_sigma_h + parallel)
        return i_s, -i_s * parallel * y_rotor, i_s * parallel / magnetising

    if machine.saturation is None:
        return solve(machine.l_m_h)
    i_m = brentq(lambda i: abs(solve(main_inductance(machine, i))[2]) - i, 1e-9, 1e4, xtol=1e-12, rtol=1e-14)
    return solve(main_inductance(machine, i_m))


def check_against_network(machine, p, k=0, speed=None):
    """Current, displacement, torque and power of an operating point; returns the slip and the rotor current."""
    w = 2 * np.pi * p.frequency_hz[k]
    if w < 1e-3:
        return 0.0, 0.0
    rotor = machine.pole_pairs * speed * p.direction[k]
    slip = w - rotor
    i_s, i_r, _ = network(machine, w, slip, p.v_peak_v[k])
    assert abs(i_s) == pytest.approx(p.i_peak_a[k], rel=1e-6)
    assert np.cos(-np.angle(i_s) - p.phi_rad[k]) == pytest.approx(1.0, abs=1e-10)
    # copper loss of the rotor is slip times air-gap power
    torque = p.direction[k] * 1.5 * machine.pole_pairs * machine.r_r_ohm * abs(i_r) ** 2 / slip if abs(slip) > 1e-9 else 0.0
    assert torque == pytest.approx(p.torque_nm[k], rel=1e-6, abs=1e-6)
    r_s = machine.r_s_ohm * (1 + 0.00393 * (machine.winding_c - 20.0))
    power = 1.5 * p.v_peak_v[k] * p.i_peak_a[k] * np.cos(p.phi_rad[k])
    losses = 1.5 * (r_s * p.i_peak_a[k] ** 2 + machine.r_r_ohm * abs(i_r) ** 2)
    assert power == pytest.approx(losses + p.torque_nm[k] * speed, rel=1e-6, abs=1e-3)
    return slip, i_r


def signed(limit):
    return st.floats(-limit, limit).map(lambda x: x if abs(x) > 1e-4 else 0.0)


fluxed = st.sampled_from(sorted(MACHINES))
driven = st.sampled_from(sorted(VF))


# --- held rotor flux -----------------------------------------------------------------------


@settings(derandomize=True, max_examples=150, deadline=None)
@given(fluxed, signed(250.0), signed(300.0))
def test_torque_duty_against_the_circuit(name, torque, speed):
    machine = MACHINES[name]
    try:
        p = points(machine, torque_nm=torque, speed_rad_s=speed)
    except InputError as err:
        assert "before breakdown" in str(err)
        assume(False)
    assert p.torque_nm[0] == pytest.approx(torque, rel=1e-6, abs=1e-9)
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12) and p.mod_index[0] <= M_MAX * (1 + 1e-12)
    slip, i_r = check_against_network(machine, p, speed=speed)
    if abs(slip) > 1e-3:
        flux = machine.r_r_ohm * abs(i_r) / abs(slip)
        # rated rotor flux, or less on the voltage limit
        assert flux <= machine.rated_flux_wb * (1 + 1e-6)
        if flux < machine.rated_flux_wb * (1 - 1e-6):
            assert p.v_peak_v[0] == pytest.approx(V_MAX, rel=1e-9)


@pytest.mark.parametrize("name", MACHINES)
@pytest.mark.parametrize("torque", [60.0, -60.0])
@pytest.mark.parametrize("speed", [290.0, -290.0, 220.0])
def test_weakened_flux_is_the_largest_that_fits(name, torque, speed):
    """Independent code: for every flux on a fine scale the current that makes the torque, and the voltage of the network."""
    machine = MACHINES[name]
    drives = torque * np.sign(speed)
    rotor = machine.pole_pairs * abs(speed)

    def excess(flux):
        # torque = 3/2 p r_r I_r^2 / slip with I_r = slip flux / r_r
        slip = drives * machine.r_r_ohm / (1.5 * machine.pole_pairs * flux**2)
        w = rotor + slip
        i_r = -1j * slip * flux / machine.r_r_ohm
        main = flux - machine.l_r_sigma_h * i_r
        i_m = brentq(lambda i: main_inductance(machine, i) * i - abs(main), 0.0, 1e4, xtol=1e-12, rtol=1e-14)
        i_s = main / main_inductance(machine, i_m) - i_r
        r_s = machine.r_s_ohm * (1 + 0.00393 * (machine.winding_c - 20.0))
        return abs(r_s * i_s + 1j * w * (main + machine.l_s_sigma_h * i_s)) - V_MAX

    scale = np.linspace(machine.rated_flux_wb, 0.1, 400)
    fits = np.array([excess(x) for x in scale]) <= 0.0
    first = int(np.argmax(fits))
    assert fits.any()
    flux = scale[0] if first == 0 else brentq(excess, scale[first], scale[first - 1], xtol=1e-13)
    p = points(machine, torque_nm=torque, speed_rad_s=speed)
    slip, i_r = check_against_network(machine, p, speed=speed)
    assert machine.r_r_ohm * abs(i_r) / abs(slip) == pytest.approx(flux, rel=1e-7)


@settings(derandomize=True, max_examples=100, deadline=None)
@given(fluxed, signed(200.0), signed(250.0))
def test_current_duty_against_the_circuit(name, current, speed):
    machine = MACHINES[name]
    try:
        p = points(machine, current_a=current, speed_rad_s=speed)
    except InputError as err:
        # too little for the flux, or too much for the voltage
        assert "between the magnetising one and breakdown" in str(err)
        assume(False)
    assert p.i_peak_a[0] == pytest.approx(np.sqrt(2.0) * abs(current), rel=1e-9)
    if current == 0.0:
        assert p.v_peak_v[0] == 0.0 and p.torque_nm[0] == 0.0
        return
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12)
    check_against_network(machine, p, speed=speed)
    way = 1.0 if speed >= 0 else -1.0
    assert np.sign(p.torque_nm[0]) in (0.0, np.sign(current) * way)


def test_current_duty_gives_the_torque_back():
    torque, speed = np.array([100.0, -100.0, 45.0, -45.0, 30.0]), np.array([60.0, -60.0, 250.0, 280.0, 0.0])
    for machine in MACHINES.values():
        p = points(machine, torque_nm=torque, speed_rad_s=speed)
        sign = np.where(torque * np.where(speed < 0, -1.0, 1.0) < 0, -1.0, 1.0)
        q = points(machine, current_a=sign * p.i_peak_a / np.sqrt(2.0), speed_rad_s=speed)
        assert q.torque_nm == pytest.approx(torque, rel=1e-6)
        assert q.mod_index == pytest.approx(p.mod_index, rel=1e-6)


def test_rated_flux_and_magnetising_current():
    machine = MACHINES["linear"]
    p = points(machine, torque_nm=0.0, speed_rad_s=100.0)
    # analytic: without torque only the magnetising current flows, a quarter turn behind the voltage but for the resistance
    w = 200.0
    assert p.i_peak_a[0] == pytest.approx(np.sqrt(2.0) * 28.0)
    assert p.v_peak_v[0] == pytest.approx(np.sqrt(2.0) * 28.0 * np.hypot(0.08, w * 22.6e-3))
    assert np.tan(p.phi_rad[0]) == pytest.approx(w * 22.6e-3 / 0.08)
    assert machine.rated_flux_wb == pytest.approx(np.sqrt(2.0) * 28.0 * 22e-3)
    # analytic: T = 3/2 p L_m^2/L_r i_d i_q, slip = i_q / (T_r i_d)
    q = points(machine, torque_nm=100.0, speed_rad_s=50.0)
    i_d, i_q = np.sqrt(2.0) * 28.0, 100.0 / (3.0 * 22e-3**2 / 22.7e-3 * np.sqrt(2.0) * 28.0)
    assert (q.i_d_a[0], q.i_q_a[0]) == (pytest.approx(i_d), pytest.approx(i_q))
    assert q.frequency_hz[0] == pytest.approx((100.0 + 0.06 / 22.7e-3 * i_q / i_d) / (2 * np.pi))


def test_standing_machine_turns_its_field_with_the_slip():
    p = points(MACHINES["linear"], torque_nm=[80.0, -80.0, 0.0], speed_rad_s=0.0)
    i_d, i_q = np.sqrt(2.0) * 28.0, 80.0 / (3.0 * 22e-3**2 / 22.7e-3 * np.sqrt(2.0) * 28.0)
    # analytic
    assert p.frequency_hz[:2] == pytest.approx(0.06 / 22.7e-3 * i_q / i_d / (2 * np.pi))
    assert p.frequency_hz[2] == 0.0 and p.i_peak_a[2] == pytest.approx(i_d) and p.direction.tolist() == [1.0, -1.0, 1.0]
    off = points(changed(MACHINES["linear"], at_rest="off"), torque_nm=[0.0, 0.0], speed_rad_s=[0.0, 10.0])
    assert off.i_peak_a[0] == 0.0 == off.mod_index[0] and off.i_peak_a[1] == pytest.approx(i_d)


def test_braking_more_slowly_than_it_slips_turns_the_field_back():
    slip = points(MACHINES["linear"], torque_nm=80.0, speed_rad_s=0.0).frequency_hz[0] * 2 * np.pi
    speed = 0.25 * slip / 2
    p = points(MACHINES["linear"], torque_nm=[-80.0, 80.0], speed_rad_s=[speed, -speed])
    # analytic: field = shaft - slip
    assert 2 * np.pi * p.frequency_hz == pytest.approx(0.75 * slip)
    assert p.direction.tolist() == [-1.0, 1.0]
    for k in range(2):
        check_against_network(MACHINES["linear"], p, k, speed=(speed, -speed)[k])


@settings(derandomize=True, max_examples=60, deadline=None)
@given(st.sampled_from([*MACHINES.values(), *VF.values()]), signed(120.0), st.floats(0.01, 150.0))
def test_reversed_rotation_is_the_mirror_image(machine, torque, speed):
    try:
        ahead = points(machine, torque_nm=torque, speed_rad_s=speed)
    except InputError:
        with pytest.raises(InputError):
            points(machine, torque_nm=-torque, speed_rad_s=-speed)
        return
    back = points(machine, torque_nm=-torque, speed_rad_s=-speed)
    for name in ("frequency_hz", "i_peak_a", "mod_index", "phi_rad", "i_d_a", "v_peak_v"):
        assert getattr(back, name) == pytest.approx(getattr(ahead, name), rel=1e-9, abs=1e-12), name
    assert back.torque_nm == pytest.approx(-ahead.torque_nm, rel=1e-9, abs=1e-12)
    if ahead.frequency_hz[0] > 0.0:
        assert back.direction == -ahead.direction


@pytest.mark.parametrize("speed", [70.0, -70.0, 0.2, -0.2])
@pytest.mark.parametrize("torque", [70.0, -70.0])
def test_waves_in_time(speed, torque):
    """Phase a from the flux that turns; the voltage as the derivative of the flux linkage plus the resistive drop."""
    machine = MACHINES["linear"]
    p = points(machine, torque_nm=torque, speed_rad_s=speed)
    omega = 2 * np.pi * p.frequency_hz[0] * p.direction[0]
    assert abs(omega) > 0.01
    theta = np.linspace(0.0, np.sign(omega) * 4 * np.pi, 20001)  # angle of the rotor flux
    l_s, l_r, l_m = 22.6e-3, 22.7e-3, 22e-3
    i = (p.i_d_a[0] + 1j * p.i_q_a[0]) * np.exp(1j * theta)
    psi_s = ((l_s - l_m**2 / l_r) * i + l_m / l_r * machine.rated_flux_wb * np.exp(1j * theta)).real
    v = 0.08 * i.real + omega * np.gradient(psi_s, theta)
    assert i.real == pytest.approx(p.i_peak_a[0] * np.sin(theta + p.current_angle_rad[0]), abs=1e-9 * p.i_peak_a[0])
    time_angle = theta + p.current_angle_rad[0] if omega > 0 else np.pi - theta - p.current_angle_rad[0]
    # 1e-6: derivative by differences
    assert v[1:-1] == pytest.approx((p.v_peak_v[0] * np.sin(time_angle + p.phi_rad[0]))[1:-1], abs=1e-6 * V_MAX)


# --- limits --------------------------------------------------------------------------------


def test_breakdown_limits_the_torque():
    machine = changed(MACHINES["linear"], r_s_ohm=0.0, beyond="limit")
    p = points(machine, torque_nm=[900.0, -900.0, -900.0], speed_rad_s=[400.0, -400.0, 400.0])
    l_s, sigma = 22.6e-3, 1 - 22e-3**2 / (22.6e-3 * 22.7e-3)
    s_b = 0.06 / (sigma * 22.7e-3)

    def torque(slip):
        # analytic: of a stator flux V/w at a load angle whose tangent is slip over breakdown slip
        return 3.0 * (1 - sigma) / (sigma * l_s) * (V_MAX / (800.0 + slip)) ** 2 / (slip / s_b + s_b / slip)

    # driving: a little below breakdown, because slip takes from the voltage; braking: at breakdown
    best = minimize_scalar(lambda s: -torque(s), bounds=(1.0, 2 * s_b), options={"xatol": 1e-9})
    assert p.torque_nm == pytest.approx([-best.fun, best.fun, torque(-s_b)], rel=1e-6)
    assert 2 * np.pi * p.frequency_hz - 800.0 == pytest.approx([best.x, best.x, -s_b], rel=1e-4)
    assert p.torque_missing_nm == pytest.approx(900.0 - np.abs(p.torque_nm))
    with pytest.raises(InputError, match=r"row 1 .*900 N m .*before breakdown.*allowed: .* N m at this speed"):
        points(changed(machine, beyond="refuse"), torque_nm=900.0, speed_rad_s=400.0)


@pytest.mark.parametrize("name", MACHINES)
@pytest.mark.parametrize(("torque", "speed"), [(800.0, 40.0), (800.0, 180.0), (-800.0, 180.0), (800.0, 330.0), (-800.0, -20.0), (800.0, -120.0)])
def test_limited_torque_against_a_dense_scan(name, torque, speed):
    """Independent code: all rotor fluxes and slips on a grid that voltage, current and breakdown allow."""
    machine = changed(MACHINES[name], beyond="limit", current_max_a=120.0)
    p = points(machine, torque_nm=torque, speed_rad_s=speed)
    way = np.sign(torque * speed)
    flux = np.linspace(0.02, 1.0, 801)[:, None] * machine.rated_flux_wb
    i_q = way * np.linspace(0.0, 175.0, 801)  # current of the rotor
    slip = machine.r_r_ohm * i_q / flux
    main = flux + 1j * machine.l_r_sigma_h * i_q
    l_m = machine.l_m_h or np.abs(main) / np.interp(np.abs(main), *table_curve())
    i_s = main / l_m + 1j * i_q
    psi_s = main + machine.l_s_sigma_h * i_s
    v = np.abs(machine.r_s_warm_ohm * i_s + 1j * (machine.pole_pairs * abs(speed) + slip) * psi_s)
    ok = (v <= V_MAX) & (np.abs(i_s) <= np.sqrt(2.0) * 120.0) & (np.abs(psi_s.imag) <= psi_s.real) & (np.abs(main) <= (table_curve()[0][-1] if machine.l_m_h is None else 1e9))
    most = (1.5 * machine.pole_pairs * flux * np.abs(i_q))[ok].max()
    # the grid lies below the best by up to a step or two of its 800
    assert most <= abs(p.torque_nm[0]) * (1 + 1e-9) and abs(p.torque_nm[0]) <= most * 1.006
    assert p.v_peak_v[0] <= V_MAX * (1 + 1e-12) and p.i_peak_a[0] <= np.sqrt(2.0) * 120.0 * (1 + 1e-9)
    assert p.torque_missing_nm[0] == pytest.approx(800.0 - abs(p.torque_nm[0]))
    check_against_network(machine, p, speed=speed)


def table_curve():
    peak = np.sqrt(2.0) * np.array([0.0, *TABLE["current_a"]])
    return peak * np.array([1.0, *TABLE["l_m_h"]]), peak


@settings(derandomize=True, max_examples=15, deadline=None)
@given(fluxed, st.floats(1.0, 400.0), st.floats(1.0, 1.5), st.sampled_from([1.0, -1.0]))
def test_faster_is_never_stronger(name, speed, faster, sign):
    machine = changed(MACHINES[name], beyond="limit", current_max_a=150.0)
    # away from the stretch where braking turns the field back, in which less frequency than speed is wanted
    p = points(machine, torque_nm=sign * 2000.0, speed_rad_s=[speed + 30.0, (speed + 30.0) * faster])
    assert abs(p.torque_nm[1]) <= abs(p.torque_nm[0]) * (1 + 1e-6)
    more = points(machine, torque_nm=sign * 2000.0, speed_rad_s=speed + 30.0, v_dc=1.2 * V_DC)
    assert abs(more.torque_nm[0]) >= abs(p.torque_nm[0]) * (1 - 1e-6)


@settings(derandomize=True, max_examples=60, deadline=None)
@given(st.sampled_from([*MACHINES.values(), *VF.values()]), st.floats(0.0, 100.0), st.floats(0.0, 20.0), st.floats(5.0, 130.0))
def test_more_torque_slips_more(machine, torque, more, speed):
    try:
        p = points(machine, torque_nm=[torque, torque + more, -torque, -torque - more], speed_rad_s=speed)
    except InputError:
        assume(False)
    slip = 2 * np.pi * p.frequency_hz * p.direction - machine.pole_pairs * speed
    assert slip[1] >= slip[0] - 1e-9 and slip[3] <= slip[2] + 1e-9
    assert slip[0] >= -1e-9 and slip[2] <= 1e-9


def test_table_of_one_inductance_is_no_table():
    table = {"current_a": [10.0, 500.0], "l_m_h": [22e-3, 22e-3]}
    torque, speed = np.array([60.0, -60.0, 30.0, 0.0, 200.0]), np.array([50.0, -70.0, 290.0, 10.0, 5.0])
    for machine in (MACHINES["linear"], VF["linear"]):
        with_table = type(machine)(**{**machine.model_dump(exclude={"l_m_h"}, exclude_none=True), "saturation": table})
        a, b = (points(m, torque_nm=torque, speed_rad_s=speed if m.kind == "induction" else speed / 3) for m in (machine, with_table))
        for name in ("frequency_hz", "i_peak_a", "mod_index", "phi_rad", "current_angle_rad", "i_d_a", "i_q_a", "torque_nm"):
            assert getattr(a, name) == pytest.approx(getattr(b, name), rel=1e-8, abs=1e-8), name


def test_nothing_beyond_the_table():
    machine = MACHINES["saturated"]
    # 0.91 Wb is between the points at 20 and 30 A
    assert float(magnetising_current_a(machine, np.sqrt(2.0) * 0.5 * (20 * 23e-3 + 30 * 20e-3))) == pytest.approx(np.sqrt(2.0) * 25.0)
    assert np.isnan(magnetising_current_a(machine, np.sqrt(2.0) * 70 * 12e-3 * 1.001))
    # leakage of the rotor lifts the main flux over the end of the table: refused, not weakened
    short = changed(machine, saturation={"current_a": [10.0, 28.0], "l_m_h": [24e-3, 21e-3]})
    for one in (short, changed(short, beyond="limit", current_max_a=500.0)):
        with pytest.raises(InputError, match="row 2 .*before breakdown.*saturation table.*what the section saturation"):
            points(one, torque_nm=[0.0, 300.0], speed_rad_s=20.0)
    with pytest.raises(InputError, match="row 2 .*between the magnetising one and breakdown"):
        points(short, current_a=[28.0, 200.0], speed_rad_s=20.0)


# --- plain voltage by frequency -------------------------------------------------------------


@settings(derandomize=True, max_examples=150, deadline=None)
@given(driven, signed(150.0), signed(140.0))
def test_vf_torque_duty_against_the_network(name, torque, speed):
    machine = VF[name]
    try:
        p = points(machine, torque_nm=torque, speed_rad_s=speed)
    except InputError as err:
        assert "before breakdown" in str(err)
        assume(False)
    assert p.torque_nm[0] == pytest.approx(torque, rel=1e-6, abs=1e-9)
    share = min(p.frequency_hz[0] / 50.0, 1.0)
    # analytic: the law itself
    assert p.v_peak_v[0] == pytest.approx(np.sqrt(2 / 3) * (machine.boost_v + (400.0 - machine.boost_v) * share))
    check_against_network(machine, p, speed=speed)


@pytest.mark.parametrize("name", VF)
@pytest.mark.parametrize("frequency", [4.0, 25.0, 50.0])
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_vf_slip_is_the_smallest_one(name, frequency, sign):
    """Independent code: slip by a scan of the network's torque, at a given frequency; breakdown is the top of it."""
    machine = VF[name]
    w = 2 * np.pi * frequency
    v = np.sqrt(2 / 3) * (machine.boost_v + (400.0 - machine.boost_v) * frequency / 50.0)

    def torque(slip):
        _, i_r, _ = network(machine, w, slip, v)
        return 1.5 * machine.pole_pairs * machine.r_r_ohm * abs(i_r) ** 2 / slip

    slips = sign * np.linspace(1e-3, 100.0, 1500)
    course = sign * np.array([torque(s) for s in slips])
    if machine.saturation is not None:
        # the table ends on the way: a machine that brakes slowly is lifted by its own resistance
        inside = np.array([abs(network(machine, w, s, v)[2]) for s in slips]) <= np.sqrt(2.0) * TABLE["current_a"][-1]
        course = np.where(np.logical_and.accumulate(inside), course, -1.0)
    top = int(np.argmax(course))
    wanted = 0.7 * course[top]
    k = int(np.argmax(course >= wanted))
    slip = brentq(lambda s: torque(s) - sign * wanted, slips[k - 1], slips[k])
    p = points(machine, torque_nm=sign * wanted, frequency_hz=frequency)
    _, i_r, _ = network(machine, w, slip, v)
    i_s = network(machine, w, slip, v)[0]
    assert p.i_peak_a[0] == pytest.approx(abs(i_s), rel=1e-6) and p.phi_rad[0] == pytest.approx(-np.angle(i_s), abs=1e-6)
    # the same point from its current
    q = points(machine, current_a=sign * p.i_peak_a / np.sqrt(2.0), frequency_hz=frequency)
    assert q.torque_nm[0] == pytest.approx(p.torque_nm[0], rel=1e-5)
    # breakdown: named, and given by 'limit'; the end of a table is neither
    if course[top + 1] < 0.0:
        with pytest.raises(InputError, match="before breakdown.*what the section saturation"):
            points(changed(machine, beyond="limit"), torque_nm=2 * sign * course[top], frequency_hz=frequency)
        return
    with pytest.raises(InputError, match="before breakdown") as caught:
        points(machine, torque_nm=1.01 * sign * course[top], frequency_hz=frequency)
    assert abs(float(str(caught.value).split("allowed: ")[1].split(" N m")[0])) == pytest.approx(course[top], rel=1e-3)
    limited = points(changed(machine, beyond="limit"), torque_nm=2 * sign * course[top], frequency_hz=frequency)
    assert abs(limited.torque_nm[0]) == pytest.approx(course[top], rel=1e-4)
    assert limited.torque_missing_nm[0] == pytest.approx(2 * course[top] - abs(limited.torque_nm[0]))


def test_vf_against_the_formula_of_kloss():
    machine = changed(VF["no boost"], r_s_ohm=0.0)
    l_s, sigma = 22.6e-3, 1 - 22e-3**2 / (22.6e-3 * 22.7e-3)
    flux = np.sqrt(2 / 3) * 400.0 / (2 * np.pi * 50.0)
    # published (M. Kloss 1909; without stator resistance): T = 2 T_b / (s/s_b + s_b/s); from memory
    top, s_b = 3.0 * (1 - sigma) / (2 * sigma * l_s) * flux**2, 0.06 / (sigma * 22.7e-3)
    speed = np.array([30.0, 60.0, 120.0])
    p = points(machine, torque_nm=0.6 * top, speed_rad_s=speed)
    slip = 2 * np.pi * p.frequency_hz - 2 * speed
    assert 2 * top / (slip / s_b + s_b / slip) == pytest.approx(0.6 * top, rel=1e-9)


def test_vf_voltage_angle_is_carried():
    for speed in (80.0, -80.0):
        p = points(VF["linear"], torque_nm=np.array([60.0, -60.0]), speed_rad_s=speed)
        for k in range(2):
            theta = np.linspace(0, 2 * np.pi, 50)
            time_angle = theta + p.current_angle_rad[k] if speed > 0 else np.pi - theta - p.current_angle_rad[k]
            # analytic: the voltage of phase a is the sine of the carried angle
            assert np.sin(time_angle + p.phi_rad[k]) == pytest.approx(np.sin(theta), abs=1e-12)


def test_vf_voltage_beyond_the_link():
    duty = dict(torque_nm=[20.0, 20.0], speed_rad_s=[60.0, 160.0], v_dc=540.0)
    with pytest.raises(InputError, match=r"row 2 .*voltage by frequency is 326\.6 V.*311\.8 V.*540 V DC"):
        points(VF["linear"], **duty)
    p = points(changed(VF["linear"], beyond="limit"), **duty)
    assert p.v_peak_v[1] == pytest.approx(540.0 / np.sqrt(3.0)) and p.torque_nm == pytest.approx(20.0)
    # analytic
    assert p.voltage_missing_v == pytest.approx([0.0, np.sqrt(2 / 3) * 400.0 - 540.0 / np.sqrt(3.0)])
    assert p.torque_missing_nm.tolist() == [0.0, 0.0]
    assert Shortfall.of(p, np.array([0.0, 0.5]), np.array([0.5, 0.5])).words() == ("voltage by frequency limited: up to 14.83 V missing (peak phase, t = 0.5 s)",)


def test_vf_current_below_no_load():
    with pytest.raises(InputError, match=r"row 2 .*5 A rms at 19\.1 Hz \(rotor\).*between that without load and breakdown"):
        points(VF["linear"], current_a=[0.0, 5.0], speed_rad_s=60.0)


def test_current_limit_of_the_drive():
    for machine in (MACHINES["linear"], VF["linear"]):
        p = points(changed(machine, beyond="limit", current_max_a=60.0), torque_nm=[300.0, 10.0, -300.0], speed_rad_s=60.0)
        assert p.i_peak_a[[0, 2]] == pytest.approx(np.sqrt(2.0) * 60.0, rel=1e-6)
        assert p.torque_missing_nm[1] == 0.0 and (p.torque_missing_nm[[0, 2]] > 50.0).all()
        check_against_network(machine, p, 0, speed=60.0)
        shortfall = Shortfall.of(p, np.array([0.0, 0.5, 1.0]), np.array([0.5, 0.5, 2.0]))
        assert (shortfall.rows, shortfall.time_s) == (2, 2.5) and shortfall.torque_nm == p.torque_missing_nm.max()
        with pytest.raises(InputError, match=r"row 1 .*300 N m.*and 60 A rms"):
            points(changed(machine, current_max_a=60.0), torque_nm=300.0, speed_rad_s=60.0)
        with pytest.raises(InputError, match=r"row 1 .*61 A rms.*current_max_a = 60 A"):
            points(changed(machine, current_max_a=60.0), current_a=61.0, speed_rad_s=60.0)
        with pytest.raises(InputError, match="beyond = 'limit'.*a torque"):
            points(changed(machine, beyond="limit"), current_a=50.0, speed_rad_s=60.0)


# --- losses do not ask which machine it is ---------------------------------------------------


@pytest.mark.parametrize(("torque", "speed"), [(90.0, 100.0), (-90.0, 100.0), (40.0, -140.0)])
def test_same_point_same_losses_as_a_synchronous_machine(torque, speed):
    p = points(MACHINES["linear"], torque_nm=torque, speed_rad_s=speed)
    w, i = 2 * np.pi * p.frequency_hz[0], p.i_peak_a[0]
    # a round rotor with its current along q and the same voltage: V cos(phi) = R I + w psi, V sin(phi) = w L I
    sign = np.sign(np.cos(p.phi_rad[0]))
    along, across = p.v_peak_v[0] * np.cos(p.phi_rad[0]) * sign, p.v_peak_v[0] * np.sin(p.phi_rad[0])
    round_h = across / (w * i)
    twin = SynchronousMachine(kind="synchronous", pole_pairs=1, r_s_ohm=0.01, l_d_h=round_h, l_q_h=round_h, psi_pm_wb=(along - sign * 0.01 * i) / w)
    q = points(twin, current_a=sign * i / np.sqrt(2.0), speed_rad_s=p.direction[0] * w)
    module, losses = load_module("heron-300"), []
    for one in (p, q):
        losses.append(leg_losses_w(module, Modulation("space-vector"), i_peak_a=one.i_peak_a, mod_index=one.mod_index, phi_rad=one.phi_rad, frequency_hz=one.frequency_hz,
                                   t_vj_c=100.0, switching_frequency_hz=5000.0, v_dc_v=V_DC).total_w)
    assert losses[0] == pytest.approx(losses[1], rel=1e-9) and losses[0].min() > 1.0
    assert q.frequency_hz == pytest.approx(p.frequency_hz)


# --- files -----------------------------------------------------------------------------------

GOOD = {"kind": "induction", **CIRCUIT, "l_m_h": 22e-3, "magnetising_current_a": 28.0}
GOOD_VF = {"kind": "induction-vf", **CIRCUIT, "l_m_h": 22e-3, **SUPPLY}


@pytest.mark.parametrize(
    ("machine", "fragments"),
    [
        (GOOD | {"rotor_flux_wb": 0.8}, ["magnetising_current_a", "both"]),
        (GOOD | {"magnetising_current_a": None}, ["neither magnetising_current_a nor rotor_flux_wb"]),
        (GOOD | {"l_m_h": None}, ["neither l_m_h nor a section saturation"]),
        (GOOD | {"l_m_h": 22.0}, ["22 H", "henry"]),
        (GOOD | {"l_s_sigma_h": 0.0, "l_r_sigma_h": 0.0}, ["l_s_sigma_h", "above 0"]),
        (GOOD | {"l_m_h": None, "saturation": {"current_a": [10.0, 20.0], "l_m_h": [20e-3, 9e-3]}}, ["saturation.l_m_h", "rising main flux"]),
        (GOOD | {"l_m_h": None, "saturation": {"current_a": [10.0, 20.0], "l_m_h": [20e-3, 19e-3]}}, ["28 A", "at most 20 A"]),
        (GOOD | {"l_m_h": None, "saturation": {"current_a": [20.0, 10.0], "l_m_h": [20e-3, 19e-3]}}, ["saturation.current_a", "rise from point to point"]),
        (GOOD | {"l_m_h": None, "saturation": {"current_a": [20.0, 30.0], "l_m_h": [20e-3]}}, ["saturation.l_m_h", "1 values"]),
        (GOOD | {"winding_c": 400.0}, ["winding_c", "at most 250"]),
        (GOOD | {"beyond": "clip"}, ["beyond", "refuse, limit"]),
        (GOOD_VF | {"boost_v": 400.0}, ["boost_v", "below rated_voltage_v"]),
        (GOOD_VF | {"magnetising_current_a": 28.0}, ["magnetising_current_a", "kind = 'induction'"]),
        (GOOD | {"kind": "inducton"}, ["did you mean 'induction'?"]),
    ],
)
def test_broken_machines(machine, fragments):
    from mission.machine import MachineSpec
    from mission.tomlfile import FileModel

    class Study(FileModel):
        machine: MachineSpec

    assert parse_model({"machine": GOOD}, Study, "study.toml").machine == MACHINES["linear"]
    with pytest.raises(InputError) as caught:
        parse_model({"machine": {k: v for k, v in machine.items() if v is not None}}, Study, "study.toml")
    for fragment in ["study.toml", "machine", *fragments]:
        assert fragment in str(caught.value)


def test_columns_that_do_not_fit():
    for columns, fragment in [
        ({"torque_nm": 1.0, "frequency_hz": 10.0}, "no speed_rad_s .*machine kind 'induction'"),
        ({"speed_rad_s": 1.0}, "neither current nor torque"),
        ({"speed_rad_s": 1.0, "torque_nm": [1.0, np.nan]}, "row 2 .*torque_nm.*nan"),
    ]:
        with pytest.raises(InputError, match=fragment):
            points(MACHINES["linear"], **columns)
    with pytest.raises(InputError, match="neither speed nor frequency"):
        points(VF["linear"], torque_nm=1.0)
